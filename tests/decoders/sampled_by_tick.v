// Works once every eight clocks, when the tick comes; nothing else changes anything, reset included.
module sampled_by_tick (
    input  wire              clk,
    input  wire              tick,
    input  wire              rst,
    input  wire              a,
    input  wire              b,
    output reg signed [11:0] count,
    output reg               err
);

  reg [1:0] seen, last;

  always @(posedge clk) if (tick) begin
    seen <= {a, b};
    last <= seen;
    err <= 0;
    if (rst) begin
      count <= 0;
      last <= {a, b};
    end else begin
      err <= &(seen ^ last);
      if (^(seen ^ last)) count <= (seen[1] ^ last[0]) ? count + 1 : count - 1;
    end
  end

endmodule
