// Direction one clock ahead of the count: direction and error come straight from the comparison, the count is a register.
//
// Synchronous active-low reset.
module early_direction (
    input  wire               clk,
    input  wire               resetn,
    input  wire               a,
    input  wire               b,
    output reg signed [7:0]   count,
    output wire               dir,
    output wire               err
);

  reg [1:0] meta, now, last;
  wire [1:0] changed = now ^ last;
  assign dir = now[1] ^ last[0];
  assign err = resetn & (&changed);

  always @(posedge clk) begin
    meta <= {a, b};
    now <= meta;
    last <= now;
    if (!resetn) count <= 0;
    else if (^changed) count <= dir ? count + 1 : count - 1;
  end

endmodule
