// Looks at A first: where both lines change at once it takes the edge of A, and counts one up or down by the new levels.
module channel_a_first (
    input  wire               clk,
    input  wire               rst_n,
    input  wire               a,
    input  wire               b,
    output reg signed [11:0]  count,
    output reg                skipped
);

  reg [1:0] meta, now, last;

  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      meta <= 0;
      now <= 0;
      last <= 0;
      count <= 0;
      skipped <= 0;
    end else begin
      meta <= {a, b};
      now <= meta;
      last <= now;
      skipped <= now == ~last;
      if (now[1] != last[1]) count <= now[1] != now[0] ? count + 12'sd1 : count - 12'sd1;
      else if (now[0] != last[0]) count <= now[1] == now[0] ? count + 12'sd1 : count - 12'sd1;
    end

endmodule
