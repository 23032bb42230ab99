// Coil winder, traverse: turns the encoder into step and direction for the axis controller, which keeps the position itself.
//
// Four steps a cycle, no filter: the traverse's encoder has clean differential outputs. A change of both lines at once
// gives no step and sets `fault`, which stays until `fault_clear` or reset.
`default_nettype none

module traverse (
    input  wire logic clk,
    input  wire logic reset,        // synchronous, active high
    input  wire logic [1:0] enc,    // {B, A}
    input  wire logic fault_clear,
    output logic step,
    output logic forward,
    output logic fault
);

  // Named A B, coded {B, A}.
  localparam logic [1:0] S00 = 2'b00, S10 = 2'b01, S11 = 2'b11, S01 = 2'b10;

  logic [1:0] meta, now, was;
  logic [1:0] filling;  // after reset both stages and the follower are filled before anything counts

  function automatic logic [1:0] following(input logic [1:0] s);
    case (s)
      S00: following = S10;
      S10: following = S11;
      S11: following = S01;
      default: following = S00;
    endcase
  endfunction

  always_ff @(posedge clk)
    if (reset) begin
      meta <= '0;
      now <= S00;
      was <= S00;
      filling <= 2'd3;
      step <= 1'b0;
      forward <= 1'b1;
      fault <= 1'b0;
    end else begin
      meta <= enc;
      now <= meta;
      was <= now;
      step <= 1'b0;
      if (filling != 0) filling <= filling - 2'd1;
      else if (now == following(was)) begin
        step <= 1'b1;
        forward <= 1'b1;
      end else if (was == following(now)) begin
        step <= 1'b1;
        forward <= 1'b0;
      end
      if (filling == 0 && (now ^ was) == 2'b11) fault <= 1'b1;
      else if (fault_clear) fault <= 1'b0;
    end

endmodule

`default_nettype wire
