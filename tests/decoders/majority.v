// Majority of three samples, each line by itself: one odd sample is voted down, two in three win.
module majority (
    input  wire               clk,
    input  wire               rst_n,
    input  wire               a,
    input  wire               b,
    output reg signed [7:0]   count,
    output reg                dir
);

  reg [3:0] sa, sb;
  reg [1:0] now, last;

  always @(posedge clk) begin
    sa <= {sa[2:0], a};
    sb <= {sb[2:0], b};
    now[1] <= (sa[1] & sa[2]) | (sa[1] & sa[3]) | (sa[2] & sa[3]);
    now[0] <= (sb[1] & sb[2]) | (sb[1] & sb[3]) | (sb[2] & sb[3]);
    last <= now;
    if (!rst_n) begin
      count <= 0;
      dir <= 0;
    end else if (^(now ^ last)) begin
      dir <= now[1] ^ last[0];
      count <= (now[1] ^ last[0]) ? count + 1 : count - 1;
    end
  end

endmodule
