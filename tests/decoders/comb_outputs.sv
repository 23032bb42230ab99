// Combinational outputs: the count shown is the stored one plus what the lines do at this moment, so it changes with the
// lines and not with the clock; the clock only stores it.
module comb_outputs (
    input  logic               clk,
    input  logic               rst,
    input  logic               a,
    input  logic               b,
    output logic signed [8:0]  count,
    output logic               up,
    output logic               err
);

  logic signed [8:0] stored;
  logic [1:0] prior, changed;

  always_comb begin
    changed = {a, b} ^ prior;
    up = a ^ prior[0];
    err = &changed & ~rst;
    count = stored;
    if (^changed & ~rst) count = up ? stored + 9'sd1 : stored - 9'sd1;
  end

  always_ff @(posedge clk) begin
    prior <= {a, b};
    stored <= rst ? 9'sd0 : count;
  end

endmodule
