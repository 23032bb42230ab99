// A pulse on `seek` lets the next index set the count, once.
module one_shot_index (
    input  wire              clk,
    input  wire              rst_n,
    input  wire              a,
    input  wire              b,
    input  wire              z,
    input  wire              seek,
    output reg signed [15:0] pos
);

  reg [2:0] meta, now;
  reg [1:0] last;
  reg zone_last, seeking;
  wire zone = now[0] & now[2] & ~now[1];
  wire [1:0] changed = now[2:1] ^ last;

  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      meta <= 0;
      now <= 0;
      last <= 0;
      zone_last <= 0;
      seeking <= 0;
      pos <= 0;
    end else begin
      meta <= {a, b, z};
      now <= meta;
      last <= now[2:1];
      zone_last <= zone;
      if (seek) seeking <= 1;
      if (^changed) pos <= (now[2] ^ last[0]) ? pos + 16'sd1 : pos - 16'sd1;
      if (zone && !zone_last && seeking) begin
        pos <= 16'sd250;
        seeking <= 0;
      end
    end

endmodule
