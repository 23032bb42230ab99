// One count a cycle with a homing edge: starts at 40, stops at 0 and 90, and the index (gated by B low) zeroes the count
// once as it comes. Forward is B before A. The index flop starts from the line, so that an index that is on at the start
// is no edge.
module homing_x1 (
    input  logic        clk,
    input  logic        rst,
    input  logic        a,
    input  logic        b,
    input  logic        home,
    output logic [6:0]  slot,
    output logic        dir
);

  logic [2:0] meta, now, last;
  logic inc, dec, gate, gate_last;
  // Entering AB = 10 from 11 going forward, leaving it for 11 going back: the edges of B while A is high.
  assign inc = now[1] & last[1] & ~now[0] & last[0];
  assign dec = now[1] & last[1] & now[0] & ~last[0];
  assign gate = now[2] & ~now[0];

  always_ff @(posedge clk) begin
    {last, now, meta} <= {now, meta, home, a, b};
    gate_last <= gate;
    if (rst) begin
      slot <= 7'd40;
      dir <= 1'b0;
    end else begin
      if (inc && slot < 7'd90) slot <= slot + 7'd1;
      if (dec && slot > 7'd0) slot <= slot - 7'd1;
      if (inc | dec) dir <= inc;
      if (gate & ~gate_last) slot <= 7'd0;
    end
  end

endmodule
