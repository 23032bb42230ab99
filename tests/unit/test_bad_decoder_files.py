"""Every way to get a decoder file wrong is told with its place, what stood there, what is allowed and how to mend it."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest
import yaml
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tbkit.contract_file import read_contract
from tbkit.errors import InputError
from tbkit.profile_file import read_profile

# One key a line, so that the line of a problem shows which key it belongs to; a key that is added comes in line 8.
SOUND = {
    "tbkit": "1",
    "decoder": "{top: d, sources: [d.v]}",
    "clock": "{port: clk, rate: 50 MHz}",
    "reset": "none",
    "lines": "{a: enc_a, b: enc_b, index: enc_z}",
    "count": "{port: position, width: 8, signed: false}",
    "latency": "{count: 3}",
}
TOP_KEYS = (
    "tbkit, decoder, clock, reset, start, lines, inputs, count, direction, step, error, illegal, index, latency, filter, "
    "shortest_state, timers"
)
COUNT_KEYS = "port, width, signed, resolution, at, forward, overflow, modulo, lowest, highest"
NAME = "expected an HDL name: a letter or _, then letters, digits, _ or $"
KEYWORD = "which is a SystemVerilog keyword; expected an HDL name"
CLOCKS = "a whole number from 0 to 1000000"
ROLES = "constant, clear-error, clear-count, preload, enable, arm, arm-once or latch"
UNSUPPORTED = "is not supported by this version of tbkit"


def decoder_file(**changed: str | None) -> str:
    """A sound decoder file with keys changed, added, or (None) left out."""
    return "".join(f"{key}: {value}\n" for key, value in {**SOUND, **changed}.items() if value is not None)


def case(name: str, expected: str, **changed: str | None) -> object:
    return pytest.param(decoder_file(**changed), expected, id=name)


# Each expected text leaves out "x.yaml:" at the start of its lines.
CASES = [
    # ---- keys of the whole file
    case("unknown-key", f"8: cuont: unknown key; allowed here: {TOP_KEYS} (did you mean 'count'?)", cuont="3"),
    case("unknown-key-in-capitals", f"8: TIMERS: unknown key; allowed here: {TOP_KEYS} (did you mean 'timers'?)", TIMERS="true"),
    case("no-format", "1: the key 'tbkit' is missing; write for example `tbkit: 1`", tbkit=None),
    case("other-format", "1: tbkit: found '2', expected 1, the format that this version of tbkit reads", tbkit="2"),
    case("empty-format", "1: tbkit: found nothing, expected a value", tbkit=""),
    case("no-clock", "1: the key 'clock' is missing; write for example `clock: {port: clk, rate: 50 MHz}`", clock=None),
    case(
        "no-reset",
        "1: the key 'reset' is missing; write for example `reset: {port: rst_n, active: low, kind: async, clocks: 4}`"
        " or `reset: none`",
        reset=None,
    ),
    case("nothing-to-check", "1: a decoder needs a `count` or a `step` output: without one there is nothing to check", count=None),
    case("later-key", f"8: velocity: this key {UNSUPPORTED}", velocity="{port: v}"),
    # ---- decoder
    case(
        "sources-no-list",
        "2: decoder.sources: found 'd.v', expected a list; write [d.v]",
        decoder="{top: d, sources: d.v}",
    ),
    case("sources-map", "2: decoder.sources: found a map, expected a list", decoder="{top: d, sources: {d.v: 1}}"),
    case(
        "no-sources",
        "2: decoder.sources: found an empty list, expected at least one item",
        decoder="{top: d, sources: []}",
    ),
    case("empty-source", "2: decoder.sources[0]: found nothing, expected a value", decoder="{top: d, sources: ['']}"),
    case(
        "record-in-verilog",
        "6: count: 'st.count' is part of a record, which only VHDL ports have",
        count="{port: st.count, width: 8, signed: false}",
    ),
    case(
        "zeroed-vhdl",
        "8: start: `power_up: zero` is for Verilog; give the VHDL signals initial values",
        decoder="{top: d, sources: [old.vhd]}",
        start="{power_up: zero}",
    ),
    case(
        "two-languages",
        "2: decoder.sources: 'old.vhd' is VHDL and 'd.v' is Verilog; a decoder is in one language",
        decoder="{top: d, sources: [d.v, old.vhd]}",
    ),
    case(
        "standard-of-verilog",
        "2: decoder.standard: `standard` is for VHDL sources; Verilog is read as SystemVerilog 2012",
        decoder="{top: d, sources: [d.v], standard: 08}",
    ),
    case(
        "standard-unknown",
        "2: decoder.standard: found '2008', expected 93 or 08 (did you mean '08'?)",
        decoder="{top: d, sources: [old.vhd], standard: 2008}",
    ),
    case(
        "missing-source",
        "2: decoder.sources[1]: 'e.v': there is no such file; name files, by paths from the folder of the decoder file",
        decoder="{top: d, sources: [d.v, e.v]}",
    ),
    case(
        "absolute-source",
        "2: decoder.sources[0]: '/no/d.v': there is no such file; name files, by paths from the folder of the decoder file",
        decoder="{top: d, sources: [/no/d.v]}",
    ),
    case(
        "folder-as-source",
        "2: decoder.sources[0]: 'rtl': it is a folder; name files, by paths from the folder of the decoder file",
        decoder="{top: d, sources: [rtl]}",
    ),
    case(
        "other-suffix",
        "2: decoder.sources[0]: 'notes.txt' does not end in .v, .sv, .vhd or .vhdl",
        decoder="{top: d, sources: [notes.txt]}",
    ),
    case("glob-matches-nothing", "2: decoder.sources[0]: no file matches '*.sv' in '.'", decoder="{top: d, sources: ['*.sv']}"),
    case(
        "absolute-glob-matches-nothing",
        "2: decoder.sources[0]: no file matches '/no-such-folder/*.v' in '.'",
        decoder="{top: d, sources: [/no-such-folder/*.v]}",
    ),
    case(
        "glob-matches-other-suffix",
        "2: decoder.sources[0]: 'notes.txt' does not end in .v, .sv, .vhd or .vhdl",
        decoder="{top: d, sources: ['**/*.txt']}",
    ),
    case(
        "stars-in-a-word",
        "2: decoder.sources[0]: found 'rtl/**.v', but ** stands for whole folders only, as in rtl/**/*.v",
        decoder="{top: d, sources: [rtl/**.v]}",
    ),
    case(
        "path-with-nul",
        r"2: decoder.sources[0]: found '*\x00.v', expected a path of printable characters",
        decoder=r'{top: d, sources: ["*\0.v"]}',
    ),
    case(
        "path-with-surrogate",
        r"2: decoder.sources[0]: found '\ud800.v', expected a path of printable characters",
        decoder=r'{top: d, sources: ["\ud800.v"]}',
    ),
    case(
        "path-too-long",
        f"2: decoder.sources[0]: '{'x' * 57}...' cannot be looked for: File name too long",
        decoder=f"{{top: d, sources: [{'x' * 300}.v]}}",
    ),
    case(
        "no-include-folder",
        "2: decoder.include_dirs[0]: 'inc': there is no such folder; paths start from the folder of the decoder file",
        decoder="{top: d, sources: [d.v], include_dirs: [inc]}",
    ),
    case("keyword-as-top", f"2: decoder.top: found 'module', {KEYWORD}", decoder="{top: module, sources: [d.v]}"),
    case(
        "parameter-names",
        f"2: decoder.parameters.W-1: found 'W-1', {NAME}\n2: decoder.parameters.begin: found 'begin', {KEYWORD}",
        decoder="{top: d, sources: [d.v], parameters: {W-1: 1, begin: 1}}",
    ),
    # Numbers that are no 32-bit whole numbers must not pass as texts, or the decoder would take their characters for a number.
    *(
        case(
            f"parameter-{value}",
            f"2: decoder.parameters.N: found '{value}', expected a 32-bit whole number,"
            " or text of letters, digits, blanks and _.,+-",
            decoder=f"{{top: d, sources: [d.v], parameters: {{N: {value}}}}}",
        )
        for value in ("2147483648", "1.5", "99999999999", "1e3", "a;b")
    ),
    case(
        "parameters-list",
        "2: decoder.parameters: found a list, expected a map of parameter names and values",
        decoder="{top: d, sources: [d.v], parameters: [1]}",
    ),
    # ---- clock and reset
    case(
        "rate-without-unit",
        "3: clock.rate: found '50', expected a number and a unit for a rate: Hz, kHz, MHz, GHz",
        clock="{port: clk, rate: 50}",
    ),
    case(
        "rate-in-rpm",
        "3: clock.rate: found '50 rpm', expected a number and a unit for a rate: Hz, kHz, MHz, GHz",
        clock="{port: clk, rate: 50 rpm}",
    ),
    case(
        "rate-too-fast", "3: clock.rate: found '126 GHz', expected a rate from 1 Hz to 125 GHz", clock="{port: clk, rate: 126 GHz}"
    ),
    case("rate-too-slow", "3: clock.rate: found '0.9 Hz', expected a rate from 1 Hz to 125 GHz", clock="{port: clk, rate: 0.9 Hz}"),
    case("rate-zero", "3: clock.rate: found '0 Hz', expected a rate that is positive", clock="{port: clk, rate: 0 Hz}"),
    case(
        "rate-beyond-bounds",
        "3: clock.rate: found '1e999999 Hz', expected a number of at most 40 digits with an exponent of at most 30",
        clock="{port: clk, rate: 1e999999 Hz}",
    ),
    case(
        "tick-of-one",
        "3: clock.tick.every: found '1', expected a whole number from 2 to 1000000\n"
        "3: clock.tick: the key 'port' is missing; write for example `port: tick`",
        clock="{port: clk, rate: 50 MHz, tick: {every: 1}}",
    ),
    case(
        "tick-and-short-reset",
        "4: reset: with a tick, write how many ticks the reset lasts, 2 at least",
        clock="{port: clk, rate: 50 MHz, tick: {port: ce, every: 4}}",
        reset="{port: rst, active: high, kind: sync, clocks: 1}",
    ),
    case("clock-empty", "3: clock: found nothing, expected none or a map with the keys port, rate, edge, tick", clock=""),
    case(
        "clock-list", "3: clock: found a list, expected none or a map with the keys port, rate, edge, tick", clock="[clk, 50 MHz]"
    ),
    case(
        "clock-edge",
        "3: clock.edge: found 'Risng', expected rising or falling (did you mean 'rising'?)",
        clock="{port: clk, rate: 50 MHz, edge: Risng}",
    ),
    case("port-name", f"3: clock.port: found '1clk', {NAME}", clock="{port: 1clk, rate: 50 MHz}"),
    case("reset-word", "4: reset: found 'off', expected none or a map with the keys port, active, kind, clocks", reset="off"),
    case(
        "reset-values",
        "4: reset.active: found '0', expected high or low\n"
        "4: reset.clocks: found '0', expected a whole number from 1 to 1000000\n"
        "4: reset.kind: found 'asynch', expected sync or async (did you mean 'async'?)",
        reset="{port: rst, active: 0, kind: asynch, clocks: 0}",
    ),
    case(
        "reset-says-no-polarity",
        "4: reset: the key 'active' is missing; write for example `active: low`",
        reset="{port: rst_n, kind: async}",
    ),
    # ---- lines and inputs
    case("lines-list", "5: lines: found a list, expected a map with the keys a, b, index", lines="[a, b]"),
    case("line-keyword", f"5: lines.a: found 'reg', {KEYWORD}", lines="{a: reg, b: b}"),
    case(
        "line-bits",
        "5: lines.a: found 'ab[1:0]', expected a port such as enc_a, or one bit of a vector such as \"ab[0]\"",
        lines='{a: "ab[1:0]", b: b}',
    ),
    case(
        "line-bit-without-quotes",
        "5: not valid YAML: while parsing a flow mapping: expected ',' or '}', but got '['"
        ' (a text with brackets stands in quotes: "ab[0]")',
        lines="{a: ab[0], b: ab[1]}",
    ),
    case("port-twice", "5: lines: the port 'clk' is used twice; `clock` uses it already", lines="{a: clk, b: b}"),
    case("bit-twice", "5: lines: the port 'ab[0]' is used twice", lines='{a: "ab[0]", b: "ab[0]"}'),
    case("vector-and-bit", "5: lines: the port 'ab' is used twice", lines='{a: "ab[0]", b: ab}'),
    case("input-is-a-line", "8: inputs: the port 'enc_a' is used twice; `lines` uses it already", inputs="{enc_a: 1}"),
    case(
        "clear-without-error", "8: inputs: a clear-error input needs `error: {kind: sticky}`", inputs="{clr: {role: clear-error}}"
    ),
    case(
        "clear-with-pulse-error",
        "8: inputs: a clear-error input needs `error: {kind: sticky}`",
        inputs="{clr: {role: clear-error}}",
        error="{port: err, kind: pulse}",
    ),
    case(
        "clear-twice-and-with-value",
        "8: inputs.clr.value: this has no meaning for an input with the role clear-error: `value` belongs to preload inputs\n"
        "8: inputs.more: a second clear-error input; one is supported",
        inputs="{clr: {role: clear-error, value: 0}, more: {role: clear-error}}",
        error="{port: err, kind: sticky}",
    ),
    case("unknown-role", f"8: inputs.en.role: found 'on', expected {ROLES}", inputs="{en: {role: on}}"),
    case(
        "role-keys",
        "8: inputs.en.sense: this has no meaning for an input with the role enable: `sense` belongs to clear-count, preload"
        " and latch inputs\n"
        "8: inputs.en.width: this has no meaning for an input with the role enable: the tool drives it\n"
        "8: inputs.zero.resumes: this has no meaning for an input with the role clear-count: `resumes` belongs to enable inputs\n"
        "8: inputs.zero.step_together: `step_together` needs `sense: edge`; while the level lasts the count does not move",
        inputs="{en: {role: enable, sense: edge, width: 2}, zero: {role: clear-count, step_together: counted, resumes: anyhow}}",
    ),
    case(
        "preload-outside",
        "8: inputs: the value 300 of the preload input is outside the count's range -128 to 127",
        inputs="{ld: {role: preload, value: 300}}",
        count="{port: p, width: 8, signed: true}",
    ),
    case(
        "preload-without-value",
        "8: inputs.ld: the key 'value' is missing; write for example `value: 1000`",
        inputs="{ld: {role: preload}}",
    ),
    case(
        "zero-without-count",
        "6: latency.count: the decoder file has no `count`, so nothing has this latency; add that, or take this away\n"
        "8: inputs: a clear-count input needs a `count` output",
        count=None,
        step="{port: step, kind: pulse}",
        inputs="{clr: {role: clear-count}}",
    ),
    case("arm-without-index", "8: inputs: an arm input needs an `index` action", inputs="{arm: {role: arm}}"),
    case("arm-once-without-index", "8: inputs: an arm-once input needs an `index` action", inputs="{arm: {role: arm-once}}"),
    case(
        "arm-once-by-level-and-range",
        "7: latency: with an arm-once input the latencies `inputs` and `index` must be one number each\n"
        "9: index: with an arm-once input the index acts once each time; write `sense: edge` for the index",
        inputs="{arm: {role: arm-once}}",
        index="{action: zero}",
        latency="{count: 3, index: [3, 4]}",
    ),
    case(
        "latch-of-no-count",
        "6: latency.count: the decoder file has no `count`, so nothing has this latency; add that, or take this away\n"
        "8: inputs: a latch input needs a `count` output, which it makes readable",
        count=None,
        step="{port: step, kind: pulse}",
        inputs="{take: {role: latch}}",
    ),
    case(
        "latch-with-what-it-hides",
        "7: latency: with a latch input the latencies `count` and `inputs` must be one number each\n"
        "9: direction: on a count that is read through a latch nobody sees when it moves; write `valid: always`, or leave it out",
        inputs="{take: {role: latch}}",
        direction="{port: dir, forward: 1, valid: with-count}",
        latency="{count: [3, 4]}",
    ),
    case(
        "latch-without-clock",
        "8: inputs: a latch input needs a clock, without a tick",
        clock="none",
        inputs="{take: {role: latch}}",
    ),
    case(
        "latch-and-index",
        "7: latency: with a latch input the latency `index` must be that of `count`",
        inputs="{take: {role: latch}}",
        index="{action: zero}",
        latency="{count: 3, index: 2}",
    ),
    case(
        "latch-of-a-latch",
        "9: index: the index cannot be checked to latch a count that is itself read through a latch",
        inputs="{take: {role: latch}}",
        index="{action: latch, port: captured}",
    ),
    case(
        "wide-constant",
        "8: inputs.mode: found '5', expected a whole number from 0 to 1; a wider input is written {value: 5, width: 3}",
        inputs="{mode: 5}",
    ),
    case(
        "constant-without-width",
        "8: inputs.mode.value: found '5', expected a whole number from 0 to 1; a wider input needs its `width`",
        inputs="{mode: {value: 5}}",
    ),
    case(
        "constant-too-wide",
        "8: inputs.mode.value: found '0x8', expected a whole number from 0 to 7",
        inputs="{mode: {value: 0x8, width: 3}}",
    ),
    case(
        "constant-width",
        "8: inputs.mode.width: found '65', expected a whole number from 1 to 64",
        inputs="{mode: {value: 500, width: 65}}",
    ),
    case("constant-without-value", "8: inputs.mode: the key 'value' is missing; write for example `value: 1`", inputs="{mode: {}}"),
    case(
        "constant-active-low",
        "8: inputs.en.active: a constant is driven as it is written; `active` belongs to inputs with another role",
        inputs="{en: {value: 1, active: low}}",
    ),
    case("input-null", "8: inputs.en: found nothing, expected a value", inputs="{en: }"),
    case("input-name", f"8: inputs.my-en: found 'my-en', {NAME}; or any word, with {{port: NAME}}", inputs="{my-en: 1}"),
    case("inputs-list", "8: inputs: found a list, expected a map of input names and values", inputs="[en]"),
    case("key-is-a-list", "8: inputs: a key must be a plain word of at most 100 characters", inputs="{[en]: 1}"),
    case("key-unprintable", "8: inputs: a key must be a plain word of at most 100 characters", inputs='{"\\e[2J": 1}'),
    case("text-too-long", "8: inputs.en: found a text of 1001 characters; at most 1000 are read", inputs=f"{{en: {'9' * 1001}}}"),
    # ---- count and start
    case("count-number", f"6: count: found '16', expected a map with the keys {COUNT_KEYS}", count="16"),
    # A width that is wrong must not drag the start count or the modulus with it.
    case(
        "count-width",
        "6: count.signed: found 'True', expected false or true (did you mean 'true'?)\n"
        "6: count.width: found '65', expected a whole number from 2 to 64",
        count="{port: p, width: 65, signed: True, overflow: modulo, modulo: 4000}",
        start="{count: 3000}",
    ),
    case(
        "count-says-no-sign",
        "6: count: the key 'signed' is missing; write for example `signed: true`",
        count="{port: p, width: 8}",
    ),
    case(
        "modulo-without-modulo",
        "6: count: the key 'modulo' is missing; write for example `modulo: 4000` (counts 0 to 3999)",
        count="{port: p, width: 8, signed: false, overflow: modulo}",
    ),
    case(
        "modulo-with-wrap",
        "6: count.modulo: `modulo` belongs to `overflow: modulo`; add that, or take this away",
        count="{port: p, width: 8, signed: false, modulo: 100}",
    ),
    case(
        "modulo-too-large",
        "6: count.modulo: found '257', expected a whole number from 2 to 256",
        count="{port: p, width: 8, signed: false, overflow: modulo, modulo: 257}",
    ),
    case(
        "lowest-without-hold",
        "6: count.lowest: `lowest` and `highest` belong to `overflow: hold`; add that, or take them away",
        count="{port: p, width: 8, signed: false, lowest: 4}",
    ),
    case(
        "empty-range",
        "6: count: the range from 9 to 9 holds no two counts; `highest` must be above `lowest`",
        count="{port: p, width: 8, signed: false, overflow: hold, lowest: 9, highest: 9}",
        start="{count: 9}",
    ),
    case(
        "highest-too-high",
        "6: count.highest: found '256', expected a whole number from 0 to 255",
        count="{port: p, width: 8, signed: false, overflow: hold, highest: 256}",
        start="{count: 9}",
    ),
    case(
        "at-with-x4",
        "6: count.at: `at` belongs to resolution x1 or x2; an x4 count moves at every state boundary",
        count="{port: p, width: 8, signed: false, at: 11}",
    ),
    case(
        "bad-state",
        "6: count.at: found '1', expected 00, 10, 11 or 01 (did you mean '11'?)",
        count="{port: p, width: 8, signed: false, resolution: x1, at: 1}",
    ),
    case(
        "bad-resolution",
        "6: count.resolution: found '4x', expected x4, x2 or x1",
        count="{port: p, width: 8, signed: false, resolution: 4x}",
    ),
    case("start-outside", "8: start: the start count 256 is outside the count's range 0 to 255", start="{count: 256}"),
    case(
        "start-number",
        "8: start.count: found '12__3', expected a whole number from -9223372036854775808 to 9223372036854775807",
        start="{count: 12__3}",
    ),
    case(
        "rest-states-word",
        "8: start.rest_states: found '00', expected any or a list of states such as [00, 11]",
        start="{rest_states: 00}",
    ),
    case("rest-states-list", "8: start.rest_states[1]: found '12', expected 00, 10, 11 or 01", start="{rest_states: [00, 12]}"),
    # ---- other outputs
    case(
        "direction-values",
        "8: direction.forward: found '2', expected 0 or 1\n"
        "8: direction.valid: found 'with-steps', expected always, with-count or with-step (did you mean 'with-step'?)",
        direction="{port: dir, forward: 2, valid: with-steps}",
    ),
    case(
        "direction-of-several-bits",
        "8: direction.port: found 'status[3:2]', which is more than one bit; expected a port or one bit of it",
        direction='{port: "status[3:2]", forward: 1, valid: always}',
    ),
    case(
        "step-kind",
        "8: step.kind: found 'edge', expected pulse, toggle or level",
        step="{port: step, kind: edge}",
    ),
    case(
        "step-both-ways",
        "8: step.port: `port` is for steps both ways on one output; `up` and `down` are for one output each way\n"
        "8: step: the key 'down' is missing; write for example `down: count_down`",
        step="{port: step, up: u, kind: pulse}",
    ),
    case("error-counter", "8: error: the key 'width' is missing; write for example `width: 8`", error="{port: err, kind: counter}"),
    case(
        "error-keys",
        "8: error.overflow: `overflow` belongs to `kind: counter`; this one is pulse\n"
        "8: error.width: `width` belongs to `kind: counter`; this one is pulse\n"
        "8: error.wins: `wins` belongs to `kind: sticky`; this one is pulse",
        error="{port: err, kind: pulse, wins: set, width: 4, overflow: hold}",
    ),
    case(
        "counter-active",
        "8: error.active: `active` belongs to an output of one bit; a counter is a number",
        error="{port: err, kind: counter, width: 4, active: low}",
    ),
    case(
        "slice-backwards",
        "6: count.port: found 'word[3:10]', with the lower bit first; write 'word[10:3]'",
        count='{port: "word[3:10]", width: 8, signed: false}',
    ),
    case(
        "slice-width", "6: count.port: these are 7 bits, and the width is 8", count='{port: "word[10:4]", width: 8, signed: false}'
    ),
    case(
        "slices-without-bits",
        '6: count.port: of several ports each needs its bits, as in ["pos_high[7:0]", "pos_low[7:0]"]',
        count='{port: [high, "low[7:0]"], width: 16, signed: false}',
    ),
    case(
        "slice-text",
        '6: count.port: found \'p[7:]\', expected a port such as pos, or bits of one such as "status[3]" or "status[23:8]"',
        count='{port: "p[7:]", width: 8, signed: false}',
    ),
    case(
        "slices-overlap",
        "8: direction: the port 'word[15]' is used twice; `count` uses it already",
        count='{port: "word[15:0]", width: 16, signed: false}',
        direction='{port: "word[15]", forward: 1, valid: always}',
    ),
    # A misspelt kind must not also be taken for another kind than the clear-error input needs.
    case(
        "error-kind",
        "9: error.kind: found 'stiky', expected pulse, sticky or counter (did you mean 'sticky'?)",
        inputs="{clr: {role: clear-error}}",
        error="{port: err, kind: stiky}",
    ),
    case(
        "index-latch",
        "8: index: the key 'port' is missing; write for example `port: captured`",
        index="{action: latch}",
        lines="{a: enc_a, b: enc_b, index: z}",
    ),
    case(
        "index-load",
        "8: index: the key 'value' is missing; write for example `value: 100`",
        index="{action: load}",
        lines="{a: enc_a, b: enc_b, index: z}",
    ),
    case(
        "index-load-outside",
        "8: index: the value 300 is outside the count's range 0 to 255",
        count="{port: p, width: 8, signed: false}",
        lines="{a: enc_a, b: enc_b, index: z}",
        index="{action: load, value: 300}",
    ),
    case(
        "index-keys",
        "8: index.sense: this belongs to the actions zero and load; latch and pulse act once, as the index becomes active\n"
        "8: index.step_together: this belongs to the actions zero and load; latch and pulse act once, as the index becomes active\n"
        "8: index.value: `value` belongs to the action load; this one is pulse",
        lines="{a: enc_a, b: enc_b, index: z}",
        index="{action: pulse, port: home, value: 3, sense: edge, step_together: lost}",
    ),
    case(
        "index-step-together",
        "8: index.step_together: `step_together` needs `sense: edge`; while the level lasts the count does not move",
        lines="{a: enc_a, b: enc_b, index: z}",
        index="{action: zero, step_together: counted}",
    ),
    case(
        "index-without-line",
        "8: index: an index action needs the index line; add it as `lines: {index: enc_z}`",
        lines="{a: enc_a, b: enc_b}",
        index="{action: zero}",
    ),
    case(
        "index-without-count",
        "6: latency.count: the decoder file has no `count`, so nothing has this latency; add that, or take this away\n"
        "8: index: an index action other than `pulse` needs a `count` output",
        count=None,
        step="{port: step, kind: pulse}",
        index="{action: zero}",
    ),
    case("illegal-word", "8: illegal: found 'hold', expected a map with the key count", illegal="hold"),
    case(
        "illegal-other",
        '8: illegal.count: found \'skip\', expected hold or any or moves such as {"00": 1, "11": 1, "01": -1, "10": -1}',
        illegal="{count: skip}",
    ),
    case(
        "illegal-moves",
        "8: illegal.count.00: found '9', expected a whole number from -4 to 4\n"
        "8: illegal.count.12: unknown key; allowed here: 00, 01, 10, 11\n"
        "8: illegal.count: the key '10' is missing; write for example `10: 1`\n"
        "8: illegal.count: the key '11' is missing; write for example `11: 1`",
        illegal='{count: {"00": 9, "01": 0, "12": 1}}',
    ),
    case("illegal-empty", "8: illegal: the key 'count' is missing; write for example `count: hold`", illegal="{}"),
    # ---- latency, filter and the rest
    case(
        "latency-of-nothing",
        "7: latency.error: the decoder file has no `error`, so nothing has this latency; add that, or take this away",
        latency="{count: 3, error: 4}",
    ),
    case(
        "latency-of-step-only",
        "7: latency: the key 'count' is missing; write for example `count: 3`",
        latency="{step: 3}",
        step="{port: step, kind: pulse}",
    ),
    case(
        "top-like-the-bench",
        "2: decoder.top: the module that tbkit puts around the decoder is called 'tbkit_bench'; choose another name",
        decoder="{top: tbkit_bench, sources: [d.v]}",
    ),
    case("latency-backwards", "7: latency.count: the range [5, 3] runs backwards; write [3, 5]", latency="{count: [5, 3]}"),
    case(
        "latency-three",
        "7: latency.count: found a list of 3, expected a number of clocks or [least, most]",
        latency="{count: [1, 2, 3]}",
    ),
    case("latency-none", "7: latency.count: found an empty list, expected at least one item", latency="{count: []}"),
    # One of the two is wrong, so nothing is said about their order.
    case("latency-negative", f"7: latency.count[1]: found '-1', expected {CLOCKS}", latency="{count: [3, -1]}"),
    case(
        "latency-empty",
        "7: latency: the key 'count' is missing; write for example `count: 3`",
        latency="{}",
    ),
    case(
        "filter-passes-what-it-rejects",
        "8: filter: a pulse of 3 clocks cannot always pass while 3 never do; `passes` must be above `rejects`",
        filter="{rejects: 3, passes: 3}",
    ),
    case("filter-half", "8: filter: the key 'passes' is missing; write for example `passes: 3`", filter="{rejects: 2}"),
    case(
        "filter-text",
        "8: filter.passes: found 'x', expected a whole number from 1 to 1000000",
        filter="{rejects: 3, passes: x}",
    ),
    case("filter-word", "8: filter: found '3', expected none or a map with the keys rejects, passes, bursts", filter="3"),
    case("shortest-zero", "8: shortest_state: found '0', expected a whole number from 1 to 1000000", shortest_state="0"),
    case("timers-yes", "8: timers: found 'yes', expected false or true", timers="yes"),
    # ---- YAML itself
    case("anchor", "2: anchors (&name) are not accepted; write the value out", decoder="&d {top: d, sources: [d.v]}"),
    case("alias", "2: aliases (*name) are not accepted; write the value out", decoder="*d"),
    case("too-deep", "8: nested deeper than 24 levels, the most that is read", inputs="[" * 24 + "]" * 24),
    case("endlessly-deep", "8: nested deeper than 24 levels, the most that is read", inputs="[" * 300),
    case(
        "duplicate-inside",
        "3: clock.rate: the key stands twice; it first stands in line 3",
        clock="{port: clk, rate: 50 MHz, rate: 10 MHz}",
    ),
    case(
        "open-bracket",
        "3: not valid YAML: while parsing a flow mapping: expected ',' or '}', but got a text; it began in line 2",
        decoder="{top: d, sources: [d.v]",
    ),
    case(
        "tab",
        "3: not valid YAML: while scanning for the next token: found character '\\t' that cannot start any token"
        " (indent with blanks, not with tabs)",
        decoder="\n\ttop: d",
    ),
    case("escape-out-of-range", "8: not valid YAML: an escape or a version that is out of range", inputs='{x: "\\UFFFFFFFF"}'),
    pytest.param(decoder_file() + "count: 3\n", "8: count: the key stands twice; it first stands in line 6", id="duplicate"),
    pytest.param(
        decoder_file().replace("tbkit: ", "tbkit:"),
        "2: not valid YAML: mapping values are not allowed here (one `key: value` a line, with a blank after the colon)",
        id="no-blank-after-colon",
    ),
    pytest.param(
        decoder_file() + "---\na: 1\n",
        "8: not valid YAML: expected a single document in the stream: but found another document; it began in line 1",
        id="two-documents",
    ),
    pytest.param(
        "tbkit: 'x\n\n",
        "3: not valid YAML: while scanning a quoted scalar: found unexpected end of stream; it began in line 1",
        id="open-quote",
    ),
    pytest.param("", "1: the decoder file is empty", id="empty"),
    pytest.param("# nothing yet\n\n", "1: the decoder file is empty", id="only-a-comment"),
    pytest.param("- a\n", f"1: found a list, expected a map with the keys {TOP_KEYS}", id="list"),
    pytest.param("decoder", f"1: found 'decoder', expected a map with the keys {TOP_KEYS}", id="word"),
    pytest.param(
        decoder_file().encode() + b"# 3 \xb5s\n",
        "8: the decoder file is not UTF-8 text: found the byte 0xb5; save it as UTF-8",
        id="latin-1",
    ),
    pytest.param(decoder_file() + "# \x07\n", "8: the character U+0007 cannot stand in YAML", id="control-character"),
    pytest.param("#" * (1 << 20) + "\n", "1: the decoder file has more than 1048576 bytes, the most that is read", id="too-large"),
    # ---- several problems come together, in the order of their lines
    pytest.param(
        "tbkit: 2\nvelocity: 1\nclock: {port: clk, rate: 5}\nlines: {a: x, b: x}\ncuont: 3\nlatency: [3]\nreset: none\n",
        "1: a decoder needs a `count` or a `step` output: without one there is nothing to check\n"
        "1: tbkit: found '2', expected 1, the format that this version of tbkit reads\n"
        "1: the key 'decoder' is missing; write for example `decoder: {top: my_decoder, sources: [my_decoder.v]}`\n"
        "2: velocity: this key is not supported by this version of tbkit\n"
        "3: clock.rate: found '5', expected a number and a unit for a rate: Hz, kHz, MHz, GHz\n"
        "4: lines: the port 'x' is used twice\n"
        f"5: cuont: unknown key; allowed here: {TOP_KEYS} (did you mean 'count'?)\n"
        "6: latency: found a list, expected a map with the keys count, direction, step, error, index, clear, inputs",
        id="many",
    ),
]


@pytest.mark.parametrize(("content", "expected"), CASES)
def test_refusal(refusal: Callable[..., str], content: str | bytes, expected: str) -> None:
    assert refusal(read_contract, content) == "\n".join(f"x.yaml:{line}" for line in expected.split("\n"))


@pytest.mark.usefixtures("folder")
def test_file_that_cannot_be_read() -> None:
    for path, why in (("none.yaml", "No such file or directory"), ("rtl", "Is a directory")):
        with pytest.raises(InputError) as caught:
            read_contract(Path(path))
        assert str(caught.value) == f"{path}:1: the decoder file cannot be read: {why}"


def test_sound_file_is_read(folder: Path) -> None:
    """The file that the bad ones are made from is sound: what they are refused for is what was changed."""
    file = folder / "x.yaml"
    file.write_text(decoder_file(decoder="{top: d, sources: ['**/*.v'], parameters: {N: 0x10, M: -2147483648, S: hex}}"))

    contract = read_contract(file)

    assert contract.design.sources == (folder / "d.v",)
    assert contract.design.parameters == (("N", 16), ("M", -(1 << 31)), ("S", "hex"))
    assert (contract.clock.period_ps, contract.latency.count.max, contract.settle_clocks) == (20_000, 3, 8)
    # A file whose name looks like a pattern is meant as it stands.
    (folder / "d[1].v").touch()
    file.write_text(decoder_file(decoder="{top: d, sources: ['d[1].v']}"))
    assert read_contract(file).design.sources == (folder / "d[1].v",)


# ---- whatever is written, it is read or refused, and nothing else happens

DECODER_TREE = yaml.load(
    """
    tbkit: 1
    decoder: {top: d, sources: [d.v], include_dirs: [rtl], parameters: {WIDTH: 16}}
    clock: {port: clk, rate: 50 MHz, edge: rising}
    reset: {port: rst_n, active: low, kind: async, clocks: 4}
    start: {count: 0, rest_states: [00], settle: 12}
    lines: {a: {port: enc_a, active: low}, b: enc_b, index: enc_z}
    inputs: {en: 1, mode: {value: 2, width: 2}, clr: {role: clear-error, active: low}}
    count: {port: position, width: 16, signed: true, resolution: x1, at: 11, overflow: hold, lowest: -9, highest: 9}
    direction: {port: dir, forward: 1, valid: with-count}
    step: {port: step, kind: pulse}
    error: {port: err, kind: sticky}
    illegal: {count: hold}
    index: {action: zero, when: {a: 1, b: 1}, sense: edge}
    latency: {count: [6, 6], error: 3}
    filter: {rejects: 2, passes: 3, bursts: open}
    shortest_state: 1
    timers: false
    """,
    Loader=yaml.BaseLoader,  # noqa: S506  # it makes texts only
)
PROFILE_TREE = yaml.load(
    """
    profile: p
    about: something
    needs: [count]
    power_up: true
    seed: 7
    encoder: {lines: 4, start: 00, index: {width: 90 deg, at: 0 deg}}
    motion:
      - rest: 1 us
      - move: {by: 2 rev, speed: 3000 rpm, accel: 1 rev/s2}
      - reverse: {in: 00, going: forward, run: 3 states, speed: 1 states/dwell, times: 20}
      - dither: {over: 4 states, every: 5 dwell, times: 20}
      - illegal: {every: 2 settle, times: 2}
      - walk: {travel: 60 states, speed: [0.2 states/dwell, 1 states/dwell], run: 1..9}
      - reset: {for: 1 clocks, moving: 1 states/dwell}
      - repeat: {times: 2, do: [{clear: {for: 1 ns}}]}
    disturb:
      - glitch: {on: a, width: 1 pass, times: 60}
      - bounce: {on: b, for: [1 clocks, 2 dwell], pulses: 1..6}
      - missing: {on: b, edges: [6, 14]}
    """,
    Loader=yaml.BaseLoader,  # noqa: S506  # it makes texts only
)
Tree = dict[str, "Tree"] | list["Tree"] | str


def places(tree: Tree, way: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
    members = tree.items() if isinstance(tree, dict) else enumerate(tree) if isinstance(tree, list) else ()
    return [way, *(place for key, member in members for place in places(member, (*way, key)))]


def changed(tree: Tree, way: tuple[str | int, ...], value: Tree) -> Tree:
    if not way:
        return value
    if isinstance(tree, dict):
        return {key: changed(member, way[1:], value) if key == way[0] else member for key, member in tree.items()}
    assert isinstance(tree, list)
    return [changed(member, way[1:], value) if n == way[0] else member for n, member in enumerate(tree)]


KEYS = sorted({str(step) for tree in (DECODER_TREE, PROFILE_TREE) for way in places(tree) for step in way if isinstance(step, str)})
WORDS = st.sampled_from(
    [
        *"none any 00 12 0 1 -1 65 x4 wrap hold modulo true null ~ sticky zero constant clear-error enable".split(),
        *"*.v **/*.v **.v [.v ../x.v / rtl x.vhd . .. 3..1 0..0 0x10 0x 12__3 ab[0] ab[ ab[1000] begin -".split(),
        *("", "1 ns", "0 us", "4 clocks", "50 MHz", "-0 deg", "3000 rpm", "2 rev", "1 states/dwell", "1e30 rev/s2"),
        *("1e999999", "1e-999 s", "9e30 s", "9" * 5000, "1" * 39 + " s", "\u0663", "1 \u00b5s", "\u00b2", "x" * 300 + ".v"),
        *("\a", "\0", "*\0", "\ud800", "a/*/\udfff", "\U0010ffff", "\n", "\u2028"),
    ]
)
SCALARS = WORDS | st.sampled_from(KEYS) | st.text(max_size=6)
TREES = st.recursive(
    SCALARS,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from(KEYS) | st.text(max_size=3), inner, max_size=4),
    max_leaves=5,
)


@st.composite
def files(draw: st.DrawFn) -> tuple[Callable[[Path], object], str]:
    """A sound file of either kind with up to three of its parts replaced by anything, and its reader."""
    read, tree = draw(st.sampled_from(((read_contract, DECODER_TREE), (read_profile, PROFILE_TREE))))
    for _ in range(draw(st.integers(1, 3))):
        tree = changed(tree, draw(st.sampled_from(places(tree))), draw(TREES))
    # JSON is YAML, with every odd character escaped.
    return read, json.dumps(tree)


@pytest.mark.usefixtures("folder")
@settings(
    max_examples=150, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.function_scoped_fixture], database=None
)
@given(files())
def test_anything_is_read_or_refused(file: tuple[Callable[[Path], object], str]) -> None:
    read, text = file
    Path("x.yaml").write_text(text)
    told = ""
    try:
        read(Path("x.yaml"))
    except InputError as error:
        told = str(error)
    # What the user sees is one printable line a problem, whatever stood in the file.
    assert [line for line in told.splitlines() if not line.startswith("x.yaml:1: ") or not line.isprintable()] == []
