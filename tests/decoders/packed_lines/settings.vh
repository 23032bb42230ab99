// Shared by the files of this folder.
`define PACKED_LINES_STAGES 2
