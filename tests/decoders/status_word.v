// All in one read-out word: {error, direction, step line, 5 spare bits, count[23:0] in two parts}.
//
// The step line rises with each count and falls a clock or two later, whatever comes first.
module status_word (
    input  wire        clk,
    input  wire        rst,
    input  wire [1:0]  ba,
    output wire [31:0] word,
    output wire [7:0]  low
);

  reg [1:0] seen, last;
  reg [11:0] count;
  reg dir, step, err;
  wire move = ^(seen ^ last);

  assign word = {err, dir, step, 17'd0, count[11:8], 8'd0};
  assign low = count[7:0];

  always @(posedge clk) begin
    seen <= {ba[0], ba[1]};
    last <= seen;
    step <= 0;
    err <= &(seen ^ last) & ~rst;
    if (rst) begin
      count <= 12'd2048;
      dir <= 0;
      last <= {ba[0], ba[1]};
    end else if (move) begin
      dir <= seen[1] ^ last[0];
      count <= (seen[1] ^ last[0]) ? count + 12'd1 : count - 12'd1;
      step <= 1;
    end
  end

endmodule
