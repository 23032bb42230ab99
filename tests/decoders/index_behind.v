// The index goes through one flop more than A and B: the count moves first and is zeroed a clock later, and a step that
// falls into that clock counts from zero. It zeroes once, as the index comes.
module index_behind (
    input  wire               clk,
    input  wire               rst,
    input  wire               a,
    input  wire               b,
    input  wire               z,
    output reg signed [7:0]   count
);

  reg [1:0] meta, now, last;
  reg [3:0] mark;
  wire moved = ^(now ^ last);
  wire up = now[1] ^ last[0];

  always @(posedge clk) begin
    meta <= {a, b};
    now <= meta;
    last <= now;
    mark <= {mark[2:0], z};
    if (rst) count <= 8'd0;
    else if (mark[2] & ~mark[3]) count <= moved ? (up ? 8'sd1 : -8'sd1) : 8'sd0;
    else if (moved) count <= up ? count + 8'd1 : count - 8'd1;
  end

endmodule
