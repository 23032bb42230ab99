// No reset and no initial values: in the device every register comes up as 0.
module zero_at_power_up (
    input  wire        clk,
    input  wire        a,
    input  wire        b,
    output reg  [15:0] count,
    output reg         direction
);

  reg [1:0] s1, s2, s3;
  reg [1:0] warm;

  always @(posedge clk) begin
    s1 <= {a, b};
    s2 <= s1;
    s3 <= s2;
    if (!(&warm)) warm <= warm + 1;
    else if (^(s2 ^ s3)) begin
      direction <= s2[1] ^ s3[0];
      count <= (s2[1] ^ s3[0]) ? count + 1 : count - 1;
    end
  end

endmodule
