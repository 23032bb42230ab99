// Saturating count: stops at -100 and +100 and comes off the stop with the first count the other way.
//
// Built from eight edge terms, one for each line, edge and level of the other line.
module saturating #(
    parameter int LOW = -100,
    parameter int HIGH = 100
) (
    input  logic               clk,
    input  logic               arst,
    input  logic               a,
    input  logic               b,
    output logic signed [7:0]  level,
    output logic               rising,
    output logic               invalid_n
);

  logic [2:0] sa, sb;
  always_ff @(posedge clk) begin
    sa <= {sa[1:0], a};
    sb <= {sb[1:0], b};
  end

  logic a_up, a_down, b_up, b_down, a_edge, b_edge, inc, dec;
  assign a_up = sa[1] & ~sa[2];
  assign a_down = ~sa[1] & sa[2];
  assign b_up = sb[1] & ~sb[2];
  assign b_down = ~sb[1] & sb[2];
  assign a_edge = a_up | a_down;
  assign b_edge = b_up | b_down;
  assign inc = (a_up & ~sb[1] & ~b_edge) | (b_up & sa[1] & ~a_edge) | (a_down & sb[1] & ~b_edge) | (b_down & ~sa[1] & ~a_edge);
  assign dec = (a_up & sb[1] & ~b_edge) | (b_up & ~sa[1] & ~a_edge) | (a_down & ~sb[1] & ~b_edge) | (b_down & sa[1] & ~a_edge);

  always_ff @(posedge clk or posedge arst)
    if (arst) begin
      level <= '0;
      rising <= 1'b0;
      invalid_n <= 1'b1;
    end else begin
      invalid_n <= ~(a_edge & b_edge);
      if (inc | dec) rising <= inc;
      if (inc && level < HIGH) level <= level + 8'sd1;
      if (dec && level > LOW) level <= level - 8'sd1;
    end

endmodule
