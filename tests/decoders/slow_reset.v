// A reset that must be meant: it acts only once it has been on for sixteen clocks.
module slow_reset (
    input  wire               clk,
    input  wire               rst_n,
    input  wire               a,
    input  wire               b,
    output reg signed [7:0]   count,
    output reg                err
);

  reg [4:0] held = 5'd0;
  wire reset = held == 5'd16;
  reg [2:0] as, bs;
  wire da = as[1] ^ as[2], db = bs[1] ^ bs[2];

  always @(posedge clk) begin
    held <= rst_n ? 5'd0 : held + !reset;
    as <= {as[1:0], a};
    bs <= {bs[1:0], b};
    if (reset) begin
      count <= 0;
      err <= 0;
    end else begin
      err <= da & db;
      if (da ^ db) count <= (as[1] ^ bs[2]) ? count + 1 : count - 1;
    end
  end

endmodule
