// A lid that moves between two stops: counts from 0 to 200, starts at 100, stays at its ends. The error, active low,
// stays until reset. The reset is let go two clocks late, in step with the clock, and the count comes two clocks later
// than the step it is made from.
module lid_position (
    input  logic        clk,
    input  logic        por_n,
    input  logic        phase_1,
    input  logic        phase_2,
    output logic [7:0]  lid,
    output logic        ok
);

  logic [1:0] release_pipe;
  always_ff @(posedge clk or negedge por_n)
    if (!por_n) release_pipe <= 2'b00;
    else release_pipe <= {release_pipe[0], 1'b1};

  logic [1:0] meta, now, last, inc, dec;
  always_ff @(posedge clk) begin
    {last, now, meta} <= {now, meta, phase_1, phase_2};
    inc <= {inc[0], (^(now ^ last)) && (now[1] ^ last[0])};
    dec <= {dec[0], (^(now ^ last)) && !(now[1] ^ last[0])};
    if (!release_pipe[1]) begin
      inc <= 2'b00;
      dec <= 2'b00;
    end
  end

  always_ff @(posedge clk or negedge release_pipe[1])
    if (!release_pipe[1]) begin
      lid <= 8'd100;
      ok <= 1'b1;
    end else begin
      if (&(now ^ last)) ok <= 1'b0;
      if (inc[1] && lid != 8'd200) lid <= lid + 8'd1;
      if (dec[1] && lid != 8'd0) lid <= lid - 8'd1;
    end

endmodule
