// No reset at all: every register has an initial value, as an FPGA loads it with its configuration.
//
// One flop a line. A short shift register keeps the counter still until the line flops have seen the lines.
module no_reset (
    input  wire               clk,
    input  wire               pulse_a,
    input  wire               pulse_b,
    output reg signed [8:0]   value,
    output reg                sense
);

  reg [1:0] now = 2'b00, last = 2'b00, awake = 2'b00;
  initial begin
    value = 9'd0;
    sense = 1'b0;
  end

  always @(posedge clk) begin
    now <= {pulse_a, pulse_b};
    last <= now;
    awake <= {awake[0], 1'b1};
    if (awake[1])
      case ({last, now})
        4'b0010, 4'b1011, 4'b1101, 4'b0100: begin
          value <= value + 1'b1;
          sense <= 1'b1;
        end
        4'b0001, 4'b0111, 4'b1110, 4'b1000: begin
          value <= value - 1'b1;
          sense <= 1'b0;
        end
        default: ;
      endcase
  end

endmodule
