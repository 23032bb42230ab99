// One turn: counts 0 to 3999 and starts again. The index zeroes the count while A and B are both low.
module one_turn #(
    parameter COUNTS = 4000
) (
    input  wire         clk,
    input  wire         rst_n,
    input  wire         a,
    input  wire         b,
    input  wire         z,
    output reg  [11:0]  angle,
    output reg          ccw,
    output reg          skip
);

  reg [2:0] first, now, last;
  wire moved = now[2] ^ last[2] ^ now[1] ^ last[1];
  wire up = now[2] ^ last[1];

  always @(posedge clk) begin
    first <= {a, b, z};
    now <= first;
    last <= now;
  end

  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      angle <= 0;
      ccw <= 0;
      skip <= 0;
    end else begin
      skip <= (now[2] ^ last[2]) & (now[1] ^ last[1]);
      if (moved) begin
        ccw <= ~up;
        if (up) angle <= (angle == COUNTS - 1) ? 0 : angle + 1;
        else angle <= (angle == 0) ? COUNTS - 1 : angle - 1;
      end
      if (now == 3'b001) angle <= 0;
    end

endmodule
