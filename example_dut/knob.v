// Coil winder, front-panel knob: one count a click, with a long filter against contact bounce.
//
// Runs on a slow 16 kHz clock; a contact must agree with itself for FILTER clocks (2 ms) before it is believed. No reset:
// the registers have their values from configuration.
`default_nettype none

module knob #(
    parameter FILTER = 32
) (
    input  wire       clk,
    input  wire       contact_a_n,   // contacts pull to ground
    input  wire       contact_b_n,
    output reg  [7:0] value
);

  reg [1:0] meta = 2'b00, synced = 2'b00, stable = 2'b00, last = 2'b00;
  reg [7:0] age_a = 8'd0, age_b = 8'd0;

  initial value = 8'd0;

  always @(posedge clk) begin
    meta <= ~{contact_b_n, contact_a_n};
    synced <= meta;

    age_a <= (synced[0] == stable[0]) ? 8'd0 : age_a + 8'd1;
    age_b <= (synced[1] == stable[1]) ? 8'd0 : age_b + 8'd1;
    if (age_a == FILTER - 1 && synced[0] != stable[0]) begin
      stable[0] <= synced[0];
      age_a <= 8'd0;
    end
    if (age_b == FILTER - 1 && synced[1] != stable[1]) begin
      stable[1] <= synced[1];
      age_b <= 8'd0;
    end

    last <= stable;
    // One click is one cycle; it counts where both contacts open, forward on the way in and backward on the way out.
    if (last == 2'b10 && stable == 2'b00) value <= value + 8'd1;
    if (last == 2'b00 && stable == 2'b10) value <= value - 8'd1;
  end

endmodule

`default_nettype wire
