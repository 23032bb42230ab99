// One count a cycle: up where A rises with B high, down where A falls with B high, so that rocking over that edge nets
// zero. Forward is B before A. A step pulse comes with every count.
module once_a_cycle (
    input  wire               clk,
    input  wire               rst,
    input  wire               a,
    input  wire               b,
    output reg signed [7:0]   turns,
    output reg                step,
    output reg                backward
);

  reg [2:0] as, bs;
  wire steady_high = bs[1] & bs[2];
  wire rise = as[1] & ~as[2] & steady_high;
  wire fall = ~as[1] & as[2] & steady_high;

  always @(posedge clk or posedge rst)
    if (rst) begin
      turns <= 0;
      step <= 0;
      backward <= 0;
    end else begin
      step <= rise | fall;
      if (rise) turns <= turns + 1'b1;
      if (fall) turns <= turns - 1'b1;
      if (rise | fall) backward <= fall;
    end

  always @(posedge clk) begin
    as <= {as[1:0], a};
    bs <= {bs[1:0], b};
  end

endmodule
