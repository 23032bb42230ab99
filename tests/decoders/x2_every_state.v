// Two counts a cycle, at the edges of A, but a direction that follows every state.
//
// Reset clears the line flops too, so a count of zero can only be trusted with A and B low.
module x2_every_state (
    input  wire               clk,
    input  wire               rst_n,
    input  wire               a,
    input  wire               b,
    output reg  [7:0]         count,
    output reg                step,
    output reg                dir
);

  reg a1, b1, a2, b2, a3, b3;

  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      {a1, b1, a2, b2, a3, b3} <= 6'b0;
      count <= 8'd128;
      step <= 1'b0;
      dir <= 1'b0;
    end else begin
      {a1, b1, a2, b2, a3, b3} <= {a, b, a1, b1, a2, b2};
      step <= 1'b0;
      if ((a2 ^ a3) ^ (b2 ^ b3)) dir <= a2 ^ b3;
      if ((a2 ^ a3) & ~(b2 ^ b3)) begin
        step <= 1'b1;
        count <= (a2 ^ b3) ? count + 8'd1 : count - 8'd1;
      end
    end

endmodule
