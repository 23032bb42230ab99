// Clear, load and enable, which act at once, before the line flops have passed on what they saw; clear wins over load.
module loadable (
    input  wire              clk,
    input  wire              rst,
    input  wire              en_n,
    input  wire              clr,
    input  wire              ld,
    input  wire signed [9:0] start,
    input  wire              a,
    input  wire              b,
    output reg  signed [9:0] count,
    output reg               dir
);

  reg [1:0] s1, s2, s3;
  wire move = ^(s2 ^ s3);
  wire forward = s2[1] ^ s3[0];

  always @(posedge clk) begin
    s1 <= {a, b};
    s2 <= s1;
    s3 <= s2;
    if (rst) begin
      count <= 0;
      dir <= 0;
      s3 <= s2;
    end else begin
      if (move) dir <= forward;
      if (clr) count <= 0;
      else if (ld) count <= start;
      else if (move && !en_n) count <= forward ? count + 1 : count - 1;
    end
  end

endmodule
