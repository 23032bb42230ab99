// Lookup table: the sample before and the present one are the address of a table with sixteen entries.
//
// Works on the falling clock edge. `init` is an asynchronous reset, active low although its name does not say so.
module lookup_table (
    input  logic       strobe,
    input  logic       init,
    input  logic       ch_a,
    input  logic       ch_b,
    output logic [7:0] place,
    output logic       way,
    output logic       alarm
);

  // {A, B before, A, B now}: 1 up, 3 down, 2 both lines changed.
  function automatic logic [1:0] move(input logic [3:0] address);
    case (address)
      4'b00_00: move = 2'd0;
      4'b00_01: move = 2'd3;
      4'b00_10: move = 2'd1;
      4'b00_11: move = 2'd2;
      4'b01_00: move = 2'd1;
      4'b01_01: move = 2'd0;
      4'b01_10: move = 2'd2;
      4'b01_11: move = 2'd3;
      4'b10_00: move = 2'd3;
      4'b10_01: move = 2'd2;
      4'b10_10: move = 2'd0;
      4'b10_11: move = 2'd1;
      4'b11_00: move = 2'd2;
      4'b11_01: move = 2'd1;
      4'b11_10: move = 2'd3;
      default:  move = 2'd0;
    endcase
  endfunction

  logic [1:0] first, second, prior;
  logic [1:0] step;
  assign step = move({prior, second});

  always_ff @(negedge strobe) begin
    first <= {ch_a, ch_b};
    second <= first;
    prior <= second;
  end

  always_ff @(negedge strobe or negedge init)
    if (!init) begin
      place <= 8'd0;
      way <= 1'b0;
      alarm <= 1'b0;
    end else begin
      alarm <= step == 2'd2;
      if (step == 2'd1) begin
        place <= place + 8'd1;
        way <= 1'b0;
      end else if (step == 2'd3) begin
        place <= place - 8'd1;
        way <= 1'b1;
      end
    end

endmodule
