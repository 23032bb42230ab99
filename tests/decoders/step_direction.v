// Step and direction only, for a counter elsewhere: a low step pulse for each state, direction from the clock before.
//
// No reset; initial values, and a counter that waits until the line flops have seen the lines.
module step_direction (
    input  wire clk,
    input  wire a,
    input  wire b,
    output reg  step_n,
    output reg  dir
);

  reg [1:0] s0 = 0, s1 = 0, s2 = 0, wait_for = 3;
  reg go = 0;
  initial begin
    step_n = 1;
    dir = 0;
  end

  always @(posedge clk) begin
    s0 <= {a, b};
    s1 <= s0;
    s2 <= s1;
    if (wait_for != 0) wait_for <= wait_for - 1;
    go <= wait_for == 0 && (^(s1 ^ s2));
    if (wait_for == 0 && (^(s1 ^ s2))) dir <= s1[1] ^ s2[0];
    step_n <= ~go;
  end

endmodule
