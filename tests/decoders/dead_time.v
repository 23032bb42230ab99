// Dead time instead of agreement: a line's change is taken at once, and then the line is not looked at for five clocks.
//
// So even one clock may pass, a change that comes in the dead time comes late, and five clocks always pass.
module dead_time (
    input  wire               clk,
    input  wire               rst,
    input  wire               a,
    input  wire               b,
    output reg signed [7:0]   count,
    output reg                dir
);

  reg [1:0] meta, synced, level, last;
  reg [2:0] deaf_a, deaf_b;

  always @(posedge clk) begin
    meta <= {a, b};
    synced <= meta;
    last <= level;
    if (rst) begin
      level <= synced;
      last <= synced;
      deaf_a <= 0;
      deaf_b <= 0;
      count <= 0;
      dir <= 0;
    end else begin
      if (deaf_a != 0) deaf_a <= deaf_a - 1;
      else if (synced[1] != level[1]) begin
        level[1] <= synced[1];
        deaf_a <= 4;
      end
      if (deaf_b != 0) deaf_b <= deaf_b - 1;
      else if (synced[0] != level[0]) begin
        level[0] <= synced[0];
        deaf_b <= 4;
      end
      if (^(level ^ last)) begin
        dir <= level[1] ^ last[0];
        count <= (level[1] ^ last[0]) ? count + 1 : count - 1;
      end
    end
  end

endmodule
