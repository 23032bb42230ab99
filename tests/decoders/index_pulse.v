// A pulse each time the index becomes active while A is low; the index line is low while active.
module index_pulse (
    input  wire       clk,
    input  wire       rst,
    input  wire       a,
    input  wire       b,
    input  wire       z_n,
    output reg        step,
    output reg        dir,
    output reg        home
);

  reg [1:0] s1, s2;
  reg z1, zone;
  wire in_zone = ~z1 & ~s1[1];

  always @(posedge clk) begin
    s1 <= {a, b};
    s2 <= s1;
    z1 <= z_n;
    zone <= in_zone;
    home <= in_zone & ~zone & ~rst;
    step <= ^(s1 ^ s2) & ~rst;
    dir <= s1[1] ^ s2[0];
    if (rst) begin
      s2 <= {a, b};
      zone <= 1;
    end
  end

endmodule
