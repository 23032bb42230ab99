// Steps for two counters elsewhere: one output toggles with each step forward, the other with each step backward.
module up_down_toggle (
    input  wire clk,
    input  wire rst,
    input  wire a,
    input  wire b,
    output reg  fwd,
    output reg  back
);

  reg [1:0] seen, last;

  always @(posedge clk) begin
    seen <= {a, b};
    last <= seen;
    if (rst) begin
      fwd <= 0;
      back <= 0;
      last <= {a, b};
    end else if (^(seen ^ last)) begin
      if (seen[1] ^ last[0]) fwd <= ~fwd;
      else back <= ~back;
    end
  end

endmodule
