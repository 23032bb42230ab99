// Integrating filter: each line has a counter that goes up while the line is high and down while it is low; the
// filtered level changes when the counter reaches an end. Short pulses that follow one another closely can add up.
module updown_filter #(
    parameter int DEPTH = 4
) (
    input  logic clk,
    input  logic fill,
    input  logic raw,
    output logic clean
);
  logic [3:0] level;
  always_ff @(posedge clk)
    if (fill) begin
      level <= raw ? 4'(DEPTH) : 4'd0;
      clean <= raw;
    end else begin
      if (raw && level != 4'(DEPTH)) level <= level + 4'd1;
      if (!raw && level != 4'd0) level <= level - 4'd1;
      if (raw && level == 4'(DEPTH - 1)) clean <= 1'b1;
      if (!raw && level == 4'd1) clean <= 1'b0;
    end
endmodule

module integrating_filter #(
    parameter int DEPTH = 4
) (
    input  logic               clk,
    input  logic               rst,
    input  logic               a_in,
    input  logic               b_in,
    output logic signed [7:0]  count,
    output logic               dir,
    output logic               err
);

  logic [1:0] meta, now, last;
  logic a, b;
  always_ff @(posedge clk) {now, meta} <= {meta, a_in, b_in};

  updown_filter #(.DEPTH(DEPTH)) filter_a (.clk, .fill(rst), .raw(now[1]), .clean(a));
  updown_filter #(.DEPTH(DEPTH)) filter_b (.clk, .fill(rst), .raw(now[0]), .clean(b));

  always_ff @(posedge clk) begin
    last <= {a, b};
    err <= 1'b0;
    if (rst) begin
      count <= '0;
      dir <= 1'b0;
    end else begin
      if ((a ^ last[1]) & (b ^ last[0])) err <= 1'b1;
      else if ((a ^ last[1]) | (b ^ last[0])) begin
        dir <= a ^ last[0];
        if (a ^ last[0]) count <= count + 8'sd1;
        else count <= count - 8'sd1;
      end
    end
  end

endmodule
