// The index loads a preset value, once as it becomes active with A and B high; a step in the same clock counts on from there.
module index_load #(
    parameter signed [15:0] HOME = -500
) (
    input  logic               clk,
    input  logic               rst,
    input  logic               a,
    input  logic               b,
    input  logic               z,
    output logic signed [15:0] position
);

  logic [2:0] now, old;
  logic zone_old;
  wire zone = &now;
  wire move = ^(now[2:1] ^ old[2:1]);
  wire forward = now[2] ^ old[1];
  wire signed [15:0] by = move ? (forward ? 16'sd1 : -16'sd1) : 16'sd0;

  always_ff @(posedge clk) begin
    now <= {a, b, z};
    old <= now;
    zone_old <= zone;
    if (rst) begin
      position <= 0;
      old <= {a, b, z};
      zone_old <= a & b & z;
    end else if (zone && !zone_old) position <= HOME + by;
    else position <= position + by;
  end

endmodule
