// Coil winder, spindle: quadrature decoder, four counts a cycle, with glitch filter and gated index.
//
// A line must keep a new level for DEPTH clocks to be believed. The index zeroes the position while A and B are both high.
// A change of both lines at once raises `err` for one clock and leaves the position alone.
`default_nettype none

module spindle #(
    parameter WIDTH = 16,
    parameter DEPTH = 3
) (
    input  wire                    clk,
    input  wire                    rst_n,
    input  wire                    enc_a,
    input  wire                    enc_b,
    input  wire                    enc_z,
    output reg signed [WIDTH-1:0]  position,
    output reg                     dir,
    output reg                     err
);

  reg [2:0] meta, synced;
  reg [2:0] history [0:DEPTH-1];
  reg [2:0] lines, earlier;
  // After reset the filter and its follower are filled from the lines, so that no level counts as a change.
  reg [7:0] warm;
  wire      ready = (warm == DEPTH + 3);

  reg [2:0] all_high, all_low;
  integer i;
  always @* begin
    all_high = synced;
    all_low = ~synced;
    for (i = 0; i < DEPTH - 1; i = i + 1) begin
      all_high = all_high & history[i];
      all_low = all_low & ~history[i];
    end
  end

  wire a = lines[0], b = lines[1], z = lines[2];
  wire moved = (a ^ earlier[0]) ^ (b ^ earlier[1]);
  wire jumped = (a ^ earlier[0]) & (b ^ earlier[1]);
  wire up = a ^ earlier[1];

  integer k;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      meta <= 0;
      synced <= 0;
      for (k = 0; k < DEPTH; k = k + 1) history[k] <= 0;
      lines <= 0;
      earlier <= 0;
      warm <= 0;
      position <= 0;
      dir <= 0;
      err <= 0;
    end else begin
      meta <= {enc_z, enc_b, enc_a};
      synced <= meta;
      history[0] <= synced;
      for (k = 1; k < DEPTH; k = k + 1) history[k] <= history[k-1];
      lines <= (lines | all_high) & ~all_low;
      earlier <= lines;
      err <= 0;
      if (!ready) begin
        warm <= warm + 1;
        lines <= synced;
      end else begin
        if (moved) begin
          dir <= up;
          position <= up ? position + 1 : position - 1;
        end
        if (z & a & b) position <= 0;
        err <= jumped;
      end
    end

endmodule

`default_nettype wire
