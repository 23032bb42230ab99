"""The line oracle against published tables, sequences and figures; the source stands beside each."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from contractgrid import contract

from tbkit.contract import Contract, Filter, Index
from tbkit.counting import counted
from tbkit.encoder import Edges, Line
from tbkit.expectation import Events
from tbkit.lineoracle import expect, filtered, sample
from tbkit.motion import Crossings
from tbkit.profile import Move, Profile
from tbkit.scoreboard import judge
from tbkit.shaftoracle import Rests
from tbkit.stimulus import Stimulus, Unfold, compile_stimulus
from tbkit.trace import Series, Trace
from tbkit.units import parse

P = 1000
NONE = np.zeros(0, dtype=np.int64)
FORWARD = ("00", "10", "11", "01")
#: No reset, and long after power-up, so that nothing but the lines matters.
X4 = contract(2, width=16, reset="none", settle=0)


def line(levels: str) -> Line:
    """One level a clock period, changing in the middle of it."""
    toggles = [k * P + P // 2 for k in range(1, len(levels)) if levels[k] != levels[k - 1]]
    return Line(int(levels[0]), np.array(toggles, dtype=np.int64))


def stimulus(a: Line, b: Line, index: Line | None = None, periods: int = 0) -> Stimulus:
    lines = {"a": a, "b": b, "index": index or Line(0, NONE)}
    last = max([int(each.toggles_ps[-1]) // P for each in lines.values() if len(each.toggles_ps)], default=0)
    still = {"reset": Line(0, NONE), "clear": Line(0, NONE)}
    ideal = Edges(lines, Crossings(NONE, NONE, np.zeros(0, dtype=bool)), 0.5, (), exact_index=True)
    zero = np.zeros(1, dtype=np.int64)
    return Stimulus("x", 1, P, lines, still, ideal, 0, None, periods or last + 30, Unfold(zero, zero), power_up=True)


def through(states: list[str], gate: list[int] | None = None) -> Stimulus:
    """The states one after another, one a clock, after a rest of ten clocks in the first."""
    states = [states[0]] * 10 + states
    gates = "".join(str(level) for level in [*[0] * 10, *gate]) if gate else None
    a, b = (line("".join(state[n] for state in states)) for n in (0, 1))
    return stimulus(a, b, line(gates) if gates else None)


def events_of(contract: Contract, states: list[str], gate: list[int] | None = None) -> Events:
    return expect(contract, through(states, gate)).events


def counts(contract: Contract, start: int, states: list[str], gate: list[int] | None = None) -> list[int]:
    """The count before the first and after every event."""
    events = events_of(contract, states, gate)
    assert contract.count is not None
    return [start, *counted(contract.count, events.step, events.sets, events.to, start).tolist()]


def run_of(first: str, moves: int) -> list[str]:
    """States from ``first`` on, forward or backward."""
    at, sign = FORWARD.index(first), 1 if moves > 0 else -1
    return [FORWARD[(at + sign * n) % 4] for n in range(abs(moves) + 1)]


def shown(values: list[int]) -> list[int]:
    """Without repetitions: what a figure shows."""
    return [value for n, value in enumerate(values) if n == 0 or value != values[n - 1]]


# The 16-entry table, A leads = up; rows AB before, columns AB after, both in the order 00, 01, 10, 11. A derivation, used by
# many (the idea: fpga4fun). E is an illegal transition.
TABLE = """0 - + E
           + 0 E -
           - E 0 +
           E + - 0"""
ORDER = ("00", "01", "10", "11")


@pytest.mark.parametrize("a_leads", [True, False])
def test_sixteen_entries(a_leads: bool) -> None:
    tested = replace(X4, count=replace(X4.count, a_leads_forward=a_leads))
    for before, row in zip(ORDER, TABLE.splitlines(), strict=True):
        for after, entry in zip(ORDER, row.split(), strict=True):
            events = events_of(tested, [before, after])
            if entry == "0":
                assert len(events) == 0
                continue
            sign = {"+": 1, "-": -1, "E": 0}[entry] * (1 if a_leads else -1)
            assert (events.step.tolist(), events.moved.tolist()) == ([sign], [sign])
            assert events.illegal.tolist() == [entry == "E"]


def test_xor_form() -> None:
    """Enable is the exclusive or of all four levels, up is A now against B before. Common practice; no single source."""
    for before in ORDER:
        for after in ORDER:
            if before == after:
                continue
            events = events_of(X4, [before, after])
            a, b, was_a, was_b = (int(level) for level in after + before)
            assert bool(events.step[0]) == bool(a ^ b ^ was_a ^ was_b)
            if events.step[0]:
                assert (events.step[0] > 0) == bool(a ^ was_b)


@pytest.mark.parametrize(
    ("every", "there"),
    [(4, [5, 6, 7]), (2, [5, 6, 7, 8, 9]), (1, [5, 6, 7, 8, 9, 10, 11, 12, 13])],
    ids=["x1", "x2", "x4"],
)
def test_sequences_out_and_back(every: int, there: list[int]) -> None:
    """NI USB-621x manual, figures 9-15 to 9-17: two cycles out and back.

    Assumed: the figures start in state 00, with A rising first. X1 counts up on the rising edge of A while A leads and down on
    its falling edge while B leads, which is the boundary 00|10; X2 on both edges of A.
    """
    tested = contract(2, width=16, every=every, at="10" if every > 1 else "00", reset="none", settle=0)
    states = [*run_of("00", 8), *run_of("00", -8)[1:]]
    assert shown(counts(tested, 5, states)) == [*there, *there[-2::-1]]


# NI M Series manual, figure 7-18: reload with 0 on Z in phase A=0, B=0, in X4. Assumed: the figure starts in state 01, the only
# one from which the reload comes where it is drawn.
RELOAD = [5, 6, 7, 8, 9, 0, 1, 2, 3, 4]


@pytest.mark.parametrize(("first", "last"), [(5, 5), (5, 6), (4, 7)])
@pytest.mark.parametrize("edge", [False, True])
def test_reload_by_index(first: int, last: int, edge: bool) -> None:
    """However wide Z is around the state, only A=B=0 reloads."""
    tested = replace(X4, index=Index(0, 0, edge))
    gate = [int(first <= n <= last) for n in range(10)]
    values = counts(tested, 5, run_of("01", 9), gate)
    assert shown(values) == RELOAD


def test_counted_first_then_reloaded() -> None:
    """NI M Series manual, at figure 7-18: the count comes first, the reload within one period of the fastest timebase."""
    # Two clocks a state: the reload is to be over before the next count.
    played = through([state for state in run_of("01", 5) for _ in range(2)], [0] * 10 + [1, 1])
    tested = replace(contract(2, width=16, reset="none", settle=0, direction="", error="", apart={"index": 3}), index=Index(0, 0))
    none = Rests(NONE, NONE)
    before = [(0, 5), (14, 6), (16, 7), (18, 8), (20, 9)]
    for values, right in (
        ([(22, 10), (23, 0)], True),
        ([(23, 0)], True),
        ([(22, 10)], False),
        ([(22, 10), (24, 0)], False),
        ([(22, 11), (23, 0)], False),
    ):
        period, value = (np.array(column, dtype=np.int64) for column in zip(*[*before, *values], strict=True))
        trace = Trace(Series(period, value, np.zeros(len(period), dtype=bool)), None, None, None)
        based = replace(tested, start=replace(tested.start, count=5))
        score = judge(based, played, expect(based, played), none, trace)
        assert bool(score.findings) != right, values


# ST RM0440, figures 337, 338, 415, 416: a counter of 0 to ARR = 7 with index. The hardware sets 0 on entering the chosen state
# going up, and ARR on leaving it going down: the index state is 0 both ways, which is what sensing the gated index as a level
# says. The ungated trace is the same hardware with an index pulse of one state; a wider one, ungated, is set to 0 by its
# first edge going up and to ARR by that same mechanical edge going down, which neither sense can say: a level holds 0 all
# through the pulse, an edge takes the other end of the pulse when going down.
UNGATED = [3, 4, 5, 6, 7, 0, 1, 2, 3, 4, 3, 2, 1, 0, 7, 6, 5, 4, 3, 2, 1, 0, 7]
GATED = [5, 6, 7, 0, 1, 2, 3, 4, 5, 6, 5, 4, 3, 2, 1, 0, 7, 6, 5, 4, 3, 2, 1]


@pytest.mark.parametrize(("trace", "gate"), [(UNGATED, Index()), (GATED, Index(1, 1))], ids=["ungated", "gated"])
@pytest.mark.parametrize("off", [0, 3])
def test_index_traces(trace: list[int], gate: Index, off: int) -> None:
    """``off``: a wrong count to begin with, which the index must put right."""
    tested = replace(contract(2, width=4, signed=False, overflow="modulo", limits=(0, 7), reset="none", settle=0), index=gate)
    places = np.cumsum([trace[0], *(1 if (b - a) % 8 == 1 else -1 for a, b in pairwise(trace))])
    # Count 0 is state 11.
    states = [FORWARD[(place + 2) % 4] for place in places.tolist()]
    found = counts(tested, (trace[0] + off) % 8, states, [int(value == 0) for value in trace])
    first = trace.index(0)
    assert found[first:] == trace[first:]
    assert found[:first] == [(value + off) % 8 for value in trace[:first]]


# TI SPRUIW9C, table 23-3: the edge before, the edge now, and the direction; TOGGLE is the other one than before.
DIRECTIONS = [
    ("A+", "B+", "up"),
    ("A+", "B-", "down"),
    ("A+", "A-", "toggle"),
    ("A-", "B-", "up"),
    ("A-", "B+", "down"),
    ("A-", "A+", "toggle"),
    ("B+", "A+", "down"),
    ("B+", "A-", "up"),
    ("B+", "B-", "toggle"),
    ("B-", "A-", "down"),
    ("B-", "A+", "up"),
    ("B-", "B+", "toggle"),
]


@pytest.mark.parametrize(("before", "now", "direction"), DIRECTIONS)
def test_direction_table(before: str, now: str, direction: str) -> None:
    tried = 0
    for first in ORDER:
        states = [first]
        for edge in (before, now):
            a, b = states[-1]
            level = "1" if edge[1] == "+" else "0"
            states.append(level + b if edge[0] == "A" else a + level)
        if states[0] == states[1] or states[1] == states[2]:
            continue  # that edge cannot happen from here
        tried += 1
        earlier, moved = events_of(X4, states).moved.tolist()
        assert moved == {"up": 1, "down": -1, "toggle": -earlier}[direction]
    assert tried == (2 if direction == "toggle" else 1)


@pytest.mark.parametrize("forward", [True, False])
def test_one_turn_of_a_thousand_lines(forward: bool) -> None:
    """ST RM0440, page 1244: 1000 lines in x4 count 0 to 3999 (ARR + 1 = 4000)."""
    tested = contract(2, width=12, signed=False, overflow="modulo", limits=(0, 3999), reset="none", settle=0)
    values = counts(tested, 0, run_of("00", 4001 if forward else -4001))
    turn = values[:4000]
    assert sorted(turn) == list(range(4000))
    assert values[3999:4002] == ([3999, 0, 1] if forward else [1, 0, 3999])


@pytest.mark.parametrize(("states", "moved", "illegal"), [(1, 1, False), (2, 0, True), (3, -1, False), (4, None, False)])
@pytest.mark.parametrize("sign", [1, -1])
def test_aliasing(states: int, moved: int | None, illegal: bool, sign: int) -> None:
    """Arithmetic modulo 4: so many states between two samples look like a step, an illegal one, a step back, or nothing."""
    move = Move(parse(f"{400 * sign} states", "distance"), parse(f"{states} states/clocks", "speed"), None)
    played = compile_stimulus(
        Profile(Path("x.yaml"), "x", "", (), None, (move,)), replace(X4, start=replace(X4.start, settle=8)), 1
    )
    events = expect(X4, played).events
    if moved is None:
        # The two ends of the move, in the middle of a clock period, are all there is to see.
        assert len(events) <= 2
        return
    middle = slice(2, -2)
    assert len(events) >= 400 // states - 1
    assert set(events.moved[middle].tolist()) == {moved * sign}
    assert set(events.illegal[middle].tolist()) == {illegal}


@pytest.mark.parametrize("part", [0.25, 0.5, 0.9])
def test_two_edges_in_one_sample(part: float) -> None:
    """Arithmetic: two edges ``part`` of a clock apart fall into one sample with chance 1 - part (0.75, 0.5, 0.1).

    All 1000 phases of a period of 1000 ps once each, so the share is exact.
    """
    begin = np.arange(P) * 10 * P + np.arange(P)
    apart = round(part * P)
    played = stimulus(Line(0, begin), Line(0, begin + apart))
    events = expect(contract(2, width=16, reset="none", settle=0), played).events
    assert int(events.illegal.sum()) == P - apart


@pytest.mark.parametrize("part", [0.25, 0.5, 0.9])
def test_two_edges_at_random_phases(part: float) -> None:
    """The same with drawn phases; 20000 draws, so four standard deviations are at most 0.0142."""
    draws = 20_000
    begin = np.arange(draws) * 10 * P + (np.random.default_rng(5).random(draws) * P).astype(np.int64)
    events = expect(X4, stimulus(Line(0, begin), Line(0, begin + round(part * P)))).events
    assert abs(int(events.illegal.sum()) / draws - (1 - part)) < 4 * (part * (1 - part) / draws) ** 0.5


@pytest.mark.parametrize("width", [0.1, 0.5, 0.9, 1, 1.25, 2, 3.5])
def test_pulse_is_seen(width: float) -> None:
    """Arithmetic: a pulse of w < T is seen with chance w/T; one of k·T or more at k or k + 1 samples."""
    begin = np.arange(P) * 10 * P + np.arange(P)
    seen = sample(Line(0, np.stack([begin, begin + round(width * P)], axis=1).ravel()), P)
    lengths = np.diff(seen.period)[::2]
    least = int(width)
    assert set(lengths.tolist()) <= {least, least + 1}
    # The mean number of samples is w/T, which holds for short ones too.
    assert int(lengths.sum()) == round(width * P)
    assert len(lengths) == (round(width * P) if width < 1 else P)


def test_three_equal_samples() -> None:
    """Microchip QEI, 17.4.13 and its editions: the output follows three equal samples; shorter pulses are rejected."""
    for clocks, passes in ((1, False), (2, False), (3, True), (4, True)):
        changes, doubt = filtered(sample(line("0" * 9 + "1" * clocks + "0" * 9), P), Filter(2, 3))
        assert (changes.period.tolist(), len(doubt.begin)) == ([9, 9 + clocks] if passes else [], 0)
