// The synchroniser: STAGES flops a line.
`include "settings.vh"

module input_stage (
    input  wire       clk,
    input  wire [2:0] raw,
    output wire [2:0] synced
);
  reg [3*`PACKED_LINES_STAGES-1:0] pipe;
  always @(posedge clk) pipe <= {pipe[3*`PACKED_LINES_STAGES-4:0], raw};
  assign synced = pipe[3*`PACKED_LINES_STAGES-1-:3];
endmodule
