"""Every way to get a profile wrong is told with its place, what stood there, what is allowed and how to mend it."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from tbkit.profile_file import read_profile

TOP_KEYS = "profile, about, needs, power_up, seed, encoder, motion, disturb"
ACTIONS = (
    "rest, move, return, sine, table, clicks, home, reverse, dither, illegal, walk, reset, clear, zero, preload, disable, disarm,"
    " arm, repeat"
)
DISTURBANCES = (
    "glitch, bounce, missing, stuck, swap, invert, together, reset, clear, zero, preload, disable, disarm, arm, aperture, unknown"
)
ENCODER = "preset, lines, pitch, start, index, delay, duty_error, phase_error, state_error, jitter, eccentricity, hysteresis"
MOVE = "by, speed, accel, decel, jerk, start_speed, end_speed"
TIME = "expected a number and a unit for a time: s, ms, us, ns, ps, clocks, dwell, shortest, reject, pass, settle"
DISTANCE = "expected a number and a unit for a distance: states, cycles, rev, deg, rad, m, mm, um, overflow, underflow"
SPEED = (
    "expected a number and a unit for a speed: rpm, rev/s, deg/s, rad/s, mm/s, m/s, Hz (cycles per second),"
    " or any distance/time such as states/dwell"
)
ACCELERATION = (
    "expected a number and a unit for an acceleration: rev/s2, deg/s2, rad/s2, m/s2, or any distance/time2 such as states/ms2"
)
JERK = "expected a number and a unit for a jerk: rev/s3, deg/s3, rad/s3, m/s3, or any distance/time3 such as states/ms3"
RATE = "expected a number and a unit for a rate: Hz, kHz, MHz, GHz"
TIMES = "expected a whole number from 1 to 1000000"


def motion(actions: str, expected: str) -> object:
    """A profile with these actions in line 2; each line of ``expected`` belongs to that line."""
    return pytest.param(f"profile: p\nmotion: {actions}\n", expected.replace("@", "2: motion"), id=f"motion {actions}"[:60])


def other(key: str, value: str, expected: str) -> object:
    """A sound profile with one more key in line 3."""
    text = f"profile: p\nmotion: [{{rest: 1 us}}]\n{key}: {value}\n"
    return pytest.param(text, expected.replace("@", f"3: {key}"), id=f"{key} {value}"[:60])


CASES = [
    # ---- the list of actions
    motion("", "@: found nothing, expected a list of actions, each begun with `-`"),
    motion("rest", "@: found 'rest', expected a list of actions, each begun with `-`"),
    motion("{rest: 1 us}", "@: found a map, expected a list of actions, each begun with `-`"),
    motion("[]", "@: found an empty list, expected at least one item"),
    motion("[rest]", "@[0]: found 'rest', expected an action such as `rest: ...`"),
    motion("[null]", "@[0]: found 'null', expected an action such as `rest: ...`"),
    motion("[[]]", "@[0]: found a list, expected an action such as `rest: ...`"),
    motion("[{}]", "@[0]: found an empty map, expected an action such as `rest: ...`"),
    motion("[{rets: 1 us}]", f"@[0].rets: unknown action; known: {ACTIONS} (did you mean 'rest'?)"),
    motion("[{velocity: 3}]", f"@[0].velocity: unknown action; known: {ACTIONS}"),
    motion("[{rest: 1 us, move: {}}]", "@[0]: found 2 keys, expected one action an item; start each with its own `-`"),
    # ---- quantities
    motion("[{rest: 1}]", f"@[0].rest: found '1', {TIME}"),
    motion("[{rest: 1 rpm}]", f"@[0].rest: found '1 rpm', {TIME}"),
    motion("[{rest: long}]", f"@[0].rest: found 'long', {TIME}"),
    motion("[{rest: '1,5 us'}]", f"@[0].rest: found '1,5 us', {TIME}"),
    motion("[{rest: [1 us]}]", "@[0].rest: found a list, expected one value"),
    motion("[{rest: }]", "@[0].rest: found nothing, expected a value"),
    motion("[{rest: -1 us}]", "@[0].rest: found '-1 us', expected a time that is not negative"),
    motion("[{rest: 1e31 s}]", "@[0].rest: found '1e31 s', expected a number of at most 40 digits with an exponent of at most 30"),
    motion("[{move: {by: 1 us, speed: 1 rpm}}]", f"@[0].move.by: found '1 us', {DISTANCE}"),
    motion("[{move: {by: 0 rev, speed: 1 rpm}}]", "@[0].move.by: found '0 rev', expected a distance that is not zero"),
    motion("[{move: {by: 1 rev, speed: 1 us}}]", f"@[0].move.speed: found '1 us', {SPEED}"),
    motion("[{move: {by: 1 rev, speed: -1 rpm}}]", "@[0].move.speed: found '-1 rpm', expected a speed that is positive"),
    motion("[{move: {by: 1 rev, speed: 1 rpm, accel: 3 rpm}}]", f"@[0].move.accel: found '3 rpm', {ACCELERATION}"),
    motion(
        "[{move: {by: 1 rev, speed: 1 rpm, accel: 0 rev/s2}}]",
        "@[0].move.accel: found '0 rev/s2', expected an acceleration that is positive",
    ),
    # ---- each action
    motion("[{move: 1 rev}]", f"@[0].move: found '1 rev', expected a map with the keys {MOVE}"),
    motion("[{move: {by: 1 rev}}]", "@[0].move: the key 'speed' is missing; write for example `speed: 3000 rpm`"),
    motion("[{move: {by: 1 rev, speed: 1 rpm, snap: 2}}]", f"@[0].move.snap: unknown key; allowed here: {MOVE}"),
    motion(
        "[{move: {by: 1 rev, speed: 1 rpm, acel: 1 rev/s2}}]",
        f"@[0].move.acel: unknown key; allowed here: {MOVE} (did you mean 'accel'?)",
    ),
    motion(
        "[{reverse: {in: 12, going: up, speed: 1 states/dwell, times: 0}}]",
        "@[0].reverse.going: found 'up', expected forward or backward\n"
        "@[0].reverse.in: found '12', expected 00, 10, 11 or 01\n"
        f"@[0].reverse.times: found '0', {TIMES}",
    ),
    motion("[{dither: {every: 1 us, times: many}}]", f"@[0].dither.times: found 'many', {TIMES}"),
    motion("[{dither: {every: 1 us, times: 1000001}}]", f"@[0].dither.times: found '1000001', {TIMES}"),
    motion("[{dither: {every: 0 us, times: 1}}]", "@[0].dither.every: found '0 us', expected a time that is positive"),
    motion("[{illegal: {}}]", "@[0].illegal: the key 'every' is missing; write for example `every: 2 settle`"),
    motion(
        "[{walk: {travel: 10 states, speed: [1 rpm, 2 rpm, 3 rpm], run: 3..1}}]",
        "@[0].walk.run: the range 3..1 runs backwards; write 1..3\n"
        "@[0].walk.speed: found a list of 3, expected one speed or [least, most]",
    ),
    motion(
        "[{walk: {travel: 10 states, speed: [], run: 0..4}}]",
        "@[0].walk.run: found '0..4', expected a whole number from 1 to 1000000, or a range such as 3..9\n"
        "@[0].walk.speed: found an empty list, expected at least one item",
    ),
    motion(
        "[{walk: {travel: 10 states, speed: 1 rpm, run: 1-4}}]",
        "@[0].walk.run: found '1-4', expected a whole number from 1 to 1000000, or a range such as 3..9",
    ),
    motion(
        "[{move: {by: 1 rev, speed: 1 rpm, jerk: 1 rev/s3}}]",
        "@[0].move.jerk: `jerk` needs `accel`; add for example `accel: 4000 rev/s2`",
    ),
    motion(
        "[{move: {by: 1 rev, speed: 1 rpm, accel: 1 rev/s2, decel: 2 rev/s2, jerk: 1 rev/s3}}]",
        "@[0].move.decel: `decel` belongs to a move without `jerk`; with it both ramps have the same bounds",
    ),
    motion(
        "[{move: {by: 1 rev, speed: 1 rpm, decel: 2 rev/s2}}]",
        "@[0].move.decel: `decel` needs `accel`; without it the whole move has one speed",
    ),
    motion("[{move: {by: 1 rev, speed: 1 rpm, accel: 1 rev/s2, jerk: 1 rev/s2}}]", f"@[0].move.jerk: found '1 rev/s2', {JERK}"),
    motion(
        "[{move: {by: 1 rev, speed: 1 rpm, start_speed: 1 rpm}}]",
        "@[0].move.start_speed: `start_speed` needs `accel`; without it the whole move has one speed",
    ),
    motion(
        "[{move: {by: 1 rev, speed: 1 rpm, end_speed: 1 rpm}}]",
        "@[0].move.end_speed: `end_speed` needs `accel`; without it the whole move has one speed",
    ),
    motion("[{return: {}}]", "@[0].return: the key 'speed' is missing; write for example `speed: 3000 rpm`"),
    motion("[{return: {speed: 1 rpm, by: 1 rev}}]", "@[0].return.by: unknown key; allowed here: speed, accel, jerk"),
    motion(
        "[{sine: {rate: [1 Hz, 2 Hz, 3 Hz], amplitude: -1 deg, cycles: 0}}]",
        "@[0].sine.amplitude: found '-1 deg', expected a distance that is positive\n"
        f"@[0].sine.cycles: found '0', {TIMES}\n"
        "@[0].sine.rate: found a list of 3, expected one rate or [least, most]",
    ),
    motion("[{sine: {rate: 1 rpm, amplitude: 1 deg, cycles: 1}}]", f"@[0].sine.rate: found '1 rpm', {RATE}"),
    motion("[{table: run.csv}]", "@[0].table: found 'run.csv', expected a map with the key file"),
    motion("[{table: {}}]", "@[0].table: the key 'file' is missing; write for example `file: run.csv`"),
    motion(
        "[{table: {file: none.csv}}]",
        "@[0].table.file: 'none.csv' cannot be read as a table: [Errno 2] No such file or directory: 'none.csv'",
    ),
    motion(
        "[{clicks: {by: 0 states, time: 1 ms, times: 3}}]",
        "@[0].clicks.by: found '0 states', expected a distance that is not zero\n"
        "@[0].clicks: the key 'every' is missing; write for example `every: 150 ms`",
    ),
    motion(
        "[{home: {going: up, fast: 1 rpm, slow: 1 rpm, accel: 1 rev/s2}}]",
        "@[0].home.going: found 'up', expected forward or backward\n"
        "@[0].home: the key 'back_off' is missing; write for example `back_off: 8 states`",
    ),
    motion("[{walk: {travel: 1 rev, speed: 1 rpm, accel: 1}}]", f"@[0].walk.accel: found '1', {ACCELERATION}"),
    motion("[{reset: 4 clocks}]", "@[0].reset: found '4 clocks', expected a map with the keys for, moving"),
    motion("[{clear: {for: 1 us, moving: 0 rpm}}]", "@[0].clear.moving: found '0 rpm', expected a speed that is not zero"),
    motion("[{repeat: {times: 3}}]", "@[0].repeat: the key 'do' is missing; write for example `do: [{rest: 10 us}]`"),
    motion(
        "[{repeat: {times: 3, do: {rest: 1 us}}}]",
        "@[0].repeat.do: found a map, expected a list of actions, each begun with `-`",
    ),
    motion(
        "[{rest: 1 us}, {repeat: {times: 3, do: [{rest: 1 us}, {repaet: 3}]}}]",
        f"@[1].repeat.do[1].repaet: unknown action; known: {ACTIONS} (did you mean 'repeat'?)",
    ),
    # ---- disturbances
    other("disturb", "{}", "@: found a map, expected a list of disturbances, each begun with `-`"),
    other("disturb", "[glitch]", "@[0]: found 'glitch', expected a disturbance such as `glitch: ...`"),
    other("disturb", "[{}]", "@[0]: found an empty map, expected a disturbance such as `glitch: ...`"),
    other("disturb", "[{glich: 1}]", f"@[0].glich: unknown disturbance; known: {DISTURBANCES} (did you mean 'glitch'?)"),
    other("disturb", "[{glitch: {on: z, width: 1 reject, times: 3}}]", "@[0].glitch.on: found 'z', expected a, b or index"),
    other(
        "disturb",
        "[{glitch: {on: a}, bounce: 2}]",
        "@[0].glitch: found none of times, at, edges, state, rate; write one, for example `times: 20`\n"
        "@[0].glitch: the key 'width' is missing; write for example `width: 1 reject`\n"
        "@[0]: found 2 keys, expected one disturbance an item; start each with its own `-`",
    ),
    other(
        "disturb",
        "[{bounce: {on: a, for: [1 us], pulses: 9..3}}]",
        "@[0].bounce.for: found a list of 1, expected one time or [least, most]\n"
        "@[0].bounce.pulses: the range 9..3 runs backwards; write 3..9",
    ),
    other(
        "disturb",
        "[{bounce: {on: a, for: 1 us, pulses: 1..1001}}]",
        "@[0].bounce.pulses: found '1..1001', expected a whole number from 0 to 1000, or a range such as 3..9",
    ),
    other(
        "disturb",
        "[{missing: {on: a}}]",
        "@[0].missing: found none of times, at, edges, state, rate; write one, for example `times: 3`",
    ),
    other(
        "disturb", "[{bounce: {on: a, preset: knob}}]", "@[0].bounce: the key 'pulses' is missing; write for example `pulses: 3..9`"
    ),
    other(
        "disturb",
        "[{bounce: {on: a, preset: knobs, pulses: 3}}]",
        "@[0].bounce.preset: found 'knobs', expected knob, knob-rough, switch or contact (did you mean 'knob'?)",
    ),
    other("disturb", "[{missing: {on: a, edges: [0]}}]", f"@[0].missing.edges[0]: found '0', {TIMES}"),
    other(
        "disturb", "[{glitch: {on: [], width: 1 us, times: 1}}]", "@[0].glitch.on: found an empty list, expected at least one item"
    ),
    other(
        "disturb",
        "[{glitch: {on: [a, c], width: [1 us], times: 1, at: 1 us}}]",
        "@[0].glitch.on[1]: found 'c', expected a, b or index\n"
        "@[0].glitch.width: found a list of 1, expected one time or [least, most]\n"
        "@[0].glitch: found times and at of times, at, edges, state, rate; write one, for example `times: 20`",
    ),
    other(
        "disturb",
        "[{glitch: {on: a, width: [3 us, 1 us], times: 1}}]",
        "@[0].glitch.width: the range [3 us, 1 us] runs backwards; write [1 us, 3 us]",
    ),
    other(
        "disturb", "[{together: {at: [1 us, -2 us]}}]", "@[0].together.at[1]: found '-2 us', expected a time that is not negative"
    ),
    other("disturb", "[{together: {edges: [0]}}]", f"@[0].together.edges[0]: found '0', {TIMES}"),
    other("disturb", "[{together: {state: 02}}]", "@[0].together.state: found '02', expected 00, 10, 11 or 01"),
    other("disturb", "[{together: {rate: 1 us}}]", f"@[0].together.rate: found '1 us', {RATE}"),
    other("disturb", "[{together: {times: 3, phase: 90 deg}}]", "@[0].together.phase: `phase` belongs to `rate`"),
    other(
        "disturb", "[{together: 3}]", "@[0].together: found '3', expected a map with the keys times, at, edges, state, rate, phase"
    ),
    other(
        "disturb",
        "[{bounce: {on: a, for: 1 us, pulses: 3, only: rise}}]",
        "@[0].bounce.only: found 'rise', expected both, make or break",
    ),
    other(
        "disturb",
        "[{bounce: {on: a, for: 1 us, pulses: 3, phase: 3 deg}}]",
        "@[0].bounce: found none of times, at, edges, state, rate; write one, for example `times: 20`",
    ),
    other(
        "disturb",
        "[{stuck: {on: a, level: 2, for: 0 us, at: 1 us}}]",
        "@[0].stuck.for: found '0 us', expected a time that is positive\n@[0].stuck.level: found '2', expected 0, 1 or noise",
    ),
    other(
        "disturb",
        "[{stuck: {on: a, level: 0}}]",
        "@[0].stuck: found none of times, at, edges, state, rate; write one, for example `times: 1`",
    ),
    other("disturb", "[{swap: a}]", "@[0].swap: found 'a', expected a-and-b"),
    other("disturb", "[{invert: c}]", "@[0].invert: found 'c', expected a, b or index"),
    other(
        "disturb",
        "[{reset: {for: 0 clocks, offset: 3, times: 1}}]",
        f"@[0].reset.for: found '0 clocks', expected a time that is positive\n@[0].reset.offset: found '3', {TIME}",
    ),
    other("disturb", "[{aperture: {}}]", "@[0].aperture: the key 'width' is missing; write for example `width: 0.2 ns`"),
    other("disturb", "[{unknown: always}]", "@[0].unknown: found 'always', expected until-reset"),
    # ---- the encoder
    other(
        "encoder",
        "{preset: code-wheel}",
        "@.preset: found 'code-wheel', expected code-wheel-2000-typical, code-wheel-2000-worst, code-wheel-1000-typical,"
        " code-wheel-1000-worst or capacitive-2048 (did you mean 'code-wheel-2000-worst'?)",
    ),
    other("encoder", "{pitch: 20}", "@.pitch: found '20', expected a number and a unit for a length: m, mm, um"),
    other("encoder", "{duty_error: [1 deg]}", "@.duty_error: found a list of 1, expected one angle or [of a, of b]"),
    other("encoder", "{jitter: -1 deg}", "@.jitter: found '-1 deg', expected an angle that is not negative"),
    other(
        "encoder",
        "{duty_error: 50 deg, phase_error: -20 deg}",
        "@: these tolerances move an edge by up to 45 deg; from 45 deg on A and B would change places",
    ),
    other(
        "encoder",
        "{eccentricity: 5 deg}",
        "@.eccentricity: a once-a-revolution error needs the line count; add `lines: 1024` to the encoder",
    ),
    other(
        "encoder",
        "{delay: {a: [1 ns, 2 ns, 3 ns], c: 1 ns}}",
        "@.delay.a: found a list of 3, expected one time or [rise, fall]\n@.delay.c: unknown key; allowed here: a, b, index",
    ),
    other("encoder", "{delay: {a: -1 ns}}", "@.delay.a: found '-1 ns', expected a time that is not negative"),
    other(
        "encoder",
        "{lines: 4, index: {width: 90 deg, at: 0 deg, jitter: 1 deg}}",
        "@.index.jitter: a gated index has the edges of A and B; `jitter` needs `gated: false`",
    ),
    other(
        "encoder",
        "{lines: 4, index: {width: 90 deg, at: 0 deg, marks: 90 deg, missing: [0], gated: yes}}",
        "@.index.gated: found 'yes', expected false or true\n"
        "@.index.marks: found '90 deg', expected a list\n"
        f"@.index.missing[0]: found '0', {TIMES}",
    ),
    other("encoder", "1024", f"@: found '1024', expected a map with the keys {ENCODER}"),
    other("encoder", "{lines: 0}", "@.lines: found '0', expected a whole number from 1 to 16777216"),
    other("encoder", "{lines: 2, start: 02}", "@.start: found '02', expected 00, 10, 11 or 01"),
    other("encoder", "{lines: 2, zz: 9 deg}", f"@.zz: unknown key; allowed here: {ENCODER}"),
    other(
        "encoder",
        "{index: {width: 90 deg, at: 0 deg}}",
        "@.index: an index needs the line count; add `lines: 1024` to the encoder",
    ),
    other(
        "encoder",
        "{lines: 4, index: {width: 90 rev, at: -1 deg}}",
        "@.index.at: found '-1 deg', expected an angle that is not negative\n"
        "@.index.width: found '90 rev', expected a number and a unit for an angle: deg (electrical degrees)",
    ),
    other(
        "encoder",
        "{lines: 4, index: {width: 90 deg, at: 0 deg, marks: [10 deg]}}",
        "@.index: two of its marks are less than their width of 90 deg apart",
    ),
    # As wide as the revolution it would never go away, and its edges would come in the wrong order.
    other(
        "encoder",
        "{lines: 2, index: {width: 720 deg, at: 0 deg}}",
        "@.index: the width 720 deg is no less than the whole revolution of 720 deg",
    ),
    # ---- the rest
    other("seed", "-1", "@: found '-1', expected a whole number from 0 to 9223372036854775807"),
    other("seed", "1.5", "@: found '1.5', expected a whole number from 0 to 9223372036854775807"),
    other("needs", "count", "@: found 'count', expected a list; write [count]"),
    other(
        "needs",
        "[cuont]",
        "@[0]: found 'cuont', expected count, direction, step, error, sticky-error, index, reset, no-reset, filter, clear-error,"
        " clear-count, preload, enable, arm or arm-once"
        " (did you mean 'count'?)",
    ),
    other("power_up", "1", "@: found '1', expected false or true"),
    other("about", "", "@: found nothing, expected a value"),
    other("profle", "x", f"@: unknown key; allowed here: {TOP_KEYS} (did you mean 'profile'?)"),
    pytest.param(
        "motion: [{rest: 1 us}]\n",
        "1: the key 'profile' is missing; write for example `profile: spindle-reversal`",
        id="no name",
    ),
    pytest.param("profile: x\n", "1: the key 'motion' is missing; write for example `motion: [{rest: 10 us}]`", id="no motion"),
    pytest.param(
        "profile: ../x\nmotion: [{rest: 1 us}]\n",
        "1: profile: found '../x', expected up to 64 letters, digits and . _ - that start with a letter or digit",
        id="name",
    ),
    pytest.param("", "1: the profile is empty", id="empty"),
    pytest.param("[]", f"1: found a list, expected a map with the keys {TOP_KEYS}", id="list"),
    # Several problems come together, in the order of their lines.
    pytest.param(
        "profile: p\nseed: x\nmotion:\n  - rest: 1\n  - mvoe: {}\n  - move: {by: 1}\n",
        "2: seed: found 'x', expected a whole number from 0 to 9223372036854775807\n"
        f"4: motion[0].rest: found '1', {TIME}\n"
        f"5: motion[1].mvoe: unknown action; known: {ACTIONS} (did you mean 'move'?)\n"
        f"6: motion[2].move.by: found '1', {DISTANCE}\n"
        "6: motion[2].move: the key 'speed' is missing; write for example `speed: 3000 rpm`",
        id="many",
    ),
]


@pytest.mark.parametrize(("content", "expected"), CASES)
def test_refusal(refusal: Callable[..., str], content: str, expected: str) -> None:
    assert refusal(read_profile, content) == "\n".join(f"x.yaml:{line}" for line in expected.split("\n"))


@pytest.mark.parametrize(
    ("table", "expected"),
    [
        ("", "run.csv: expected a line such as time_ms,angle_deg and two lines of numbers or more"),
        ("time_ms,angle_deg\n0,0\n", "run.csv: expected a line such as time_ms,angle_deg and two lines of numbers or more"),
        ("time_ms\n0\n1\n", "run.csv: expected a line such as time_ms,angle_deg and two lines of numbers or more"),
        ("time_rpm,angle_deg\n0,0\n1,1\n", f"run.csv:2: found '0 rpm', {TIME}"),
        ("time_ms,angle_us\n0,0\n1,1\n", f"run.csv:2: found '0 us', {DISTANCE}"),
        ("time_ms,angle_deg\n0,0\n1,1,1\n", "run.csv:3: found 3 columns, expected 2"),
        ("time_ms,angle_deg\n0,0\n1,one\n", f"run.csv:3: found 'one deg', {DISTANCE}"),
        ("time_ms,angle_deg\n0,0\n1,1\n1,2\n", "run.csv:4: the time 1 is not after the one before"),
    ],
)
def test_refused_table(refusal: Callable[..., str], folder: Path, table: str, expected: str) -> None:
    (folder / "run.csv").write_text(table)
    content = "profile: p\nmotion: [{table: {file: run.csv}}]\n"
    assert refusal(read_profile, content) == f"x.yaml:2: motion[0].table.file: {expected}"
