"""Quantities are exact until they become ps or states, and say so when a unit has no meaning."""

from __future__ import annotations

import re
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import pytest

from tbkit.contract import Clock, Contract, Count, Design, Filter, Latency, Output, Port, Slice, Span, Start
from tbkit.errors import UnfitError
from tbkit.units import LONGEST_PS, Scale, parse

S = 10**12
THREE = Span(3, 3)
# 50 MHz; a filter that rejects 2 clocks and passes 5; states of 2 clocks; counts -128..127 from 100.
CONTRACT = Contract(
    Path("x.yaml"),
    Design("d", ()),
    Clock("clk", 20_000),
    Port("a"),
    Port("b"),
    Latency(THREE, THREE, THREE, THREE, THREE, Span(1, 1)),
    start=Start(count=100, settle=40),
    count=Count(Output("count", (Slice("n"),), 8), True, 1, "00", True, "wrap", -128, 127),
    filter=Filter(2, 5),
    shortest_state=2,
)


def scale(lines: int | None = None, **changes: object) -> Scale:
    return Scale.of(replace(CONTRACT, **changes), lines)  # type: ignore[arg-type]


def states_per_s(text: str, lines: int) -> Fraction:
    return scale(lines).per_time(parse(text, "speed")) * S


@pytest.mark.parametrize(
    ("text", "time_ps"),
    [
        ("1 s", S),
        ("1 ms", 10**9),
        ("1 us", 10**6),
        ("1 ns", 10**3),
        ("1 ps", 1),
        ("  +1.5us ", 1_500_000),
        (".25 ns", 250),
        ("2.5e-3 ms", 2_500_000),
        ("1 clock", 20_000),
        ("3 clocks", 60_000),
        # A single pulse of the fastest legal state must pass the filter: the longer of 2 and 5 clocks.
        ("1 dwell", 100_000),
        # Running straight, a line keeps its level for two states, so half of what the filter passes, rounded up: 3 clocks.
        ("1 shortest", 60_000),
        ("1 reject", 40_000),
        ("1 pass", 100_000),
        ("1 settle", 800_000),
        ("0 ns", 0),
        ("-2 ns", -2_000),
    ],
)
def test_times(text: str, time_ps: int) -> None:
    assert scale().time_ps(parse(text, "time")) == time_ps


@pytest.mark.parametrize(
    ("text", "time_ps"),
    [("0.5 ps", 0), ("1.5 ps", 2), ("2.5 ps", 2), ("-0.5 ps", 0), ("-1.5 ps", -2), ("0.50000000000000000000000001 ps", 1)],
)
def test_times_round_half_to_even(text: str, time_ps: int) -> None:
    assert scale().time_ps(parse(text, "time")) == time_ps


def test_times_round_once() -> None:
    """A third of a clock of 20 ns three hundred times over is a hundred clocks: nothing is rounded before the end."""
    third = parse("0.3333333333333333333333333333333333333 clocks", "time")
    assert scale().time_ps(replace(third, value=third.value * 300)) == 2_000_000


@pytest.mark.parametrize(
    ("text", "states"),
    [
        ("1 state", 1),
        ("-3 states", -3),
        ("1 cycle", 4),
        ("0.5 rev", 2 * 1024),
        ("90 deg", 1024),
        ("0.1 deg", Fraction(4 * 1024, 3600)),
        # From 100 up past 127 are 28 counts; down past -128 they are 229.
        ("1 overflow", 28),
        ("1 underflow", 229),
    ],
)
def test_distances(text: str, states: Fraction) -> None:
    assert scale(1024).distance_states(parse(text, "distance")) == states


def test_distances_of_slower_counts() -> None:
    """An x1 count takes four states to move."""
    count = replace(CONTRACT.count, states_per_count=4)  # type: ignore[type-var]
    assert scale(count=count).distance_states(parse("1 overflow", "distance")) == 4 * 28


@pytest.mark.parametrize(
    ("text", "per_s"),
    [
        ("60 rpm", 4 * 1024),
        ("1 rev/s", 4 * 1024),
        ("1 rev/min", Fraction(4 * 1024, 60)),
        ("360 deg/s", 4 * 1024),
        ("1 deg/ms", Fraction(4 * 1024 * 1000, 360)),
        ("1 Hz", 4),
        ("2 kHz", 8_000),
        ("2 MHz", 8 * 10**6),
        ("1 GHz", 4 * 10**9),
        ("3 states/s", 3),
        ("1 cycle/us", 4 * 10**6),
        ("1 state/clock", 50 * 10**6),
        ("1 states/dwell", 10 * 10**6),
        ("0.5 states/shortest", Fraction(25 * 10**6, 3)),
    ],
)
def test_speeds(text: str, per_s: Fraction) -> None:
    assert states_per_s(text, 1024) == per_s


@pytest.mark.parametrize(
    ("text", "per_s2"),
    [
        ("1 rev/s2", 4 * 1024),
        ("1 rev/s^2", 4 * 1024),
        ("1 rev/min2", Fraction(4 * 1024, 3600)),
        ("360 deg/ms2", 4 * 1024 * 10**6),
        ("1 states/us2", 10**12),
        ("2 states/dwell2", 2 * 10**14),
    ],
)
def test_accelerations(text: str, per_s2: Fraction) -> None:
    assert scale(1024).per_time(parse(text, "acceleration")) * S**2 == per_s2


@pytest.mark.parametrize(("text", "per_s"), [("1 Hz", 1), ("50 MHz", 50 * 10**6), ("1.5 kHz", 1500), ("1 GHz", 10**9)])
def test_rates(text: str, per_s: int) -> None:
    assert parse(text, "rate").value == per_s


