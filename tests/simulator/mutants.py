"""Faults of one change each: what the built-in regression must find, graded from plain to sly.

``F`` numbers are the modes of the list of what goes wrong with quadrature decoders.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

DECODERS = Path(__file__).parents[1] / "decoders"
EXAMPLES = Path(__file__).parents[2] / "example_dut"


@dataclass(frozen=True, slots=True)
class Mutant:
    """One fault.

    Attributes:
        name: what is wrong, in a word or three.
        file: the source that is changed, below the decoders' folder.
        old, new: text; ``old`` occurs exactly once.
        kinds: at least one of these must be found.
        mode: what it stands for.
        decoder: the decoder file's stem, where it differs from the source's.
        four_state: only a simulator that knows X can see it.
        verilator: is run on Verilator too.
    """

    name: str
    file: str
    old: str
    new: str
    kinds: tuple[str, ...]
    mode: str
    decoder: str = ""
    four_state: bool = False
    verilator: bool = False

    @property
    def stem(self) -> str:
        return self.decoder or Path(self.file).stem

    @property
    def folder(self) -> Path:
        return EXAMPLES if self.stem == "spindle" else DECODERS


MUTANTS = (
    # --- reversals and single transitions
    Mutant(
        "reversal-in-11-forgotten",
        "spindle.v",
        "if (moved) begin",
        "if (moved && !(up && !dir && earlier[1:0] == 2'b11)) begin",
        ("count-lost",),
        "F1: the count of one reversal is lost, in one state and one direction only",
        verilator=True,
    ),
    Mutant(
        "direction-of-before-the-reversal",
        "xor_form.v",
        "count <= forward ?",
        "count <= up ?",
        ("count-wrong", "count-extra", "count-lost"),
        "F1: direction memory wrong at a reversal",
        verilator=True,
    ),
    Mutant(
        "step-lost-at-reversal",
        "step_direction.v",
        "go <= wait_for == 0 && (^(s1 ^ s2));",
        "go <= wait_for == 0 && (^(s1 ^ s2)) && (dir == (s1[1] ^ s2[0]));",
        ("step-wrong",),
        "F1: no step at a reversal",
    ),
    Mutant(
        "quick-reversal-forgotten",
        "xor_form.v",
        "wire moved = a_seen[1] ^ a_seen[2] ^ b_seen[1] ^ b_seen[2];",
        "reg just = 0;\n  wire edge_now = a_seen[1] ^ a_seen[2] ^ b_seen[1] ^ b_seen[2];\n"
        "  always @(posedge clk) just <= edge_now;\n  wire moved = edge_now & ~(just & (a_seen[1] ^ b_seen[2] ^ up));",
        ("count-lost",),
        "F2: a reversal on the very next clock is lost",
    ),
    Mutant(
        "consecutive-edges",
        "xor_form.v",
        "wire moved = a_seen[1] ^ a_seen[2] ^ b_seen[1] ^ b_seen[2];",
        "reg just = 0;\n  wire moved = (a_seen[1] ^ a_seen[2] ^ b_seen[1] ^ b_seen[2]) & ~just;\n"
        "  always @(posedge clk) just <= moved;",
        ("count-lost",),
        "F6: wrong only when two edges come on consecutive clocks",
        verilator=True,
    ),
    Mutant(
        "direction-wrong-once-a-cycle",
        "spindle.v",
        "dir <= up;",
        "dir <= up ^ (lines[1:0] == 2'b10 && earlier[1:0] == 2'b11);",
        ("direction-wrong",),
        "F7: direction wrong on one transition",
    ),
    Mutant(
        "direction-inverted",
        "xor_form.v",
        "up <= forward;",
        "up <= ~forward;",
        ("direction-wrong",),
        "F8: direction output inverted",
    ),
    Mutant(
        "direction-cleared-by-index",
        "one_turn.v",
        "if (now == 3'b001) angle <= 0;",
        "if (now == 3'b001) begin angle <= 0; ccw <= 0; end",
        ("direction-wrong",),
        "F7: direction cleared together with the count",
    ),
    Mutant(
        "direction-kept-on-way-back",
        "state_machine.sv",
        "pos <= pos - 9'sd1;\n        dir <= 1'b0;",
        "pos <= pos - 9'sd1;\n        dir <= dir && place == HIGH_LOW;",
        ("direction-wrong",),
        "F7: direction does not follow a reversal in one state",
    ),
    Mutant(
        "lines-swapped",
        "bare_x2.v",
        "wire a = ~a_n, b = ~b_n;",
        "wire b = ~a_n, a = ~b_n;",
        ("count-wrong", "count-extra", "count-lost", "direction-wrong"),
        "F8: A and B swapped",
    ),
    Mutant(
        "one-line-inverted",
        "bare_x2.v",
        "wire a = ~a_n,",
        "wire a = a_n,",
        ("count-wrong", "count-extra", "direction-wrong"),
        "F8: one line inverted, counts backwards",
    ),
    Mutant(
        "lost-on-one-transition",
        "comb_outputs.sv",
        "if (^changed & ~rst)",
        "if (^changed & ~rst & ~(changed[1] & prior == 2'b11))",
        ("count-lost",),
        "F1: one transition of the four is not counted forward",
    ),
    Mutant(
        "two-on-one-transition",
        "no_reset.v",
        "value <= value + 1'b1;",
        "value <= value + 1'b1 + (last == 2'b11);",
        ("count-extra", "count-wrong"),
        "F12: the count moves by two on one transition",
        verilator=True,
    ),
    Mutant(
        "counts-twice",
        "early_direction.v",
        "wire [1:0] changed = now ^ last;",
        "reg [1:0] older;\n  always @(posedge clk) older <= last;\n  wire [1:0] changed = now ^ older;",
        ("count-extra",),
        "F12: count enable two clocks long",
    ),
    Mutant(
        "down-counts-in-x1-not-mirrored",
        "once_a_cycle.v",
        "wire fall = ~as[1] & as[2] & steady_high;",
        "wire fall = as[1] & ~as[2] & ~bs[1] & ~bs[2];",
        ("early", "late", "count-lost", "count-extra"),
        "F9: the edge of x1 is not mirrored for reverse",
        verilator=True,
    ),
    Mutant(
        "x2-counts-four",
        "x2_every_state.v",
        "if ((a2 ^ a3) & ~(b2 ^ b3)) begin",
        "if ((a2 ^ a3) ^ (b2 ^ b3)) begin",
        ("count-extra",),
        "F10: x4 where x2 is promised",
    ),
    Mutant(
        "no-step-going-back",
        "once_a_cycle.v",
        "step <= rise | fall;",
        "step <= rise;",
        ("step-wrong",),
        "F7: a count without its step pulse",
    ),
    Mutant(
        "never-responds",
        "packed_lines/packed_lines.v",
        "end else if (enable) begin",
        "end else if (!enable) begin",
        ("no-response",),
        "F41: the gate is inverted, nothing is ever counted",
        decoder="packed_lines",
    ),
    Mutant(
        "stuck-after-1024-edges",
        "state_machine.sv",
        "always_ff @(posedge clk) {ab, meta} <= {meta, qa, qb};",
        "logic [10:0] used = '0;\n  always_ff @(posedge clk) begin\n    if (ab != meta && !used[10]) used <= used + 11'd1;\n"
        "    meta <= {qa, qb};\n    if (!used[10]) ab <= meta;\n  end",
        ("count-lost", "no-response"),
        "F32: stops after 2^10 edges",
    ),
    # --- roll-over and range
    Mutant(
        "rolls-over-one-bit-early",
        "xor_form.v",
        "count + 1'b1",
        "{count[WIDTH-1], count[WIDTH-2:0] + 1'b1}",
        ("roll-over-wrong",),
        "F29: the sign does not take part in the roll-over",
        verilator=True,
    ),
    Mutant(
        "sticks-at-the-top",
        "no_reset.v",
        "value <= value + 1'b1;",
        "if (value != 9'sd255) value <= value + 1'b1;",
        ("roll-over-wrong", "count-lost"),
        "F32: stops instead of rolling over",
    ),
    Mutant(
        "sticks-at-the-bottom",
        "lookup_table.sv",
        "place <= place - 8'd1;",
        "if (place != 8'd0) place <= place - 8'd1;",
        ("roll-over-wrong", "count-lost"),
        "F32: stops at zero instead of rolling over",
    ),
    Mutant(
        "borrow-one-late",
        "lookup_table.sv",
        "place <= place - 8'd1;",
        "place <= {place[7:4] - {3'd0, place[3:0] == 4'd15}, place[3:0] - 4'd1};",
        ("roll-over-wrong", "count-wrong", "count-extra"),
        "F30: the borrow between two halves of the count comes a step late",
    ),
    Mutant(
        "no-carry-after-bit-7",
        "wide_64.sv",
        "count <= count + 64'sd1;",
        "count <= {count[63:8], count[7:0] + 8'd1};",
        ("roll-over-wrong",),
        "F29: the carry stops inside the count",
    ),
    Mutant(
        "modulo-one-more",
        "one_turn.v",
        "(angle == COUNTS - 1) ? 0",
        "(angle == COUNTS) ? 0",
        ("roll-over-wrong", "count-extra", "count-wrong"),
        "F31: 4001 counts a turn going up",
        verilator=True,
    ),
    Mutant(
        "modulo-one-less-going-down",
        "one_turn.v",
        "(angle == 0) ? COUNTS - 1",
        "(angle == 0) ? COUNTS - 2",
        ("roll-over-wrong", "count-wrong"),
        "F31: 3999 counts a turn going down",
    ),
    Mutant(
        "wraps-instead-of-saturating",
        "saturating.sv",
        "if (inc && level < HIGH)",
        "if (inc)",
        ("roll-over-wrong", "count-extra"),
        "F32: goes on past its end",
    ),
    Mutant(
        "saturates-one-early",
        "saturating.sv",
        "level < HIGH)",
        "level < HIGH - 1)",
        ("count-lost", "roll-over-wrong"),
        "F32: stops one short of its end",
    ),
    Mutant(
        "does-not-come-off-the-stop",
        "lid_position.sv",
        "if (dec[1] && lid != 8'd0)",
        "if (dec[1] && lid != 8'd0 && lid != 8'd200)",
        ("count-lost", "roll-over-wrong"),
        "F32: stays at its end for ever",
    ),
    # --- illegal transitions
    Mutant(
        "one-diagonal-never-an-error",
        "lookup_table.sv",
        "4'b01_10: move = 2'd2;",
        "4'b01_10: move = 2'd0;",
        ("error-missed",),
        "F4: one of the four diagonals is not reported",
        verilator=True,
    ),
    Mutant(
        "one-diagonal-counted",
        "lookup_table.sv",
        "4'b00_11: move = 2'd2;",
        "4'b00_11: move = 2'd1;",
        ("error-missed", "count-extra"),
        "F4: one diagonal is counted as a step",
    ),
    Mutant(
        "error-on-a-legal-move",
        "lookup_table.sv",
        "alarm <= step == 2'd2;",
        "alarm <= step == 2'd2 || {prior, second} == 4'b11_10;",
        ("error-false",),
        "F4: one legal transition is reported as illegal",
    ),
    Mutant(
        "error-one-late",
        "early_direction.v",
        "assign err = resetn & (&changed);",
        "reg late;\n  always @(posedge clk) late <= resetn & (&changed);\n  assign err = late;",
        ("late",),
        "F4: the error comes a clock after its declared latency",
    ),
    Mutant(
        "second-error-in-a-row-missed",
        "xor_form.v",
        "fault <= both;",
        "fault <= both & ~fault;",
        ("error-missed",),
        "F5: two illegal transitions that follow one another are one",
    ),
    Mutant(
        "error-runs-on",
        "xor_form.v",
        "fault <= both;",
        "fault <= both | (fault & ~moved);",
        ("error-stuck",),
        "F39: a pulse that stays until the next good count",
    ),
    Mutant(
        "error-only-going-up",
        "guesses_two.v",
        "guessed <= &changed;",
        "guessed <= &changed & dir;",
        ("error-missed",),
        "F4: an illegal transition is reported in one direction of motion only",
    ),
    Mutant(
        "error-not-sticky",
        "state_machine.sv",
        "if (ack) bad <= 1'b0;",
        "bad <= 1'b0;",
        ("error-missed",),
        "F39: the error does not stay",
        verilator=True,
    ),
    Mutant(
        "error-not-clearable",
        "state_machine.sv",
        "if (ack) bad <= 1'b0;",
        "",
        ("error-stuck",),
        "F39: the error cannot be cleared",
    ),
    Mutant(
        "error-cleared-by-itself",
        "state_machine.sv",
        "pos <= pos + 9'sd1;",
        "pos <= pos + 9'sd1;\n        bad <= 1'b0;",
        ("error-missed",),
        "F39: the next good count clears the error",
    ),
    Mutant(
        "reset-does-not-clear-the-error",
        "lid_position.sv",
        "      ok <= 1'b1;\n",
        "      if (lid === 8'bx) ok <= 1'b1;\n",
        ("error-stuck", "error-false"),
        "F39: reset leaves a sticky error standing",
    ),
    # --- input conditioning
    Mutant(
        "filter-one-longer",
        "spindle.v",
        "for (i = 0; i < DEPTH - 1; i = i + 1)",
        "for (i = 0; i < DEPTH; i = i + 1)",
        ("late", "count-lost"),
        "F17: filter one clock too long",
        verilator=True,
    ),
    Mutant(
        "filter-one-shorter",
        "spindle.v",
        "for (i = 0; i < DEPTH - 1; i = i + 1)",
        "for (i = 0; i < DEPTH - 2; i = i + 1)",
        ("early", "count-extra"),
        "F17: filter one clock too short",
    ),
    Mutant(
        "filter-skips-the-middle-sample",
        "spindle.v",
        "for (i = 0; i < DEPTH - 1; i = i + 1)",
        "for (i = 1; i < DEPTH - 1; i = i + 1)",
        ("count-extra", "early"),
        "F20: two of three samples are enough",
    ),
    Mutant(
        "b-not-filtered",
        "spindle.v",
        "lines <= (lines | all_high) & ~all_low;",
        "lines <= (((lines | all_high) & ~all_low) & 3'b101) | (synced & 3'b010);",
        ("early", "count-extra"),
        "F15: only one of the lines is filtered",
    ),
    Mutant(
        "index-not-filtered",
        "spindle.v",
        "lines <= (lines | all_high) & ~all_low;",
        "lines <= (((lines | all_high) & ~all_low) & 3'b011) | (synced & 3'b100);",
        ("index-false", "early"),
        "F52: the index line alone is not filtered",
    ),
    Mutant(
        "integrator-one-short-going-up",
        "integrating_filter.sv",
        "if (raw && level == 4'(DEPTH - 1)) clean <= 1'b1;",
        "if (raw && level == 4'(DEPTH - 2)) clean <= 1'b1;",
        ("early", "count-extra"),
        "F17, F21: the filter is shorter for one of the two edges",
    ),
    Mutant(
        "integrator-one-long-going-down",
        "integrating_filter.sv",
        "if (!raw && level == 4'd1) clean <= 1'b0;",
        "if (!raw && level == 4'd0) clean <= 1'b0;",
        ("late", "count-lost"),
        "F17, F21: the filter is longer for one of the two edges",
    ),
    Mutant(
        "synchroniser-of-b-shorter",
        "xor_form.v",
        "b_seen <= {b_seen[1:0], b};",
        "b_seen <= {b_seen[1], b, b};",
        ("early", "error-false"),
        "F15: A and B have different latency",
        verilator=True,
    ),
    Mutant(
        "raw-line-in-one-term",
        "xor_form.v",
        "wire forward = a_seen[1] ^ b_seen[2];",
        "wire forward = a ^ b_seen[2];",
        ("count-wrong", "count-extra", "direction-wrong"),
        "F14: raw and synchronised copies of a line are both used",
    ),
    Mutant(
        "first-flop-on-the-other-clock-edge",
        "lookup_table.sv",
        "always_ff @(negedge strobe) begin\n    first <= {ch_a, ch_b};\n",
        "always_ff @(posedge strobe) first <= {ch_a, ch_b};\n  always_ff @(negedge strobe) begin\n",
        ("early",),
        "F14: the first flop samples half a clock away",
    ),
    Mutant(
        "one-flop-more",
        "packed_lines/settings.vh",
        "PACKED_LINES_STAGES 2",
        "PACKED_LINES_STAGES 3",
        ("late",),
        "F7: everything a clock later than declared",
        decoder="packed_lines",
    ),
    Mutant(
        "one-flop-less",
        "packed_lines/input_stage.v",
        "assign synced = pipe[3*`PACKED_LINES_STAGES-1-:3];",
        "assign synced = pipe[2:0];",
        ("early",),
        "F14: a synchroniser of one flop where two are declared",
        decoder="packed_lines",
    ),
    Mutant(
        "tick-too-slow",
        "ticked.v",
        "wire tick = divider == DIVIDE - 1;",
        "wire tick = divider == DIVIDE;",
        ("late", "count-lost", "error-false"),
        "F18: sampled too slowly for the promised speed",
    ),
    # --- index
    Mutant(
        "index-ungated",
        "spindle.v",
        "if (z & a & b) position <= 0;",
        "if (z) position <= 0;",
        ("index-false", "count-lost"),
        "F44: the index is not gated by A and B",
        verilator=True,
    ),
    Mutant(
        "index-wrong-gate",
        "spindle.v",
        "if (z & a & b) position <= 0;",
        "if (z & a & ~b) position <= 0;",
        ("index-missed", "index-false"),
        "F47: the index is gated by the wrong state",
    ),
    Mutant(
        "index-edge-instead-of-level",
        "spindle.v",
        "if (z & a & b) position <= 0;",
        "if (z & a & b & ~earlier[2]) position <= 0;",
        ("index-missed",),
        "F45: the index acts on its edge where its level is declared",
    ),
    Mutant(
        "index-level-instead-of-edge",
        "wide_32.v",
        "else if (now[2] & ~last[2])",
        "else if (now[2])",
        ("index-false", "count-lost"),
        "F45: the index holds the count at zero all the time",
    ),
    Mutant(
        "index-one-late",
        "one_turn.v",
        "if (now == 3'b001) angle <= 0;",
        "if (last == 3'b001) angle <= 0;",
        ("index-missed", "late", "count-lost"),
        "F48: the zero comes a clock late",
    ),
    Mutant(
        "index-going-forward-only",
        "one_turn.v",
        "if (now == 3'b001) angle <= 0;",
        "if (now == 3'b001 && !(moved ? ~up : ccw)) angle <= 0;",
        ("index-missed",),
        "F44: the zero depends on the direction",
    ),
    Mutant(
        "index-not-while-moving",
        "packed_lines/packed_lines.v",
        "if (now[2]) count <= 8'd0;",
        "if (now[2] && now[1:0] == last) count <= 8'd0;",
        ("index-missed", "late"),
        "F35: a step in the clock of the index wins",
        decoder="packed_lines",
    ),
    Mutant(
        "index-inverted",
        "wide_32.v",
        "meta <= {~mark_n, a, b};",
        "meta <= {mark_n, a, b};",
        ("index-missed", "index-false"),
        "F50: index polarity inverted",
    ),
    # --- reset, start, unknown levels
    Mutant(
        "count-not-reset",
        "spindle.v",
        "warm <= 0;\n      position <= 0;",
        "warm <= 0;",
        ("start-up-count", "unknown-level"),
        "F36: reset forgets the count",
    ),
    Mutant(
        "start-value-wrong",
        "lid_position.sv",
        "lid <= 8'd100;",
        "lid <= 8'd99;",
        ("start-up-count",),
        "F36: the count after reset is not the declared one",
        verilator=True,
    ),
    Mutant(
        "filter-not-filled-at-reset",
        "spindle.v",
        "wire      ready = (warm == DEPTH + 3);",
        "wire      ready = (warm == 0);",
        ("start-up-count", "count-extra", "error-false"),
        "F37: counts while the filter is still filling",
    ),
    Mutant(
        "warm-up-one-short",
        "no_reset.v",
        "if (awake[1])",
        "if (awake[0])",
        ("start-up-count", "count-extra"),
        "F38: a false count as the lines are seen for the first time",
    ),
    Mutant(
        "line-flops-reset-to-low",
        "saturating.sv",
        "  always_ff @(posedge clk) begin\n    sa",
        "  always_ff @(posedge clk or posedge arst) if (arst) {sa, sb} <= '0; else begin\n    sa",
        ("start-up-count", "count-extra", "error-false"),
        "F36: a false count or error on release with A or B high",
    ),
    Mutant(
        "error-on-release-with-both-high",
        "state_machine.sv",
        "place <= UNKNOWN;",
        "place <= LOW_LOW;",
        ("error-false", "count-extra", "start-up-count"),
        "F36: the state machine starts in 00 whatever the lines are",
    ),
    Mutant(
        "count-without-initial-value",
        "no_reset.v",
        "    value = 9'd0;\n",
        "",
        ("unknown-level",),
        "F38: no reset and no initial value: X for ever",
        four_state=True,
    ),
    Mutant(
        "wait-without-initial-value",
        "step_direction.v",
        "wait_for = 3;",
        "wait_for;",
        ("unknown-level",),
        "F38: an inner register without initial value",
        four_state=True,
    ),
    # --- several things at once
    Mutant(
        "next-count-lost-after-an-error",
        "state_machine.sv",
        "place <= seen;",
        "place <= jump ? UNKNOWN : seen;",
        ("count-lost",),
        "F4: the edge right after an illegal transition is lost",
    ),
    Mutant(
        "clear-error-zeroes-the-count",
        "state_machine.sv",
        "if (ack) bad <= 1'b0;",
        "if (ack) begin\n        bad <= 1'b0;\n        pos <= '0;\n      end",
        ("count-wrong", "count-extra", "roll-over-wrong"),
        "F35: clearing the error clears the count",
    ),
    Mutant(
        "state-caught-between-clocks",
        "bare_x2.v",
        "  always @(posedge clk) begin\n    a_before <= a;\n    b_before <= b;\n",
        "  reg caught = 0;\n  always @(posedge b_n or posedge clk)\n    if (clk) caught <= 0;\n    else caught <= 1;\n"
        "  always @(posedge clk) begin\n    a_before <= a;\n    b_before <= b & ~caught;\n",
        ("count-extra", "count-wrong", "early"),
        "F16: a pulse that no clock edge sees sets a flop",
    ),
    Mutant(
        "close-edges-behind-a-filter",
        "spindle.v",
        "wire moved = (a ^ earlier[0]) ^ (b ^ earlier[1]);",
        "reg just = 0;\n  always @(posedge clk) just <= (a ^ earlier[0]) ^ (b ^ earlier[1]);\n"
        "  wire moved = ((a ^ earlier[0]) ^ (b ^ earlier[1])) & ~just;",
        ("count-lost",),
        "F11: with unequal states, A and B one clock apart, a count is lost although each line is long enough",
    ),
    Mutant(
        "index-caught-between-clocks",
        "wide_32.v",
        "  always @(posedge clk) begin\n    meta <= {~mark_n, a, b};\n",
        "  reg flag = 0, flag_before = 0;\n  always @(negedge mark_n) flag <= ~flag;\n  always @(posedge clk) begin\n"
        "    flag_before <= flag;\n    meta <= {~mark_n | (flag ^ flag_before), a, b};\n",
        ("index-false",),
        "F16: an index pulse that no clock edge sees is taken for an index",
    ),
)

# Faults that the built-in regression does not find, each with the reason.
UNSEEN = (
    Mutant(
        "forgets-after-a-long-rest",
        "xor_form.v",
        "  always @(posedge clk) begin\n    a_seen",
        "  reg [11:0] idle = 0;\n  always @(posedge clk) idle <= moved ? 12'd0 : idle + {11'd0, ~&idle};\n"
        "  always @(posedge clk) if (idle == 12'd4000) count <= 0; else begin\n    a_seen",
        ("count-wrong", "count-extra"),
        "F32: the count is lost after four thousand clocks of rest",
    ),
    Mutant(
        "carry-lost-in-a-wide-count",
        "wide_32.v",
        "count + 32'd1",
        "{count[31:13] + {18'd0, &count[12:0] & (count[31:13] != 0)}, count[12:0] + 13'd1}",
        ("roll-over-wrong",),
        "F29: a carry is lost inside a count too wide to be driven to its end",
    ),
    Mutant(
        "wrong-in-half-of-each-clock",
        "early_direction.v",
        "assign err = resetn & (&changed);",
        "assign err = clk | (resetn & (&changed));",
        ("error-false",),
        "F7: an output that is wrong between the clock edges and right at them",
    ),
)
