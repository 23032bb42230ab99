// A spindle decoder with one fault in it, chosen by FAULT; nothing else is wrong with it.
//
//   reversal   the count is lost when the shaft turns round from 10 back to 00
//   direction  the direction output is wrong on the transition 11 -> 10
//   rollover   the position wraps one bit early
//   error      a change of both lines at once is never reported
`default_nettype none

module faulty_spindle #(
    parameter FAULT = "none",
    parameter WIDTH = 12
) (
    input  wire                    clk,
    input  wire                    rst_n,
    input  wire                    enc_a,
    input  wire                    enc_b,
    output reg signed [WIDTH-1:0]  position,
    output reg                     dir,
    output reg                     err
);

  reg  [1:0] meta, now, was;
  reg  [2:0] warm;
  reg        last_up;
  wire       moved = ^(now ^ was);
  wire       jumped = &(now ^ was);
  wire       up = now[0] ^ was[1];      // {B, A}: A leads B

  wire       lost = FAULT == "reversal" && was == 2'b01 && now == 2'b00 && last_up;
  wire       crossed = FAULT == "direction" && was == 2'b11 && now == 2'b01;
  wire       silent = FAULT == "error";
  wire signed [WIDTH-1:0] next = up ? position + 1 : position - 1;
  wire signed [WIDTH-1:0] wrapped = FAULT == "rollover" ? {next[WIDTH-2], next[WIDTH-2:0]} : next;

  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      meta <= 0;
      now <= 0;
      was <= 0;
      warm <= 0;
      last_up <= 0;
      position <= 0;
      dir <= 0;
      err <= 0;
    end else begin
      meta <= {enc_b, enc_a};
      now <= meta;
      was <= now;
      err <= 0;
      if (warm != 4) warm <= warm + 1;
      else begin
        err <= jumped & ~silent;
        if (moved) begin
          last_up <= up;
          dir <= up ^ crossed;
          if (!lost) position <= wrapped;
        end
      end
    end

endmodule

`default_nettype wire
