// Guesses: where both lines change at once it moves by two in the direction of the last motion, and says so.
module guesses_two (
    input  wire               clk,
    input  wire               rst_n,
    input  wire               a,
    input  wire               b,
    output reg signed [8:0]   count,
    output reg                dir,
    output reg                guessed
);

  reg [1:0] meta, now, last;
  wire [1:0] changed = now ^ last;
  wire up = (&changed) ? dir : now[1] ^ last[0];

  always @(posedge clk) begin
    meta <= {a, b};
    now <= meta;
    last <= now;
  end

  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      count <= 0;
      dir <= 1;
      guessed <= 0;
    end else begin
      guessed <= &changed;
      dir <= (changed == 0) ? dir : up;
      case (changed)
        2'b01, 2'b10: count <= up ? count + 1 : count - 1;
        2'b11: count <= up ? count + 2 : count - 2;
        default: ;
      endcase
    end

endmodule
