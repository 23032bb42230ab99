// Pipelined: the lines are compared, a register holds the step and its direction, and the count follows a clock later.
module step_then_count (
    input  wire               clk,
    input  wire               rst,
    input  wire               a,
    input  wire               b,
    output reg signed [7:0]   count,
    output reg                step,
    output reg                dir,
    output reg                err
);

  reg [1:0] meta, now, last;

  always @(posedge clk) begin
    meta <= {a, b};
    now <= meta;
    last <= now;
  end

  always @(posedge clk or posedge rst)
    if (rst) begin
      step <= 1'b0;
      dir <= 1'b0;
      err <= 1'b0;
      count <= 8'd0;
    end else begin
      step <= ^(now ^ last);
      err <= &(now ^ last);
      if (^(now ^ last)) dir <= now[1] ^ last[0];
      if (step) count <= dir ? count + 8'd1 : count - 8'd1;
    end

endmodule
