// Sixty-four bits: the Gray code AB is turned into a number from 0 to 3, and the difference of two such numbers is the
// step. Starts close to the top end so that the roll-over can be reached.
module wide_64 #(
    parameter int WIDTH = 64,
    parameter SENSE = "NORMAL"
) (
    input  logic                     clk,
    input  logic                     rst,
    input  logic                     a,
    input  logic                     b,
    output logic signed [WIDTH-1:0]  count,
    output logic                     err
);

  localparam logic signed [WIDTH-1:0] START = {1'b0, {(WIDTH - 1) {1'b1}}} - 64'sd200;

  logic [1:0] meta, synced, number, prior, difference;
  assign number = {synced[0], synced[1] ^ synced[0]};
  assign difference = (SENSE == "REVERSED") ? prior - number : number - prior;

  always_ff @(posedge clk) begin
    {synced, meta} <= {meta, a, b};
    prior <= number;
    err <= 1'b0;
    if (rst) count <= START;
    else
      case (difference)
        2'd1: count <= count + 64'sd1;
        2'd2: err <= 1'b1;
        2'd3: count <= count - 64'sd1;
        default: ;
      endcase
  end

endmodule
