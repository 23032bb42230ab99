"""The stimulus as played: the same every time, off the clock's edges, true to the encoder, and honest about folding."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from tbkit.contract import Clock, Contract, Count, Design, Filter, Latency, Output, Port, Reset, Slice, Span, Start
from tbkit.errors import UnfitError
from tbkit.profile import Action, Bounce, Drive, Encoder, Glitch, IndexMark, Missing, Move, Profile, Repeat, Rest, Walk, Where
from tbkit.stimulus import Stimulus, compile_stimulus
from tbkit.units import parse

P = 100_000
US = 10**6
THREE = Span(3, 3)
# 10 MHz, 4 clocks of reset, at rest after 20 clocks; a filter that rejects 2 clocks and passes 3.
CONTRACT = Contract(
    Path("x.yaml"),
    Design("d", ()),
    Clock("clk", P),
    Port("a"),
    Port("b"),
    Latency(THREE, THREE, THREE, THREE, THREE, Span(1, 1)),
    reset=Reset(Port("rst"), False, 4),
    start=Start(settle=20),
    count=Count(Output("count", (Slice("n"),), 8), True, 1, "00", True, "wrap", -128, 127),
    filter=Filter(2, 3),
)
# Reset and its last clock, time to settle, and three eighths of a clock.
BEGIN_PS = (4 + 1 + 20) * P + 37_500


def rest(text: str) -> Rest:
    return Rest(parse(text, "time"))


def move(by: str, speed: str = "1 states/us", accel: str | None = None) -> Move:
    return Move(parse(by, "distance"), parse(speed, "speed"), parse(accel, "acceleration") if accel else None)


def profile(*motion: Action, **more: object) -> Profile:
    return replace(Profile(Path("p.yaml"), "p", "", (), None, motion), **more)  # type: ignore[arg-type]


def played(*motion: Action, contract: Contract = CONTRACT, seed: int = 1, **more: object) -> Stimulus:
    return compile_stimulus(profile(*motion, **more), contract, seed)


UNFOLDED = replace(CONTRACT, timers=True)
WALK = Walk(parse("300 states", "distance"), parse("0.2 states/dwell", "speed"), parse("1 states/dwell", "speed"), 1, 8)
GLITCHES = {line: Glitch((line,), *[parse("1.5 clocks", "time")] * 2, Where("times", 20)) for line in ("a", "b")}
BOUNCE = Bounce("b", parse("0.2 us", "time"), parse("0.9 us", "time"), 1, 4)
# Random everywhere, with rests long enough to be shortened.
LIVELY = (WALK, rest("1 ms"), WALK, rest("77.7 us"), Drive("reset", parse("6.3 clocks", "time"), None), move("-20 states"))


def decoded(words: np.ndarray) -> tuple[list[dict[int, int]], int]:
    """What a player makes of the words: for each bit its levels by the time they are taken on, and when the last word is done."""
    now, levels = 0, [dict[int, int]() for _ in range(16)]
    for word in words.tolist():
        now += word >> 16
        for bit, known in enumerate(levels):
            level = word >> bit & 1
            if not known or list(known.values())[-1] != level:
                known[now] = level
    return levels, now


# ---- repeatable


def test_same_seed_same_bytes() -> None:
    disturb = (GLITCHES["a"], BOUNCE)
    first = played(*LIVELY, disturb=disturb).words().tobytes()
    assert played(*LIVELY, disturb=disturb).words().tobytes() == first
    assert played(*LIVELY, disturb=disturb, seed=2).words().tobytes() != first


def test_every_random_part_follows_the_seed() -> None:
    steady = (move("40 states"), rest("20 us"), move("-40 states"))
    assert played(WALK).words().tobytes() != played(WALK, seed=2).words().tobytes()
    for more in ({"disturb": (GLITCHES["a"],)}, {"disturb": (BOUNCE,)}):
        assert played(*steady, **more).words().tobytes() != played(*steady, **more, seed=2).words().tobytes()
    # And where nothing is random, the seed makes no difference; nor does it where the profile brings its own.
    assert played(*steady).words().tobytes() == played(*steady, seed=2).words().tobytes()
    own = profile(WALK, seed=5)
    assert compile_stimulus(own, CONTRACT, 1).seed == 5
    assert compile_stimulus(own, CONTRACT, 1).words().tobytes() == played(WALK, seed=5).words().tobytes()


def test_names_keep_profiles_apart() -> None:
    assert played(WALK).words().tobytes() != played(WALK, name="q").words().tobytes()


def test_disturbances_draw_on_their_own() -> None:
    """One more disturbance changes neither the motion nor what the others draw."""
    one = played(WALK, disturb=(GLITCHES["a"],), contract=UNFOLDED)
    two = played(WALK, disturb=(GLITCHES["a"], GLITCHES["b"]), contract=UNFOLDED)
    assert two.lines["a"].toggles_ps.tolist() == one.lines["a"].toggles_ps.tolist()
    assert two.ideal.ledger.time_ps.tolist() == one.ideal.ledger.time_ps.tolist()
    assert len(two.lines["b"].toggles_ps) == len(one.lines["b"].toggles_ps) + 40
    # Two alike on one line are two draws, or their pulses would cancel out.
    twice = played(WALK, disturb=(GLITCHES["a"], GLITCHES["a"]), contract=UNFOLDED)
    assert len(twice.lines["a"].toggles_ps) == len(one.lines["a"].toggles_ps) + 40


# ---- off the clock's edges


def test_no_toggle_near_a_clock_edge() -> None:
    """Motion in step with the clock, begun 0 to 3 ps after an edge: the edges of the lines are moved, by no more than needed."""
    for late_ps in range(-3, 4):
        steps = (
            rest(f"{3 * P - 37_500 + P // 2 + late_ps} ps"),
            move("40 states", "1 states/clock"),
            move("-40 states", "1 states/clock"),
        )
        stimulus = played(*steps)
        ideal = np.sort(np.concatenate([stimulus.ideal.lines[name].toggles_ps for name in "ab"]))
        assert set((ideal % P).tolist()) == {late_ps % P}
        toggles = np.sort(np.concatenate([stimulus.lines[name].toggles_ps for name in "ab"]))
        # Just before the edge it stays before it, and just after it after.
        assert set((toggles % P).tolist()) == {min(max(late_ps % P, 2), P - 2)}
        assert np.abs(toggles - ideal).max() <= 2


def test_all_inputs_keep_off_the_clock_edges() -> None:
    actions = (
        Drive("reset", parse("5.625 clocks", "time"), None),
        rest("0.625 clocks"),
        Drive("reset", parse("3 clocks", "time"), None),
    )
    stimulus = played(*LIVELY, *actions, disturb=(GLITCHES["a"], BOUNCE))
    for line in (*stimulus.lines.values(), *stimulus.drives.values()):
        phase = line.toggles_ps % P
        assert phase.size == 0 or (phase.min() >= 2 and phase.max() <= P - 2)
        assert np.all(np.diff(line.toggles_ps) > 0)


def test_toggles_that_meet_cancel_out() -> None:
    """A pulse that lies within the clearance of an edge is no pulse."""
    steps = (rest("62500 ps"), *[move("0.5 states", "1 states/ps"), move("-0.5 states", "1 states/ps")] * 3, rest("1 us"))
    stimulus = played(*steps)
    assert len(stimulus.ideal.lines["a"].toggles_ps) == 6
    assert len(stimulus.lines["a"].toggles_ps) == 0


# ---- folding


def test_folding() -> None:
    """Rests are shortened by whole clocks, and the map gives every time of the profile back."""
    disturb = (GLITCHES["a"], BOUNCE)
    real, short = played(*LIVELY, disturb=disturb, contract=UNFOLDED), played(*LIVELY, disturb=disturb)
    assert short.periods < real.periods - 9_000
    times = [np.zeros(1, dtype=np.int64)]
    for name in ("a", "b", "index", "reset", "clear"):
        long_line, short_line = ({**stimulus.lines, **stimulus.drives}[name] for stimulus in (real, short))
        assert short_line.first == long_line.first
        assert [short.unfold(time) for time in short_line.toggles_ps.tolist()] == long_line.toggles_ps.tolist()
        assert ((long_line.toggles_ps - short_line.toggles_ps) % P == 0).all()
        times.append(short_line.toggles_ps)
    assert np.array_equal(short.ideal.ledger.number, real.ideal.ledger.number)
    # Twice the time to come to rest is left, so that it is seen that all activity has ended.
    gaps = np.diff(np.unique(np.concatenate(times)))
    assert 2 * (20 + 8) * P <= gaps.max() < 2 * (20 + 8) * P + P
    # A decoder with timers could tell the difference, so nothing is shortened for it.
    assert real.unfold(real.periods * P) == real.periods * P
    assert np.diff(np.unique(np.concatenate([line.toggles_ps for line in real.lines.values()]))).max() > 10**8


# ---- words


def test_words_decode_to_the_lines() -> None:
    stimulus = played(
        *LIVELY,
        disturb=(GLITCHES["a"], BOUNCE),
        encoder=Encoder(4, "11", IndexMark(parse("90 deg", "angle"), parse("180 deg", "angle"))),
    )
    levels, end_ps = decoded(stimulus.words())
    assert end_ps == stimulus.periods * P
    for bit, name in enumerate(("a", "b", "index", "reset", "clear")):
        line = {**stimulus.lines, **stimulus.drives}[name]
        assert list(levels[bit]) == [0, *line.toggles_ps.tolist()]
        assert list(levels[bit].values()) == [(line.first + n) % 2 for n in range(len(levels[bit]))]
    assert all(len(known) == 1 for known in levels[5:])
    assert stimulus.edges == sum(len(known) - 1 for known in levels[:3])


def test_words_without_any_edge() -> None:
    levels, end_ps = decoded(played(rest("3 us"), contract=replace(CONTRACT, reset=None), encoder=Encoder(start="10")).words())
    assert [known for known in levels if len(known) != 1] == []
    assert [known[0] for known in levels[:5]] == [1, 0, 0, 0, 0]
    assert end_ps % P == 0


# ---- the lines are the encoder's


def test_quadrature_against_sine_and_cosine() -> None:
    """A is the sign of -cos and B that of -sin of the electrical angle, common practice for sine encoders, at any time."""
    stimulus = played(move("100 states", "2 states/us", "1 states/us2"), rest("2.5 us"), move("-61.25 states", "3 states/us"))
    rng = np.random.default_rng(3)
    levels, compared = {"a": 0, "b": 0}, 0
    cruise_us = 100 / 2 - 2
    for us in rng.uniform(0, cruise_us + 4 + 2.5 + 61.25 / 3, 2000):
        # The position straight from the textbook: ramps of 2 us and 2 states, then a rest, then back at a steady speed.
        if us < 2:
            at = us**2 / 2
        elif us < 2 + cruise_us:
            at = 2 + 2 * (us - 2)
        elif us < 4 + cruise_us:
            at = 100 - (4 + cruise_us - us) ** 2 / 2
        else:
            at = 100 - 3 * max(0, us - cruise_us - 6.5)
        at += 0.5
        if abs(at - round(at)) < 1e-4:
            continue
        angle = 2 * np.pi * at / 4
        time_ps = BEGIN_PS + us * US
        for name, wave in (("a", -np.cos(angle)), ("b", -np.sin(angle))):
            line = stimulus.ideal.lines[name]
            level = (line.first + np.searchsorted(line.toggles_ps, time_ps)) % 2
            assert level == (wave > 0), (us, name)
            levels[name] += level
        compared += 1
    assert compared > 1900
    assert 0.4 < levels["a"] / compared < 0.6
    assert 0.4 < levels["b"] / compared < 0.6


@pytest.mark.parametrize(("start", "a", "b"), [("00", 0, 0), ("10", 1, 0), ("11", 1, 1), ("01", 0, 1)])
def test_first_levels(start: str, a: int, b: int) -> None:
    """The shaft begins in the middle of its state, and A leads B going forward."""
    stimulus = played(move("4 states"), encoder=Encoder(start=start), contract=UNFOLDED)
    assert (stimulus.lines["a"].first, stimulus.lines["b"].first) == (a, b)
    # From equal levels A changes first.
    first, second = ("a", "b") if a == b else ("b", "a")
    assert stimulus.lines[first].toggles_ps.tolist() == [BEGIN_PS + US // 2, BEGIN_PS + 5 * US // 2]
    assert stimulus.lines[second].toggles_ps.tolist() == [BEGIN_PS + 3 * US // 2, BEGIN_PS + 7 * US // 2]


def index(width: str, at: str) -> Encoder:
    return Encoder(4, "00", IndexMark(parse(width, "angle"), parse(at, "angle")))


@pytest.mark.parametrize(
    ("width", "at", "begin", "end"), [("90 deg", "180 deg", 2, 3), ("135 deg", "22.5 deg", 0.25, 1.75), ("540 deg", "90 deg", 1, 7)]
)
def test_index(width: str, at: str, begin: float, end: float) -> None:
    """At 1 state/us, two revolutions of 16 states forward, then back: 90 electrical degrees are a state."""
    line = played(move("32 states"), move("-32 states"), encoder=index(width, at), contract=UNFOLDED).ideal.lines["index"]
    inside = begin <= 0.5 < end
    edges = [place + turn - 0.5 for turn in (0, 16, 32) for place in (begin, end) if 0 < place + turn - 0.5 < 32]
    us = [*edges, *(64 - edge for edge in reversed(edges))]
    assert line.first == inside
    assert len(edges) == 4
    assert line.toggles_ps.tolist() == [BEGIN_PS + edge * US for edge in us]


def test_index_of_a_shaft_that_starts_in_it() -> None:
    line = played(move("-2 states"), encoder=index("90 deg", "0 deg"), contract=UNFOLDED).lines["index"]
    assert line.first == 1
    assert line.toggles_ps.tolist() == [BEGIN_PS + US // 2]


# ---- before the motion


def test_reset_comes_first() -> None:
    stimulus = played(move("4 states"), power_up=True)
    assert stimulus.power_up
    assert stimulus.begin_ps == BEGIN_PS
    assert stimulus.drives["reset"].first == 1
    # Half a clock after its last edge, so that it is asserted at four edges.
    assert stimulus.drives["reset"].toggles_ps.tolist() == [4 * P + P // 2]
    assert min(line.toggles_ps.min() for line in stimulus.lines.values() if line.toggles_ps.size) == BEGIN_PS + US // 2
    # The lines rest for the time to settle after the reset, and twice that at the end.
    assert stimulus.begin_ps - (4 * P + P // 2) >= 20 * P
    assert stimulus.periods * P - max(stimulus.lines[name].toggles_ps.max() for name in "ab") >= 40 * P


def test_decoder_without_reset() -> None:
    stimulus = played(move("4 states"), contract=replace(CONTRACT, reset=None))
    assert not stimulus.power_up
    assert stimulus.begin_ps == 21 * P + 37_500
    assert stimulus.drives["reset"].first == 0
    assert stimulus.drives["reset"].toggles_ps.size == 0


# ---- disturbances


def test_glitches() -> None:
    """Twenty pulses of a clock and a half, no two of which touch, on one line only."""
    stimulus = played(rest("1 ms"), disturb=(GLITCHES["a"],), contract=UNFOLDED)
    toggles = stimulus.lines["a"].toggles_ps
    assert stimulus.lines["b"].toggles_ps.size == 0
    assert len(toggles) == 40
    widths = np.diff(toggles)[::2]
    assert np.abs(widths - 1.5 * P).max() <= 4
    assert toggles.min() >= BEGIN_PS
    assert toggles.max() <= BEGIN_PS + 1000 * US
    assert np.diff(toggles)[1::2].min() > 0
    # Each in a part of its own.
    assert ((toggles[::2] - BEGIN_PS) // (50 * US)).tolist() == list(range(20))


def test_bounces() -> None:
    """Every edge is followed by an even number of toggles within the time, so the line comes to where it goes."""
    clean = played(move("40 states", "0.2 states/us"), contract=UNFOLDED).lines["b"].toggles_ps
    toggles = played(move("40 states", "0.2 states/us"), disturb=(BOUNCE,), contract=UNFOLDED).lines["b"].toggles_ps
    groups = [toggles[(toggles >= edge - 4) & (toggles < edge + 5 * US)] for edge in clean]
    assert len(clean) == 20
    assert sum(len(group) for group in groups) == len(toggles)
    assert {len(group) for group in groups} == {3, 5, 7, 9}
    assert max(group.max() - edge for group, edge in zip(groups, clean, strict=True)) <= 0.9 * US


def test_missing_pulses() -> None:
    """Pulses 2 and 4 of line A lose both their edges; from then on the lines no longer tell where the shaft is."""
    clean = played(move("40 states"), contract=UNFOLDED).lines["a"].toggles_ps.tolist()
    stimulus = played(move("40 states"), disturb=(Missing("a", Where("edges", numbers=(13, 5, 99))),), contract=UNFOLDED)
    assert stimulus.lines["a"].toggles_ps.tolist() == [*clean[:2], *clean[4:6], *clean[8:]]
    assert stimulus.lost_ps == clean[2]


# ---- refusals


@pytest.mark.parametrize(
    ("make", "expected"),
    [
        (
            lambda: compile_stimulus(profile(move("1000 states"), rest("1 us")), CONTRACT, 1, most_periods=999),
            "it would take 1000 clock periods or more; at most 999 are simulated",
        ),
        # 25 to begin, 10000 to move in, 1 that is not full, 40 to settle twice and 8 to end.
        (
            lambda: compile_stimulus(profile(move("1000 states")), CONTRACT, 1, most_periods=10_072),
            "it would take 10073 clock periods or more; at most 10072 are simulated",
        ),
        (
            lambda: played(rest("300 s"), move("1 states"), contract=replace(UNFOLDED, clock=Clock("clk", US))),
            "nothing moves for more than 281474976710655 ps, the longest wait that can be played",
        ),
        (
            lambda: played(Drive("clear", parse("1 clocks", "time"), None)),
            "it drives the clear-error input, which this decoder does not have",
        ),
        (lambda: played(rest("1 us"), needs=("count", "filter", "sticky-error")), "for decoders with a sticky error"),
        (lambda: played(rest("1 us"), needs=("no-reset", "error")), "for decoders with no reset and an error"),
        (
            lambda: played(rest("5 us"), disturb=(GLITCHES["a"],)),
            "20 pulses of 1.5 clocks do not fit into its run without touching",
        ),
    ],
    ids=["states", "periods", "wait", "input", "need", "needs", "glitches"],
)
def test_refusals(make: Callable[[], Stimulus], expected: str) -> None:
    with pytest.raises(UnfitError) as caught:
        make()
    assert str(caught.value) == expected


def test_just_short_enough() -> None:
    assert compile_stimulus(profile(move("1000 states")), CONTRACT, 1, most_periods=10_073).periods == 10_073


def test_repeats_are_played_in_full() -> None:
    repeated = played(Repeat(3, (move("2 states"), rest("9 us"), move("-1 states"))))
    written_out = played(*[move("2 states"), rest("9 us"), move("-1 states")] * 3)
    assert repeated.words().tobytes() == written_out.words().tobytes()
