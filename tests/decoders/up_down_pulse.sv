// Low pulses on one of two outputs, and a counter of illegal transitions that stops at its end.
module up_down_pulse (
    input  logic       clk,
    input  logic       rst_n,
    input  logic       a,
    input  logic       b,
    output logic       up_n,
    output logic       down_n,
    output logic [3:0] faults
);

  logic [1:0] seen, last;

  always_ff @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      seen <= 0;
      last <= 0;
      up_n <= 1;
      down_n <= 1;
      faults <= 0;
    end else begin
      seen <= {a, b};
      last <= seen;
      up_n <= ~(^(seen ^ last) & (seen[1] ^ last[0]));
      down_n <= ~(^(seen ^ last) & ~(seen[1] ^ last[0]));
      if (&(seen ^ last) && faults != 15) faults <= faults + 1;
    end

endmodule
