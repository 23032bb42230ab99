// Two modules, an include file, and all lines in one port: B is bit 1, A is bit 0, the index bit 2, all active low.
// A held enable input, and an index that zeroes the count all the time it is active.
module packed_lines (
    input  wire               clk,
    input  wire               rst,
    input  wire               enable,
    input  wire [2:0]         zba_n,
    output reg signed [7:0]   count,
    output reg                dir
);

  wire [2:0] now;
  reg [1:0] last;
  input_stage stage (.clk(clk), .raw(~zba_n), .synced(now));

  always @(posedge clk) begin
    last <= now[1:0];
    if (rst) begin
      count <= 8'd0;
      dir <= 1'b0;
    end else if (enable) begin
      if (^(now[1:0] ^ last)) begin
        dir <= now[0] ^ last[1];
        count <= (now[0] ^ last[1]) ? count + 8'd1 : count - 8'd1;
      end
      if (now[2]) count <= 8'd0;
    end
  end

endmodule
