// State machine: one state for each AB, entered one after another, and one to wait in until the lines are known.
//
// Direction always tells the last motion. The error stays until `ack`; an error in the same clock as `ack` wins.
module state_machine (
    input  logic               clk,
    input  logic               rst_n,
    input  logic               qa,
    input  logic               qb,
    input  logic               ack,
    output logic signed [8:0]  pos,
    output logic               dir,
    output logic               bad
);

  typedef enum logic [2:0] {
    UNKNOWN, LOW_LOW, HIGH_LOW, HIGH_HIGH, LOW_HIGH
  } place_t;

  logic [1:0] meta, ab;
  place_t place, seen;

  always_comb
    case (ab)
      2'b00:   seen = LOW_LOW;
      2'b10:   seen = HIGH_LOW;
      2'b11:   seen = HIGH_HIGH;
      default: seen = LOW_HIGH;
    endcase

  logic up, down, jump;
  always_comb begin
    up = 1'b0;
    down = 1'b0;
    case (place)
      LOW_LOW: begin
        up = seen == HIGH_LOW;
        down = seen == LOW_HIGH;
      end
      HIGH_LOW: begin
        up = seen == HIGH_HIGH;
        down = seen == LOW_LOW;
      end
      HIGH_HIGH: begin
        up = seen == LOW_HIGH;
        down = seen == HIGH_LOW;
      end
      LOW_HIGH: begin
        up = seen == LOW_LOW;
        down = seen == HIGH_HIGH;
      end
      default: ;
    endcase
    jump = place != UNKNOWN && seen != place && !up && !down;
  end

  always_ff @(posedge clk) {ab, meta} <= {meta, qa, qb};

  always_ff @(posedge clk or negedge rst_n)
    if (!rst_n) begin
      place <= UNKNOWN;
      pos <= '0;
      dir <= 1'b0;
      bad <= 1'b0;
    end else begin
      place <= seen;
      if (ack) bad <= 1'b0;
      if (jump) bad <= 1'b1;
      if (up) begin
        pos <= pos + 9'sd1;
        dir <= 1'b1;
      end
      if (down) begin
        pos <= pos - 9'sd1;
        dir <= 1'b0;
      end
    end

endmodule
