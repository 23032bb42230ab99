// No synchroniser: the lines, active low here, go straight into the comparison, so the count answers at the first clock
// edge that sees a change. Two counts a cycle, at the edges of B; forward is B before A.
module bare_x2 (
    input  wire               clk,
    input  wire               por,
    input  wire               a_n,
    input  wire               b_n,
    output reg signed [7:0]   half_counts,
    output reg                forward,
    output reg                both
);

  wire a = ~a_n, b = ~b_n;
  reg a_before, b_before;
  wire b_edge = b ^ b_before, a_edge = a ^ a_before;

  always @(posedge clk) begin
    a_before <= a;
    b_before <= b;
    both <= 1'b0;
    if (por) begin
      half_counts <= 8'd0;
      forward <= 1'b0;
    end else begin
      both <= a_edge & b_edge;
      if (b_edge & ~a_edge) begin
        forward <= b ^ a;
        half_counts <= (b ^ a) ? half_counts + 8'd1 : half_counts - 8'd1;
      end
    end
  end

endmodule
