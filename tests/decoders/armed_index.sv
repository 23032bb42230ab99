// The index zeroes the count once as it comes, if it is armed; an edge of clear counts the step of the same clock.
module armed_index (
    input  logic        clk,
    input  logic        rst_n,
    input  logic        arm,
    input  logic        zero,
    input  logic        a,
    input  logic        b,
    input  logic        z,
    output logic [15:0] pos
);

  logic [2:0] s1, s2;
  logic zone_old, zero_old;
  wire zone = s1[0] & ~s1[2] & ~s1[1];
  wire move = ^(s1[2:1] ^ s2[2:1]);
  wire [15:0] by = move ? ((s1[2] ^ s2[1]) ? 16'd1 : 16'hffff) : 16'd0;

  always_ff @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      s1 <= 0;
      s2 <= 0;
      zone_old <= 0;
      zero_old <= 0;
      pos <= 0;
    end else begin
      s1 <= {a, b, z};
      s2 <= s1;
      zone_old <= zone;
      zero_old <= zero;
      if (zone && !zone_old && arm) pos <= 0;
      else if (zero && !zero_old) pos <= by;
      else pos <= pos + by;
    end

endmodule
