// Thirty-two bits, unsigned, starts at zero, so that the first step back rolls over to the top end. The index zeroes the
// count at its rising edge, whatever A and B are; the index line is active low.
module wide_32 (
    input  wire         clk,
    input  wire         rst,
    input  wire         a,
    input  wire         b,
    input  wire         mark_n,
    output reg  [31:0]  count
);

  reg [2:0] meta, now, last;
  wire moved = ^(now[1:0] ^ last[1:0]);
  wire up = now[1] ^ last[0];

  always @(posedge clk) begin
    meta <= {~mark_n, a, b};
    now <= meta;
    last <= now;
    if (rst) count <= 32'd0;
    else if (now[2] & ~last[2]) count <= 32'd0;
    else if (moved) count <= up ? count + 32'd1 : count - 32'd1;
  end

endmodule
