// The count is inside; its port follows only while `hold_n` is up, and keeps what it has while it is down.
module latched_read (
    input  logic        clk,
    input  logic        rst,
    input  logic        a,
    input  logic        b,
    input  logic        z,
    input  logic        hold_n,
    output logic [15:0] held,
    output logic        dir
);

  logic [2:0] meta, now;
  logic [1:0] last;
  logic [15:0] count;
  wire moved = ^(now[2:1] ^ last);
  wire up = now[2] ^ last[0];

  always_ff @(posedge clk) begin
    meta <= {a, b, z};
    now <= meta;
    last <= now[2:1];
    if (rst) begin
      count <= 16'd0;
      held <= 16'd0;
      dir <= 1'b0;
    end else begin
      if (moved) dir <= up;
      if (now == 3'b111) count <= 16'd0;
      else if (moved) count <= up ? count + 16'd1 : count - 16'd1;
      if (hold_n) held <= count;
    end
  end

endmodule
