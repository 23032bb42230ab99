// Counts cycles, and stretches each count to a step of two clocks; while it is stopped it does not look at its lines.
module stretched_step (
    input  logic        clk,
    input  logic        rst_n,
    input  logic        a,
    input  logic        b,
    input  logic        z,
    input  logic        run,
    input  logic        clr,
    output logic [11:0] turns,
    output logic        step,
    output logic        err,
    output logic        mark_n
);

  logic [2:0] meta, now;
  logic [1:0] last;
  logic zone_last, stretch;
  // Over the edge between 11 and 01.
  wire up = run && last == 2'b11 && now[2:1] == 2'b01;
  wire down = run && last == 2'b01 && now[2:1] == 2'b11;
  wire zone = now[0] && now[2:1] == 2'b10;

  always_ff @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      {meta, now, last} <= '0;
      turns <= '0;
      {step, stretch, err, zone_last} <= '0;
      mark_n <= 1'b1;
    end else begin
      meta <= {a, b, z};
      now <= meta;
      if (run) last <= now[2:1];
      zone_last <= zone;
      mark_n <= !(zone && !zone_last);
      if (up) turns <= turns + 12'd1;
      if (down) turns <= turns - 12'd1;
      step <= up | down | stretch;
      stretch <= up | down;
      if (clr) err <= 1'b0;
      else if (run && now[2:1] == ~last) err <= 1'b1;
    end

endmodule
