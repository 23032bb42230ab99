"""Each disturbance does what it says, when it says, and nothing to what the others draw."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from contractgrid import contract

from tbkit.contract import A_LEADS_B, Filter, Index
from tbkit.disturb import Disturbed
from tbkit.encoder import Line
from tbkit.errors import UnfitError
from tbkit.lineoracle import expect, sample
from tbkit.profile import (
    Action,
    Aperture,
    Bounce,
    Disturbance,
    Encoder,
    Glitch,
    IndexMark,
    Invert,
    Missing,
    Move,
    Press,
    Profile,
    Rest,
    Stuck,
    Swap,
    Together,
    Unknown,
    Where,
)
from tbkit.profile_file import read_profile
from tbkit.scoreboard import judge
from tbkit.shaftoracle import rests
from tbkit.stimulus import UNKNOWN, Stimulus, compile_stimulus, lay_out
from tbkit.trace import Series, Trace
from tbkit.units import Quantity, Scale, parse

US = 10**6
P = 100_000
# 10 MHz; a filter that rejects 2 clocks and passes 3.
SCALE = Scale(P, {"clocks": 1, "dwell": 3, "settle": 20, "reject": 2, "pass": 3}, {"states": Fraction(1), "rev": Fraction(64)})
RUN = Move(parse("40 states", "distance"), parse("1 states/us", "speed"))
STILL = Rest(parse("1 ms", "time"))


def time(text: str) -> Quantity:
    return parse(text, "time")


def rate(text: str, phase: float = 0) -> Where:
    return Where("rate", rate=parse(text, "rate"), phase=parse(f"{phase} deg", "angle"))


def at(*moments: str) -> Where:
    return Where("at", moments=tuple(time(moment) for moment in moments))


def at_edges(*numbers: int) -> Where:
    return Where("edges", numbers=numbers)


def glitch(where: Where, width: str = "150 ns", lines: tuple[str, ...] = ("a",), longest: str | None = None) -> Glitch:
    return Glitch(lines, time(width), time(longest or width), where)


def profile(*motion: Action, disturb: tuple[Disturbance, ...] = (), encoder: Encoder | None = None) -> Profile:
    return Profile(Path("x.yaml"), "x", "", (), None, motion, encoder or Encoder(16), disturb)


def disturbed(
    *disturb: Disturbance, motion: tuple[Action, ...] = (RUN,), seed: int = 1, encoder: Encoder | None = None
) -> Disturbed:
    return lay_out(profile(*motion, disturb=disturb, encoder=encoder), SCALE, seed, 0).disturbed


def toggles(found: Disturbed, line: str = "a") -> list[int]:
    return found.lines[line].toggles_ps.tolist()


# A of RUN toggles at 0.5, 2.5, ... us and B at 1.5, 3.5, ... us.
A, B = ([round((n + half) * US) for n in range(0, 40, 2)] for half in (0.5, 1.5))


def level(line: Line, at_ps: int) -> int:
    return line.first ^ (int(np.searchsorted(line.toggles_ps, at_ps, side="right")) & 1)


# ---- when


def begins(where: Where, *motion: Action, seed: int = 1) -> list[int]:
    """Begins of pulses of a ps on the index line, which has none of its own."""
    return disturbed(glitch(where, "1 ps", ("index",)), motion=motion or (RUN,), seed=seed).lines["index"].toggles_ps[::2].tolist()


def test_at_times() -> None:
    """One in each of equal parts, anywhere in it."""
    found = begins(Where("times", 20), STILL)
    assert [begin // (50 * US) for begin in found] == list(range(20))
    assert found != begins(Where("times", 20), STILL, seed=2)
    many = np.array(begins(Where("times", 2000), STILL)) % 500_000
    assert many.mean() == pytest.approx(250_000, rel=0.05)


def test_at_moments() -> None:
    assert begins(at("7 us", "30 clocks", "0 us")) == [0, 3 * US, 7 * US]


def test_at_edges() -> None:
    """The true edges of A and B, from 1, each once; there are only 40."""
    assert begins(at_edges(4, 1, 40, 41, 4)) == [500_000, 3_500_000, 39_500_000]


@pytest.mark.parametrize("state", A_LEADS_B)
def test_at_states(state: str) -> None:
    """Each time the shaft enters the state, forward and backward."""
    back = Move(parse("-40 states", "distance"), parse("1 states/us", "speed"))
    place = A_LEADS_B.index(state)
    there = [round((n - 0.5) * US) for n in range(1, 41) if n % 4 == place]
    # From state n + 1 down to n, when 40 - n - 0.5 us of the way back are over.
    returned = [round((80 - n - 0.5) * US) for n in range(39, -1, -1) if n % 4 == place]
    assert begins(Where("state", state=state), RUN, back) == there + returned


def test_at_a_rate() -> None:
    assert begins(rate("100 kHz")) == [0, 10 * US, 20 * US, 30 * US]
    assert begins(rate("100 kHz", 90)) == [2_500_000, 12_500_000, 22_500_000, 32_500_000]
    with pytest.raises(UnfitError, match=r"^a rate of 1e\+10 Hz strikes more than 5000000 times in its run$"):
        begins(rate("10 GHz"), STILL)


# ---- draws


def test_one_more_changes_no_other_draw() -> None:
    """Wherever in the list it stands."""
    first, second = glitch(Where("times", 10)), Bounce("b", time("0.1 us"), time("0.3 us"), 1, 4)
    alone = disturbed(first), disturbed(second)
    for both in ((first, second), (second, first), (glitch(Where("times", 3), "1 ns", ("index",)), second, first)):
        found = disturbed(*both)
        assert toggles(found, "a") == toggles(alone[0], "a")
        assert toggles(found, "b") == toggles(alone[1], "b")
    # Two that say the same are two draws.
    assert len(toggles(disturbed(first, first))) == len(A) + 40


# ---- each disturbance


def test_glitch_on_several_lines() -> None:
    found = disturbed(glitch(at("5 us", "9 us"), "150 ns", ("a", "b", "index")))
    pulses = [5 * US, 5_150_000, 9 * US, 9_150_000]
    assert toggles(found, "index") == pulses
    assert toggles(found, "a") == sorted(A + pulses)
    assert toggles(found, "b") == sorted(B + pulses)


def test_widths_of_glitches() -> None:
    """Drawn evenly between the bounds."""
    found = np.array(toggles(disturbed(glitch(Where("times", 1000), "0.1 us", ("index",), "0.3 us"), motion=(STILL,)), "index"))
    widths = np.diff(found)[::2]
    assert 100_000 <= widths.min() < 102_000
    assert 298_000 < widths.max() <= 300_000
    assert widths.mean() == pytest.approx(200_000, rel=0.03)


def test_what_a_glitch_makes_doubtful() -> None:
    """What the filter rejects is harmless away from edges; what it may pass is not where A and B both move."""
    assert disturbed(glitch(at("5 us"), "200 ns")).lost_ps is None
    assert disturbed(glitch(at("5 us"), "200 ns", ("a", "b"))).lost_ps is None
    assert disturbed(glitch(at("5 us"), "300 ns", ("a", "b"))).lost_ps == 5 * US
    assert disturbed(glitch(at("4.6 us"), "300 ns")).lost_ps is None
    assert disturbed(glitch(at("5.3 us"), "300 ns")).lost_ps == 5_300_000
    # A pulse of no length, as of a decoder without a filter, is none.
    none = lay_out(
        profile(RUN, disturb=(glitch(Where("times", 5), "1 reject"),)), replace(SCALE, clocks={**SCALE.clocks, "reject": 0}), 1, 0
    ).disturbed
    assert (toggles(none), none.lost_ps) == (A, None)


@pytest.mark.parametrize(
    ("preset", "pulses", "fewest", "most", "longest_us"),
    [
        # Horowitz & Hill, 2nd edition, page 506: 10 to 100 closures over about 1 ms.
        ("contact", "", 10, 100, 1000),
        # Bourns PEC11R data sheet: 2 ms at 15 rpm.
        ("knob", ", pulses: 1..9", 1, 9, 2000),
        # A generic knob of 24 pulses, a distributor's page: 5 ms.
        ("knob-rough", ", pulses: 2..4", 2, 4, 5000),
        # Ganssle, A Guide to Debouncing: 6.2 ms at most for 16 of 18 switches.
        ("switch", ", pulses: 3..9", 3, 9, 6200),
    ],
)
def test_bounce(folder: Path, preset: str, pulses: str, fewest: int, most: int, longest_us: int) -> None:
    """Every edge is followed by so many pulses within the published time, and the line comes to where it goes."""
    slow = Move(parse("400 states", "distance"), parse("0.05 states/ms", "speed"))
    (folder / "x.yaml").write_text(
        f"profile: x\nmotion: [{{rest: 1 us}}]\ndisturb: [{{bounce: {{on: b, preset: {preset}{pulses}}}}}]\n"
    )
    (bounce,) = read_profile(Path("x.yaml")).disturb
    clean, found = np.array(toggles(disturbed(motion=(slow,)), "b")), np.array(toggles(disturbed(bounce, motion=(slow,)), "b"))
    group = np.searchsorted(clean, found, side="right") - 1
    sizes = np.bincount(group)
    assert len(sizes) == len(clean) == 200
    assert set((sizes % 2).tolist()) == {1}
    assert fewest <= (sizes.min() - 1) // 2 <= fewest + 2
    assert most - 2 <= (sizes.max() - 1) // 2 <= most
    late = found - clean[group]
    assert 0.8 * longest_us * US < late.max() <= longest_us * US


@pytest.mark.parametrize(("which", "first"), [("make", 0), ("break", 1)])
def test_bounce_of_one_kind_of_edge(which: str, first: int) -> None:
    found = np.array(toggles(disturbed(Bounce("a", time("0.2 us"), time("0.2 us"), 2, 2, which))))
    sizes = np.bincount(np.searchsorted(A, found, side="right") - 1)
    assert sizes[first::2].tolist() == [5] * 10
    assert sizes[1 - first :: 2].tolist() == [1] * 10


@pytest.mark.parametrize(
    ("where", "only", "struck"),
    [
        (at_edges(2, 3, 99), "both", [1]),
        (at("0 us", "3 us"), "make", [0, 2]),
        (Where("state", state="11"), "both", range(1, 20, 2)),
    ],
)
def test_bounce_of_chosen_edges(where: Where, only: str, struck: list[int]) -> None:
    """The first fitting edge of the line from each moment on: A toggles with true edges 1, 3, 5, ..."""
    found = np.array(toggles(disturbed(Bounce("a", time("0.2 us"), time("0.2 us"), 2, 2, only, where))))
    sizes = np.bincount(np.searchsorted(A, found, side="right") - 1)
    assert sizes.tolist() == [5 if n in struck else 1 for n in range(20)]


def test_missing() -> None:
    # A rises with true edges 1, 5, 9, ...: from edge 6 on the third of its pulses is the first to begin.
    found = disturbed(Missing("a", at_edges(6, 1, 99)))
    assert toggles(found) == [*A[2:4], *A[6:]]
    assert found.lost_ps == A[0]
    assert found.undetectable == ("the 2 missing pulses of a: A and B alone show a smaller motion, with no illegal transition",)
    assert disturbed(Missing("a", at_edges(99))).undetectable == ()


@pytest.mark.parametrize("stuck_at", [0, 1])
@pytest.mark.parametrize("where", [at("5 us"), at_edges(5), at_edges(3)], ids=["at", "rise", "fall"])
def test_stuck_for_a_time(where: Where, stuck_at: int) -> None:
    """At the level from the moment on, as it would be before and after; a moment on an edge is no exception."""
    clean, found = disturbed(), disturbed(Stuck("a", str(stuck_at), time("7 us"), where))
    begin = {"at": 5 * US, "edges": US * (where.numbers[0] if where.numbers else 0) - US // 2}[where.by]
    for at_ps in range(0, 41 * US, US // 8):
        inside = begin <= at_ps < begin + 7 * US
        assert level(found.lines["a"], at_ps) == (stuck_at if inside else level(clean.lines["a"], at_ps)), at_ps
    assert found.lost_ps == begin
    assert found.undetectable == ("the a line that is stuck: A and B alone cannot tell it from a motion",)
    assert toggles(found, "b") == B


def test_stuck_to_the_end() -> None:
    found = disturbed(Stuck("b", "1", None, at("10 us")))
    assert level(found.lines["b"], 100 * US) == 1
    assert toggles(found, "b")[-1] <= 10 * US
    assert [t for t in toggles(found, "b") if t < 10 * US] == [t for t in B if t < 10 * US]


def test_broken_wire() -> None:
    found = disturbed(Stuck("b", "noise", time("20 us"), at("10 us")))
    inside = [t for t in toggles(found, "b") if 10 * US < t < 30 * US]
    assert 40 <= len(inside) <= 50
    assert len(set(np.diff(inside).tolist())) > 30
    assert [t for t in toggles(found, "b") if t > 30 * US] == [t for t in B if t > 30 * US]
    assert level(found.lines["b"], 31 * US) == level(disturbed().lines["b"], 31 * US)
    assert found.undetectable == ("the b line that chatters: A and B alone cannot tell it from a motion",)


def test_swap_and_invert() -> None:
    swapped = disturbed(Swap())
    assert (toggles(swapped, "a"), toggles(swapped, "b"), swapped.lost_ps) == (B, A, 0)
    inverted = disturbed(Invert("b"))
    assert (inverted.lines["b"].first, toggles(inverted, "b"), inverted.lost_ps) == (1, B, 0)


def test_together() -> None:
    """A state is skipped: the edge that begins it waits for the one that ends it."""
    found = disturbed(Together(at_edges(5, 10, 40)))
    # Edge 5 is of A (4.5 us), edge 10 of B (9.5 us); after edge 40 there is none to wait for.
    assert toggles(found, "a") == [5_500_000 if t == 4_500_000 else t for t in A]
    assert toggles(found, "b") == [10_500_000 if t == 9_500_000 else t for t in B]
    assert found.lost_ps == 4_500_000


def test_presses() -> None:
    """Begin the offset after each moment, before it too, but never before the motion."""
    found = disturbed(
        Press("reset", time("1 us"), time("-0.2 us"), at_edges(1, 9)), Press("clear", time("1 clocks"), time("0 us"), at("0 us"))
    )
    assert found.presses == (("reset", 300_000, 1_300_000), ("reset", 8_300_000, 9_300_000), ("clear", 0, P))
    early = disturbed(Press("reset", time("1 us"), time("-9 us"), at_edges(1)))
    assert early.presses == (("reset", 0, US),)
    assert early.lost_ps is None
    # Those that overlap are one.
    tested = contract(2, reset_clocks=4, settle=8, period_ps=P)
    longer = Press("reset", time("3 us"), time("0 us"), at("10 us", "11 us", "12 us"))
    played = compile_stimulus(profile(RUN, disturb=(longer,)), replace(tested, timers=True), 1)
    assert (played.drives["reset"].toggles_ps[1:] - played.begin_ps).tolist() == [10 * US, 15 * US]


# ---- at the clock


def played(*disturb: Disturbance, motion: tuple[Action, ...] = (RUN,), seed: int = 1, reset: str = "none") -> Stimulus:
    return compile_stimulus(profile(*motion, disturb=disturb), contract(2, width=16, reset=reset, settle=8, period_ps=P), seed)


@pytest.mark.parametrize("part", [0.25, 0.5, 0.9])
def test_edges_apart_fall_into_one_sample(part: float) -> None:
    """B29: two edges ``part`` of a clock apart are one sample with chance 1 - part (0.75, 0.5, 0.1)."""
    # Pulses of a and b at phases that go evenly through the clock: 997 of them, each 10.01 clocks after the one before.
    begin = Where("rate", rate=parse("999000.999 Hz", "rate"), phase=parse("0 deg", "angle"))
    width = time("5 clocks")
    later = replace(begin, phase=parse(f"{360 * part / 10.01} deg", "angle"))
    found = played(Glitch(("a",), width, width, begin), Glitch(("b",), width, width, later), motion=(STILL,))
    a, b = (set(sample(found.lines[name], P).period.tolist()) for name in "ab")
    assert len(a) > 1900
    assert len(a & b) / len(a) == pytest.approx(1 - part, abs=0.01)


@pytest.mark.parametrize("width", [0.1, 0.5, 0.9, 1.25, 3.5])
def test_pulses_are_seen(width: float) -> None:
    """B30: a pulse of w < T is seen with chance w/T; one of k clocks or more at k or k + 1 samples."""
    found = played(glitch(Where("times", 5000), f"{width} clocks"), motion=(Rest(time("100 ms")),))
    lengths = np.diff(sample(found.lines["a"], P).period)[::2]
    least = int(width)
    assert set(lengths.tolist()) == ({1} if width < 1 else {least, least + 1})
    # Four standard deviations of 5000 draws.
    share = len(lengths) / 5000 if width < 1 else (lengths > least).mean()
    wanted = width - least
    assert abs(share - wanted) < 4 * (wanted * (1 - wanted) / 5000) ** 0.5


def test_three_states_a_clock() -> None:
    fast = Move(parse("300 states", "distance"), parse("3 states/clocks", "speed"))
    (words,) = played(motion=(fast,)).undetectable
    # It begins and ends within a clock, so one of a hundred is in two parts.
    assert words == "99 clocks in which three states or more go by: every sampled decoder takes them for another motion"
    assert played(motion=(replace(fast, speed=parse("1 states/clocks", "speed")),)).undetectable == ()


def test_aperture() -> None:
    """Half of the edges near a clock edge are seen by the next one, on each line by itself; the others stay."""
    # 7.003 clocks a state: all phases are met.
    steady = Move(parse("20000 states", "distance"), parse("1.42796 states/us", "speed"))
    clean, found = played(motion=(steady,)), played(Aperture(time("0.2 clocks")), motion=(steady,))
    lates = []
    for name in "ab":
        was, now = clean.lines[name].toggles_ps, found.lines[name].toggles_ps
        near = was % P >= 0.8 * P
        assert 0.15 < near.mean() < 0.25
        assert (now == was)[~near].all()
        late = now[near] // P - was[near] // P
        assert set(late.tolist()) == {0, 1}
        assert abs(late.mean() - 0.5) < 4 * (0.25 / len(late)) ** 0.5
        lates.append(late)
    many = min(len(late) for late in lates)
    assert abs(np.corrcoef(lates[0][:many], lates[1][:many])[0, 1]) < 4 / many**0.5
    # What is done to A changes nothing on B.
    more = played(Aperture(time("0.2 clocks")), glitch(at("3 us")), motion=(steady,))
    assert more.lines["b"].toggles_ps.tolist() == found.lines["b"].toggles_ps.tolist()


def test_unknown_until_reset() -> None:
    found = played(Unknown(), reset="async")
    words, plain = found.words().tolist(), played(reset="async").words().tolist()
    assert words[0] == plain[0] | UNKNOWN
    # Half of the four clocks of reset, then the levels that the lines have; what follows is as without.
    assert words[1] == (2 * P + P // 4) << 16 | plain[0] & 0xFFFF
    assert (words[1] >> 16) + (words[2] >> 16) == plain[1] >> 16
    assert words[3:] == plain[2:]
    assert not any(word & UNKNOWN for word in words[1:])
    with pytest.raises(UnfitError, match=r"^its lines are X until reset, and this decoder has no reset$"):
        played(Unknown())


def test_rest_within_a_pulse_is_no_rest() -> None:
    """A pulse longer than it takes to come to rest: the decoder counts it, and the shaft did not move."""
    tested = contract(2, width=16, reset="none", settle=8, period_ps=P)
    long_pulse = compile_stimulus(profile(STILL, disturb=(glitch(at("300 us"), "200 us"),)), tested, 1)
    found = rests(tested, replace(long_pulse, power_up=True), np.zeros(0, dtype=np.int64))
    pulse = long_pulse.lines["a"].toggles_ps // P
    assert len(pulse) == 2
    assert (found.period > pulse[1]).tolist() == [True]
    assert found.count.tolist() == [0]
    # And the decoder that follows it is right.
    expected = expect(tested, long_pulse)
    assert expected.events.step.tolist() == [1, -1]
    period = np.array([0, *(expected.events.period + 2).tolist()])
    trace = Trace(Series(period, np.array([0, 1, 0]), np.zeros(3, dtype=bool)), None, None, None)
    count_only = replace(tested, direction=None, error=None)
    assert judge(count_only, long_pulse, expect(count_only, long_pulse), found, trace).findings == ()


def test_index_that_is_not_exact() -> None:
    """Where the index has its own edges the shaft does not tell when it zeroes, not even a state before or after."""
    angle = lambda text: parse(text, "angle")  # noqa: E731
    mark = IndexMark(angle("90 deg"), angle("180 deg"), gated=False)
    assert not lay_out(profile(RUN, encoder=Encoder(16, index=mark)), SCALE, 1, 0).edges.exact_index
    assert lay_out(profile(RUN, encoder=Encoder(16, index=replace(mark, gated=True))), SCALE, 1, 0).edges.exact_index


@pytest.mark.parametrize("gated", [True, False])
def test_rests_by_an_index(gated: bool) -> None:
    """At rest in the mark and beside it the count is told, but only where the index has exactly the edges of A and B."""
    tested = replace(contract(2, width=16, reset="async", settle=8, period_ps=P, index=Index(0, 0)), timers=True)
    step, wait = Move(parse("1 states", "distance"), parse("1 states/us", "speed")), Rest(time("5 us"))
    mark = IndexMark(parse("90 deg", "angle"), parse("360 deg", "angle"), gated=gated)
    one = profile(wait, *[step, wait] * 6, encoder=Encoder(16, index=mark))
    found = rests(tested, compile_stimulus(one, tested, 1), np.zeros(0, dtype=np.int64))
    # In state 4 it is zeroed. Edges of its own may be seen up to a state early, and nothing is known from there on.
    assert found.count.tolist() == ([0, 1, 2, 3, 0, 1, 2] if gated else [0, 1, 2])


def test_filter_that_rejects() -> None:
    """Noise in step with a drive, on both lines at once, that the filter rejects leaves no event at all."""
    tested = contract(5, width=16, reset="none", settle=12, period_ps=P, filtering=Filter(2, 3))
    noise = Glitch(("a", "b"), time("1.9 clocks"), time("2 clocks"), rate("20 kHz"))
    found = compile_stimulus(profile(STILL, disturb=(noise,)), tested, 1)
    assert found.edges == 2 * 2 * 20
    assert len(expect(tested, found).events) == 0
    assert found.lost_ps is None