def test_angles() -> None:
    assert parse("22.5 deg", "angle").value == Fraction(45, 2)


# ---- values that others have published


def test_published_line_rate() -> None:
    # automation-talk.info, 2011-02: 2000 rpm with 360 pulses a revolution give 12 kHz on a line.
    assert states_per_s("2000 rpm", 360) / 4 == 12_000
    assert states_per_s("12 kHz", 360) == states_per_s("2000 rpm", 360)


def test_published_count_rates() -> None:
    # engineering.stackexchange.com, on a programmable SoC: 10 000 counts a revolution at 15 000 rpm give 2.5 Mcount/s.
    assert states_per_s("15000 rpm", 2500) == 2_500_000
    # Sizing rule n·N·4/60: 2500 lines at 6000 rpm give 1.000 Mcount/s.
    assert states_per_s("6000 rpm", 2500) == 1_000_000


def test_published_revolution_time() -> None:
    # Allen-Bradley 1771-DE manual, appendix B: 360 positions of 220 us each take 79.2 ms, about 758 rpm;
    # at 60 rpm one takes 2.778 ms. With 90 lines a position is a state.
    revolution = scale(90).distance_states(parse("1 rev", "distance"))
    per_position = 1 / scale(90).per_time(parse("1 states/us", "speed"))
    assert revolution == 360
    assert revolution * 220 * per_position == Fraction("79.2") * 10**9
    assert round(60 * states_per_s("1 states/us", 90) / 220 / revolution) == 758
    assert round(1000 / states_per_s("60 rpm", 90), 3) == Fraction("2.778")


def test_published_fast_encoder() -> None:
    # CUI AMT10 data sheet, 2021-08-04: 2048 pulses a revolution up to 7500 rpm.
    # That is 256.0 kHz a line and states of 976.5625 ns.
    speed = states_per_s("7500 rpm", 2048)
    assert speed == states_per_s("256 kHz", 2048)
    assert 10**9 / speed == Fraction("976.5625")


# ---- refusals

TIME = "expected a number and a unit for a time: s, ms, us, ns, ps, clocks, dwell, shortest, reject, pass, settle"
DISTANCE = "expected a number and a unit for a distance: states, cycles, rev, deg, rad, m, mm, um, overflow, underflow"
SPEED = (
    "expected a number and a unit for a speed: rpm, rev/s, deg/s, rad/s, mm/s, m/s, Hz (cycles per second),"
    " or any distance/time such as states/dwell"
)
ACCELERATION = (
    "expected a number and a unit for an acceleration: rev/s2, deg/s2, rad/s2, m/s2, or any distance/time2 such as states/ms2"
)


@pytest.mark.parametrize(
    ("kind", "text", "expected"),
    [
        ("time", "3", f"found '3', {TIME}"),
        ("time", "us", f"found 'us', {TIME}"),
        ("time", "3 us us", f"found '3 us us', {TIME}"),
        ("distance", "3 clocks", f"found '3 clocks', {DISTANCE}"),
        ("acceleration", "3 rev/s", f"found '3 rev/s', {ACCELERATION}"),
        ("speed", "3 rev/s2", f"found '3 rev/s2', {SPEED}"),
        ("angle", "3 rev", "found '3 rev', expected a number and a unit for an angle: deg (electrical degrees)"),
        ("rate", "3 rpm", "found '3 rpm', expected a number and a unit for a rate: Hz, kHz, MHz, GHz"),
        ("time", "1e999 s", "found '1e999 s', expected a number of at most 40 digits with an exponent of at most 30"),
        ("time", "9" * 5000 + " s", f"found '{'9' * 60}', expected a number of at most 40 digits with an exponent of at most 30"),
    ],
)
def test_refused_texts(kind: str, text: str, expected: str) -> None:
    with pytest.raises(ValueError, match=re.escape(expected)) as caught:
        parse(text, kind)
    assert str(caught.value) == expected


def test_units_without_meaning() -> None:
    def refusal(of: Scale, text: str, kind: str) -> str:
        with pytest.raises(UnfitError) as caught:
            (of.distance_states if kind == "distance" else of.time_ps if kind == "time" else of.per_time)(parse(text, kind))
        return str(caught.value)

    lines = "needs the encoder's line count: add `encoder: {lines: 1024}` to the profile"
    assert refusal(scale(), "1 rev", "distance") == f"the unit 'rev' {lines}"
    assert refusal(scale(), "1 deg/s", "speed") == f"the unit 'deg' {lines}"
    assert refusal(scale(), "3 rpm", "speed") == f"the unit 'rev' {lines}"
    assert refusal(scale(count=None), "1 overflow", "distance") == "the unit 'overflow' needs a decoder with a count output"
    assert (
        refusal(scale(filter=Filter()), "1.5 states/reject", "speed")
        == "1.5 states/reject: one 'reject' is 0 clocks for this decoder"
    )
    assert refusal(scale(), "1000001 s", "time") == "1000001 s is longer than 1000000 s, the most that is simulated"
    assert scale().time_ps(parse("1000000 s", "time")) == LONGEST_PS


@pytest.mark.parametrize(
    ("text", "kind", "shown"),
    [("1.50 us", "time", "1.5 us"), ("3 rev/s^2", "acceleration", "3 rev/s2"), ("90 rpm", "speed", "1.5 rev/s"),
     ("-2 states", "distance", "-2 states"), ("2 kHz", "speed", "2000 cycles/s")],
)  # fmt: skip
def test_quantities_as_text(text: str, kind: str, shown: str) -> None:
    assert str(parse(text, kind)) == shown
