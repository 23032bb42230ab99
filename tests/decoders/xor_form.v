// XOR form: two flops a line, the sample before kept beside them, and the textbook XOR equations between the two.
//
// Synchronous active-high reset. The line flops are not reset, so they follow the lines while reset is on.
`default_nettype none

module xor_form #(
    parameter WIDTH = 10
) (
    input  wire                    clk,
    input  wire                    reset,
    input  wire                    a,
    input  wire                    b,
    output reg signed [WIDTH-1:0]  count,
    output reg                     up,
    output reg                     fault
);

  reg [2:0] a_seen, b_seen;
  wire moved = a_seen[1] ^ a_seen[2] ^ b_seen[1] ^ b_seen[2];
  wire both = (a_seen[1] ^ a_seen[2]) & (b_seen[1] ^ b_seen[2]);
  wire forward = a_seen[1] ^ b_seen[2];

  always @(posedge clk) begin
    a_seen <= {a_seen[1:0], a};
    b_seen <= {b_seen[1:0], b};
    if (reset) begin
      count <= 0;
      up <= 0;
      fault <= 0;
    end else begin
      fault <= both;
      if (moved) begin
        up <= forward;
        count <= forward ? count + 1'b1 : count - 1'b1;
      end
    end
  end

endmodule

`default_nettype wire
