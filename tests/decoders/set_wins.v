// A sticky error that a pulse clears; an illegal transition in the same clock is not lost.
module set_wins (
    input  wire       clk,
    input  wire       rst,
    input  wire       a,
    input  wire       b,
    input  wire       ack_n,
    output reg  [7:0] count,
    output reg        lost
);

  reg [1:0] s1, s2;

  always @(posedge clk) begin
    s1 <= {a, b};
    s2 <= s1;
    if (rst) begin
      count <= 0;
      lost <= 0;
      s2 <= {a, b};
    end else begin
      if (^(s1 ^ s2)) count <= (s1[1] ^ s2[0]) ? count + 1 : count - 1;
      if (&(s1 ^ s2)) lost <= 1;
      else if (!ack_n) lost <= 0;
    end
  end

endmodule
