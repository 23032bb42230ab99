// The count runs on; the index copies it into a second register as it rises.
module index_latch (
    input  wire        clk,
    input  wire        rst,
    input  wire        a,
    input  wire        b,
    input  wire        z,
    output reg  [9:0]  count,
    output reg  [9:0]  captured,
    output reg         dir
);

  reg [2:0] s1, s2, s3;

  always @(negedge clk) begin
    s1 <= {a, b, z};
    s2 <= s1;
    s3 <= s2;
    if (rst) begin
      count <= 0;
      captured <= 0;
      dir <= 0;
      s3 <= s2;
    end else begin
      if (^(s2[2:1] ^ s3[2:1])) begin
        count <= (s2[2] ^ s3[1]) ? count + 1 : count - 1;
        dir <= s2[2] ^ s3[1];
      end
      if (s2[0] & ~s3[0]) captured <= count;
    end
  end

endmodule
