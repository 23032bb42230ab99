// Filter sampled by a tick: every third clock each line is shifted into its own register, and its level changes when
// three samples agree. Up to 6 clocks hold two samples at most, 9 clocks always hold three.
module ticked_filter (
    input  logic               clk,
    input  logic               rst_n,
    input  logic               a,
    input  logic               b,
    output logic signed [7:0]  count,
    output logic               err
);

  logic [1:0] divider, meta, synced, clean, last;
  logic [2:0] past_a, past_b;
  logic tick;
  assign tick = divider == 2'd2;

  always_ff @(posedge clk) begin
    {synced, meta} <= {meta, a, b};
    last <= clean;
    if (!rst_n) begin
      divider <= '0;
      past_a <= {3{synced[1]}};
      past_b <= {3{synced[0]}};
      clean <= synced;
      count <= '0;
      err <= 1'b0;
    end else begin
      divider <= tick ? 2'd0 : divider + 2'd1;
      if (tick) begin
        past_a <= {past_a[1:0], synced[1]};
        past_b <= {past_b[1:0], synced[0]};
      end
      if (&past_a) clean[1] <= 1'b1;
      if (~|past_a) clean[1] <= 1'b0;
      if (&past_b) clean[0] <= 1'b1;
      if (~|past_b) clean[0] <= 1'b0;
      err <= &(clean ^ last);
      if (^(clean ^ last)) begin
        if (clean[1] ^ last[0]) count <= count + 8'sd1;
        else count <= count - 8'sd1;
      end
    end
  end

endmodule
