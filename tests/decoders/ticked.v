// Sampled by a tick: the lines are looked at every DIVIDE clocks only, so the latency depends on where the tick stands,
// and a state must last for DIVIDE clocks to be sure to be seen.
module ticked #(
    parameter DIVIDE = 5
) (
    input  wire               clk,
    input  wire               rst_n,
    input  wire               a,
    input  wire               b,
    output reg signed [7:0]   count,
    output reg                dir,
    output reg                err
);

  reg [1:0] meta, synced, sampled, prior;
  reg [3:0] divider;
  wire tick = divider == DIVIDE - 1;

  always @(posedge clk) begin
    meta <= {a, b};
    synced <= meta;
    err <= 1'b0;
    if (!rst_n) begin
      divider <= 0;
      sampled <= synced;
      prior <= synced;
      count <= 0;
      dir <= 0;
    end else begin
      divider <= tick ? 0 : divider + 1;
      if (tick) sampled <= synced;
      prior <= sampled;
      err <= &(sampled ^ prior);
      if (^(sampled ^ prior)) begin
        dir <= sampled[1] ^ prior[0];
        count <= (sampled[1] ^ prior[0]) ? count + 1 : count - 1;
      end
    end
  end

endmodule
