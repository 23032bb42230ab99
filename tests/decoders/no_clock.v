// No clock: the edges of A count, one a cycle, and B says which way.
module no_clock (
    input  wire       rst,
    input  wire       a,
    input  wire       b,
    output wire [7:0] count
);

  reg [7:0] up, down;

  // Rising edges with B low go up, falling edges with B low go back: dithering over one edge of A nets zero.
  always @(posedge a or posedge rst) if (rst) up <= 0; else if (!b) up <= up + 1;
  always @(negedge a or posedge rst) if (rst) down <= 0; else if (!b) down <= down + 1;
  assign count = up - down;

endmodule
