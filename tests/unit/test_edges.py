"""When the lines change: against another solver, another form of the encoder, and the definitions of its tolerances."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.interpolate import PPoly

from tbkit.contract import A_LEADS_B
from tbkit.course import build_motion
from tbkit.encoder import FURTHEST_DEGREES, Edges, encode, furthest_degrees, index_windows
from tbkit.errors import UnfitError
from tbkit.kinematics import double_s
from tbkit.motion import Motion, crossings
from tbkit.presets import PRESETS
from tbkit.profile import (
    Action,
    Clicks,
    Delays,
    Dither,
    Encoder,
    Home,
    Illegal,
    IndexMark,
    Move,
    Profile,
    Rest,
    Return,
    Sine,
    Swap,
    Table,
    Walk,
)
from tbkit.profile_file import read_profile
from tbkit.stimulus import lay_out
from tbkit.units import Quantity, Scale, parse

US = 10**6
LINES = 64
# 10 MHz; an encoder of 64 lines with a cycle of 20 um.
SCALE = Scale(
    100_000,
    {"clocks": 1, "dwell": 2, "settle": 10, "reject": 2, "pass": 3},
    {
        "states": Fraction(1),
        "cycles": Fraction(4),
        "rev": Fraction(4 * LINES),
        "deg": Fraction(4 * LINES, 360),
        "mm": Fraction(200),
    },
)


def states(number: float) -> Quantity:
    return parse(f"{number} states", "distance")


def deg(number: float) -> Quantity:
    return parse(f"{number} deg", "angle")


def time(text: str) -> Quantity:
    return parse(text, "time")


def move(by: float, speed: float, accel: float = 0, jerk: float = 0, start: float = 0, end: float = 0) -> Move:
    """In states and us."""
    return Move(
        states(by),
        parse(f"{speed} states/us", "speed"),
        parse(f"{accel} states/us2", "acceleration") if accel else None,
        parse(f"{jerk} states/us3", "jerk") if jerk else None,
        parse(f"{start} states/us", "speed") if start else None,
        parse(f"{end} states/us", "speed") if end else None,
    )


def _middle(state: str) -> Fraction:
    return A_LEADS_B.index(state) + Fraction(1, 2)


def built(*actions: Action, encoder: Encoder | None = None, seed: int = 1) -> Motion:
    encoder = encoder or Encoder(LINES)
    return build_motion(actions, SCALE, _middle(encoder.start), 0, np.random.default_rng(seed), index_windows(encoder))


def edges(*actions: Action, seed: int = 1, **tolerances: object) -> Edges:
    encoder = replace(Encoder(LINES), **tolerances)  # type: ignore[arg-type]
    motion = built(*actions, encoder=encoder, seed=seed)
    return encode(motion, encoder, SCALE, lambda use: np.random.default_rng([seed, len(use)]))


def position(motion: Motion, time_ps: np.ndarray) -> np.ndarray:
    """Where the shaft is, straight from the pieces."""
    at = np.searchsorted(motion.start_ps, time_ps, side="right") - 1
    t = time_ps - motion.start_ps[at]
    return motion.from_states[at] + t * (motion.speed[at] + t * (motion.accel[at] / 2 + t * motion.jerk[at] / 6))


# ---- the times of edges


def test_against_another_solver() -> None:
    """A thousand moves of every kind; a few edges of each against the roots that SciPy finds of the same pieces."""
    rng = np.random.default_rng(7)
    by_time = by_place = 0
    for n in range(1000):
        h, v, a, j = 10 ** rng.uniform([0, -1, -2, -2], [2, 1, 1, 1])
        h, v, a, j = (float(f"{value:.4g}") for value in (h, v, a, j))
        motion = built(move(h, v, a if n % 3 else 0, j if n % 3 == 2 else 0))
        found = crossings(motion)
        assert found.number.tolist() == list(range(1, int(0.5 + h) + 1))
        # In us, to keep numbers near 1; the empty first piece is left out.
        some = motion.duration_ps > 0
        laid = PPoly(
            np.array([motion.jerk * US**3 / 6, motion.accel * US**2 / 2, motion.speed * US, motion.from_states])[:, some],
            np.append(motion.start_ps[some], motion.end_ps) / US,
        )
        for k in {len(found.number) // 2, len(found.number) - 1}:
            roots = laid.solve(float(found.number[k]), extrapolate=False) * US
            # Where a move comes to rest a hair in the position is much in time, so what is left to the place is looked at too.
            near = np.abs(roots - found.time_ps[k]).min() if len(roots) else np.inf
            off = abs(float(laid(found.time_ps[k] / US)) - found.number[k])
            assert near <= 1 or off < 1e-9, (h, v, a, j, k)
            by_time += near <= 1
            by_place += near > 1
    assert by_time > 1750
    assert by_place < 10


def test_thousand_counts_of_a_known_move() -> None:
    """C15: h 10, v 5, a 10, j 30 (2.8333333333 s) over 1000 counts: 999 inner edges, alike from both ends."""
    # 100 states for 1, one us for a second; from the middle of a state every edge is half a state on.
    found = crossings(built(move(1000, 500, 1000, 3000)))
    assert len(found.time_ps) == 1000
    assert np.abs(found.time_ps + found.time_ps[::-1] - 2_833_333).max() <= 1
    # At the cruise's begin, 5/6 s, half of 5 · 5/6 has been covered; then 5 a second.
    cruise = (found.number - 0.5 > 1000 / 4.8) & (found.number - 0.5 < 1000 - 1000 / 4.8)
    assert np.abs(found.time_ps[cruise] - (US * 5 / 6 + (found.number[cruise] - 0.5 - 1000 / 4.8) / 500 * US)).max() <= 1
    assert double_s(10, 0, 0, 5, 10, 30).time == pytest.approx(2.8333333333)


def test_many_edges_in_one_piece() -> None:
    """Long curved pieces are solved in another way; the shaft is at the place all the same."""
    motion = built(move(60_000, 1000, 0.5, 0.01))
    found = crossings(motion)
    assert len(found.number) == 60_000
    assert np.all(np.diff(found.time_ps) > 0)
    speed = np.gradient(position(motion, found.time_ps), found.time_ps)
    assert (np.abs(position(motion, found.time_ps) - found.number) <= speed * 0.6 + 1e-8).all()


# ---- the ideal encoder


def test_levels_against_sine_and_cosine() -> None:
    """A is the sign of -cos and B that of -sin of the electrical angle, common practice for sine encoders."""
    actions = (move(57.3, 2, 0.5, 0.3), Rest(time("1 us")), move(-91.1, 3, 1))
    motion, ideal = built(*actions), edges(*actions)
    at_ps = np.random.default_rng(2).integers(0, motion.end_ps, 5000)
    place = position(motion, at_ps)
    sure = np.abs(place - np.round(place)) > 1e-5
    for name, wave in (("a", -np.cos(np.pi / 2 * place)), ("b", -np.sin(np.pi / 2 * place))):
        line = ideal.lines[name]
        level = (line.first + np.searchsorted(line.toggles_ps, at_ps, side="right")) % 2
        assert (level == (wave > 0))[sure].all()
        assert 0.3 < level.mean() < 0.7
    assert sure.sum() > 4990


# ---- tolerances, as defined in the Avago HEDR-8000 and HEDT-5140 data sheets, page 3

RUN = move(4 * 600, 1)  # a degree is 1/90 us


def pulses(found: Edges, name: str) -> tuple[np.ndarray, np.ndarray]:
    """(widths, centres) of every whole high pulse, in electrical degrees of a motion of 1 state/us."""
    line = found.lines[name]
    toggles = line.toggles_ps[line.first :]
    toggles = toggles[: len(toggles) // 2 * 2].reshape(-1, 2) * 90 / US
    return toggles[:, 1] - toggles[:, 0], toggles.mean(axis=1)


def widths_of_states(found: Edges) -> np.ndarray:
    both = np.sort(np.concatenate([found.lines["a"].toggles_ps, found.lines["b"].toggles_ps]))
    return np.diff(both) * 90 / US


@pytest.mark.parametrize(("duty_a", "duty_b", "phase"), [(20, -12, 0), (0, 0, 9), (-15, 25, -8)])
def test_duty_and_phase(duty_a: float, duty_b: float, phase: float) -> None:
    """Duty is how long a line is high; phase is from the centre of A high to the centre of B high."""
    found = edges(RUN, duty_error_a=deg(duty_a), duty_error_b=deg(duty_b), phase_error=deg(phase))
    (width_a, centre_a), (width_b, centre_b) = pulses(found, "a"), pulses(found, "b")
    assert width_a == pytest.approx(180 + duty_a, abs=1e-3)
    assert width_b == pytest.approx(180 + duty_b, abs=1e-3)
    many = min(len(centre_a), len(centre_b))
    assert many >= 598
    assert centre_b[:many] - centre_a[:many] == pytest.approx(90 + phase, abs=1e-3)
    # The state widths follow: from A's rise to B's rise, to A's fall, to B's fall, to A's rise.
    follows = [
        90 + phase + (duty_a - duty_b) / 2,
        90 - phase + (duty_a + duty_b) / 2,
        90 + phase + (duty_b - duty_a) / 2,
        90 - phase - (duty_a + duty_b) / 2,
    ]
    assert widths_of_states(found)[:4] == pytest.approx(follows, abs=1e-3)


def test_backwards_the_disc_is_the_same() -> None:
    """Edges lie at places of the disc, so backwards they come in the mirrored order of times."""
    encoder = {"duty_error_a": deg(20), "duty_error_b": deg(-10), "phase_error": deg(5), "state_error": deg(9)}
    found = edges(move(40, 1), move(-40, 1), **encoder)
    for name in "ab":
        toggles = found.lines[name].toggles_ps
        assert len(toggles) == 40
        assert np.abs(toggles + toggles[::-1] - 80 * US).max() <= 1


def test_state_error() -> None:
    """Each graduation lies in a band of that width about its place, the same one each revolution."""
    found = edges(move(4 * LINES * 3, 1), state_error=deg(30))
    off = found.ledger.time_ps * 90 / US - (np.arange(4 * LINES * 3) + 0.5) * 90
    assert -15 <= off.min() < -14
    assert 14 < off.max() <= 15
    assert abs(off.mean()) < 2
    # The standard deviation of an even spread.
    assert off.std() == pytest.approx(30 / 12**0.5, rel=0.1)
    assert off[: 4 * LINES] == pytest.approx(off[4 * LINES : 8 * LINES], abs=1e-3)


def test_jitter() -> None:
    """Each passing differs; the standard deviation is the one that was told."""
    found = edges(move(4000, 1), jitter=deg(5))
    off = found.ledger.time_ps * 90 / US - (np.arange(4000) + 0.5) * 90
    assert abs(off.mean()) < 5 * 4 / 4000**0.5
    # Cut at three standard deviations, which takes away a little more than a hundredth.
    assert off.std() == pytest.approx(5, rel=0.05)
    assert 14 < np.abs(off).max() <= 15.001
    assert not np.allclose(off[: 4 * LINES], off[4 * LINES : 8 * LINES], atol=1)


@pytest.mark.parametrize("amplitude", [30, 300])
def test_eccentricity(amplitude: float) -> None:
    """A once-a-revolution error, which may be more than a state and is none where the shaft begins."""
    found = edges(move(4 * LINES, 1), eccentricity=deg(amplitude))
    assert len(found.ledger.number) == 4 * LINES
    off = found.ledger.time_ps * 90 / US - (found.ledger.number - 0.5) * 90
    assert off == pytest.approx(amplitude * np.sin(2 * np.pi * found.ledger.number / (4 * LINES)), abs=1e-3)


def test_hysteresis() -> None:
    """Forward every edge comes half of it late, backward too; turning round by less is not seen at all."""
    found = edges(move(10, 1), move(-10, 1), hysteresis=deg(18))
    assert found.ledger.time_ps.tolist() == [round((n + 0.6) * US) for n in range(20)]
    back_and_forth = Dither(states(0.15), time("1 us"), 50)
    there = move(0.45, 1)
    assert len(edges(there, back_and_forth).ledger.number) == 100
    assert len(edges(there, back_and_forth, hysteresis=deg(18)).ledger.number) == 1


# ---- delays


def test_delays() -> None:
    delays = Delays(*(time(text) for text in ("10 ns", "20 ns", "30 ns", "40 ns")))
    plain, found = edges(move(40, 1)), edges(move(40, 1), delay=delays)
    assert plain.lines["a"].first == plain.lines["b"].first == 0
    for name, rise, fall in (("a", 10_000, 20_000), ("b", 30_000, 40_000)):
        late = found.lines[name].toggles_ps - plain.lines[name].toggles_ps
        assert late.tolist() == [rise, fall] * 10
    assert found.lost_ps is None


def test_swallowed_pulses() -> None:
    """A slow rise eats a short pulse; what is left still tells where the shaft is, since it came back."""
    there = move(0.45, 1)
    rocks = Dither(states(0.1), time("10 ns"), 20)
    assert len(edges(there, rocks).lines["a"].toggles_ps) == 40
    found = edges(there, rocks, delay=Delays(a_rise=time("30 ns")))
    assert len(found.lines["a"].toggles_ps) == 0
    assert found.lost_ps is None
    # Longer ones are only shortened.
    rocks = Dither(states(0.1), time("100 ns"), 20)
    found = edges(there, rocks, delay=Delays(a_rise=time("30 ns")))
    assert np.diff(found.lines["a"].toggles_ps)[::2].tolist() == [70_000] * 20


def test_delays_that_change_the_order() -> None:
    """A that comes more than a state later than B tells another motion, and that is said."""
    slow = Delays(a_rise=time("1.5 us"), a_fall=time("1.5 us"))
    found = edges(move(40, 1), delay=slow)
    # A rises at 0.5 us and is seen at 2 us, after the B of 1.5 us.
    assert found.lost_ps == 1_500_000
    profile = Profile(Path("x.yaml"), "x", "", (), None, (move(40, 1),), Encoder(LINES, delay=slow))
    disturbed = lay_out(profile, SCALE, 1, 0).disturbed
    assert disturbed.lost_ps == 1_500_000
    assert disturbed.undetectable == ("delays of the encoder that change the order of edges: A and B then tell another motion",)


def test_edges_on_one_ps() -> None:
    """Where rounding or delays put A and B on one ps, the later one waits a ps; where both are to change at once they do."""
    late = Delays(a_rise=time("1 us"), a_fall=time("1 us"))
    found = edges(move(40, 1), delay=late)
    assert not np.intersect1d(found.lines["a"].toggles_ps, found.lines["b"].toggles_ps).size
    assert found.lines["a"].toggles_ps[0] + 1 == found.lines["b"].toggles_ps[0] == 1_500_001
    fast = edges(move(3, 2e6))
    assert not np.intersect1d(fast.lines["a"].toggles_ps, fast.lines["b"].toggles_ps).size
    asked = edges(Illegal(time("1 us"), 3))
    assert asked.lines["a"].toggles_ps.tolist() == asked.lines["b"].toggles_ps.tolist() == [500_000, 1_500_000, 2_500_000]


# ---- index


def index(width: float, at: float, **more: object) -> IndexMark:
    return replace(IndexMark(deg(width), deg(at)), **more)  # type: ignore[arg-type]


@pytest.mark.parametrize("width", [90, 180, 360])
def test_gated_index(width: float) -> None:
    """1/4, 1/2 and 1 cycle wide; its edges are those of A and B, tolerances and all."""
    tolerances = {"duty_error_a": deg(20), "phase_error": deg(-7)}
    found = edges(move(12, 1), index=index(width, 180), **tolerances)
    begin, end = 2, 2 + width // 90
    times = dict(zip(found.ledger.number.tolist(), found.ledger.time_ps.tolist(), strict=True))
    assert found.lines["index"].toggles_ps.tolist() == [times[begin], times[end]]
    assert found.exact_index
    both = np.concatenate([found.lines["a"].toggles_ps, found.lines["b"].toggles_ps])
    assert set(found.lines["index"].toggles_ps.tolist()) <= set(both.tolist())


def test_ungated_index() -> None:
    """Its own edges: where they are on the disc, whatever A and B do, with their own jitter."""
    found = edges(move(12, 1), index=index(270, 200, gated=False), duty_error_a=deg(20))
    assert found.lines["index"].toggles_ps.tolist() == pytest.approx([(200 / 90 - 0.5) * US, (470 / 90 - 0.5) * US], abs=1)
    assert not found.exact_index
    turns = [move(4 * LINES, 1)] * 40
    shaken = edges(*turns, index=index(270, 200, gated=False, jitter=deg(5))).lines["index"].toggles_ps
    off = (shaken - edges(*turns, index=index(270, 200, gated=False)).lines["index"].toggles_ps) * 90 / US
    assert len(off) == 80
    assert off.std() == pytest.approx(5, rel=0.3)


def test_index_delay_marks_and_missing() -> None:
    turns = [move(4 * LINES, 1)] * 3
    plain = edges(*turns, index=index(90, 180)).lines["index"].toggles_ps
    assert (plain[::2] / US).tolist() == [1.5, 1.5 + 4 * LINES, 1.5 + 8 * LINES]
    late = edges(*turns, index=index(90, 180, delay=time("50 ns")))
    assert (late.lines["index"].toggles_ps - plain).tolist() == [50_000] * 6
    assert not late.exact_index
    own = edges(*turns, index=index(90, 180), delay=Delays(index_rise=time("7 ns"), index_fall=time("9 ns")))
    assert (own.lines["index"].toggles_ps - plain).tolist() == [7_000, 9_000] * 3
    assert not own.exact_index
    # Further marks at 90 and 200 degrees of the shaft, on whole cycles.
    more = edges(*turns[:1], index=index(90, 180, marks=(deg(90), deg(200)))).lines["index"].toggles_ps
    assert (more[::2] / US).tolist() == [1.5, 1.5 + LINES, 1.5 + 4 * round(LINES * 200 / 360)]
    gone = edges(*turns, index=index(90, 180, missing=(2, 9)))
    assert gone.lines["index"].toggles_ps.tolist() == [*plain[:2], *plain[4:]]
    assert not gone.exact_index


# ---- published encoders


@pytest.mark.parametrize(
    ("name", "pulse", "phase", "least", "most"),
    [
        # HEDS-9040#T00: typical 7 and 2, at most 50 and 15; states 90 -50 +50, so 40 to 140.
        ("code-wheel-2000-typical", 7, 2, 40, 140),
        ("code-wheel-2000-worst", 50, 15, 40, 140),
        # HEDS-9140#B00: typical 10 and 2, at most 45 and 15; states 90 -45 +45.
        ("code-wheel-1000-typical", 10, 2, 45, 135),
        ("code-wheel-1000-worst", 45, 15, 45, 135),
        # CUI AMT10: duty 49 to 51 %, so 3.6 of 360.
        ("capacitive-2048", 3.6, 0, 86, 94),
    ],
)
def test_presets_stay_within_their_sheets(name: str, pulse: float, phase: float, least: float, most: float) -> None:
    encoder = replace(PRESETS[name].encoder, delay=Delays())
    found = encode(built(RUN), encoder, SCALE, lambda use: np.random.default_rng(len(use)))
    (width_a, centre_a), (width_b, centre_b) = pulses(found, "a"), pulses(found, "b")
    assert max(np.abs(width_a - 180).max(), np.abs(width_b - 180).max()) <= pulse + 1e-3
    many = min(len(centre_a), len(centre_b))
    assert np.abs(centre_b[:many] - centre_a[:many] - 90).max() <= phase + 1e-3
    widths = widths_of_states(found)
    assert least - 1e-3 <= widths.min()
    assert widths.max() <= most + 1e-3
    if "worst" in name:
        # A4: the shortest state the sheet allows: 0.444 or 0.5 of the ideal one.
        assert widths.min() == pytest.approx(least, abs=1e-3)
    assert furthest_degrees(encoder) < FURTHEST_DEGREES


# ---- actions


def rate(text: str) -> Quantity:
    return parse(text, "rate")


def test_return() -> None:
    back = Return(parse("2 states/us", "speed"))
    motion = built(move(0.1, 1), move(7.77, 1, 0.3), back)
    assert motion.to_states[-1] == motion.from_states[0]
    assert motion.speed[-1] * US == pytest.approx(-2)
    # There already: nothing to do.
    assert built(back).end_ps == 0


@pytest.mark.parametrize(("first", "last"), [(50, 50), (20, 80), (80, 20)])
def test_sine(first: float, last: float) -> None:
    """The position is a sine with an even sweep of its rate, to a ten-thousandth of a state, and the edges are where it says."""
    cycles, size = 10, 13.3
    motion = built(Sine(states(size), rate(f"{first} kHz"), rate(f"{last} kHz"), cycles))
    total_us = 2 * cycles / (first + last) * 1000
    assert motion.end_ps == pytest.approx(total_us * US, abs=1)
    assert motion.to_states[-1] == 0.5
    t = np.linspace(0, 1, 5000)[1:-1]
    turns = (first * t + (last - first) * t**2 / 2) * total_us / 1000
    wanted = 0.5 + size * np.sin(2 * np.pi * turns)
    assert np.abs(position(motion, t * total_us * US) - wanted).max() < 2e-4
    found = crossings(motion)
    assert len(found.number) == 4 * 13 * cycles
    assert np.all(np.diff(found.time_ps) > 0)
    assert np.where(found.up, 1, -1).sum() == 0


def test_sine_refusals() -> None:
    with pytest.raises(UnfitError, match=r"^it has more than 2500000 pieces of motion$"):
        built(Sine(states(1), rate("1 Hz"), rate("1 Hz"), 10**6))
    with pytest.raises(UnfitError, match=r"^it covers more than 50000000 states$"):
        built(Sine(states(10**6), rate("1 Hz"), rate("1 Hz"), 100))


def test_table(tmp_path: Path) -> None:
    """Straight lines between the points, the first of which is where the shaft is."""
    (tmp_path / "run.csv").write_text("time_us, place_mm\n5,1.00\n7,1.02\n10,1.02\n14,0.98\n")
    (tmp_path / "p.yaml").write_text("profile: p\nencoder: {lines: 64, pitch: 20 um}\nmotion: [{table: {file: run.csv}}]\n")
    (action,) = read_profile(tmp_path / "p.yaml").motion
    assert isinstance(action, Table)
    motion = built(action)
    assert motion.start_ps.tolist() == [0, 0, 2 * US, 5 * US]
    assert motion.to_states.tolist() == [0.5, 4.5, 4.5, -3.5]
    assert (motion.speed * US).tolist() == pytest.approx([0, 2, 0, -2])
    assert motion.end_ps == 9 * US
    # Two times that are one ps in whole ps do not run backwards.
    dense = Table(tuple((time(f"{n * 0.1} ps"), states(n)) for n in range(10)))
    assert built(dense).duration_ps.min() >= 0


def test_clicks() -> None:
    """A cycle a click, half of it speeding up: x(t) = 2 t²; then rest until the next one is due."""
    motion = built(Clicks(parse("1 cycles", "distance"), time("20 us"), time("50 us"), 3))
    assert motion.end_ps == 150 * US
    found = crossings(motion)
    # From the detent: 4 (t/20)² · 2 covers 0.5 at 5 us and 1.5 at 8.66 us; and the mirror of it.
    first = [5, 20 * (1.5 / 8) ** 0.5, 20 - 20 * (1.5 / 8) ** 0.5, 15]
    assert found.time_ps == pytest.approx([(t + 50 * n) * US for n in range(3) for t in first], abs=1)
    assert motion.to_states[-1] == 12.5


@pytest.mark.parametrize("forward", [True, False])
def test_home(forward: bool) -> None:
    """Past the mark at speed, back to before it, then slowly to its middle, from the side it was looked for from."""
    encoder = Encoder(LINES, index=index(90, 180))
    speeds = [parse(text, "speed") for text in ("2 states/us", "0.25 states/us")]
    action = Home(forward, *speeds, parse("0.5 states/us2", "acceleration"), states(6))
    motion = built(move(40, 1), action, encoder=encoder)
    sign, near, far = (1, 258, 259) if forward else (-1, 3, 2)
    assert motion.to_states[-1] == (near + far) / 2
    slow = motion.to_states[-1] - motion.from_states[-1]
    assert sign * slow == 6.5
    assert abs(motion.speed[-1]) * US == pytest.approx(0.25)
    furthest = motion.to_states.max() if forward else motion.to_states.min()
    # It comes by at full speed, and takes 2²/(2·0.5) = 4 states to stop behind it.
    assert sign * (furthest - near) == 5
    passed = crossings(motion)
    assert ((passed.number == near) & (passed.time_ps > 40 * US)).sum() == 3
    with pytest.raises(UnfitError, match=r"^it looks for the index; give the encoder one: `encoder: \{lines: 1024, index: \{width"):
        built(action)


def test_walk_with_ramps() -> None:
    """Each run starts and ends at rest and covers whole states."""
    action = Walk(states(300), *(parse(f"{n} states/us", "speed") for n in (0.5, 2)), 1, 9, parse("1 states/us2", "acceleration"))
    motion = built(action)
    runs = np.flatnonzero(motion.accel > 0)
    assert len(runs) > 30
    assert 300 <= np.abs(motion.to_states - motion.from_states).sum() < 309
    assert np.abs(motion.accel).max() * US**2 == pytest.approx(1, rel=1e-3)
    assert np.abs(motion.speed).max() * US <= 2.001
    assert built(action, seed=2).end_ps != motion.end_ps


def test_start_and_end_speed() -> None:
    """From 1 to 2 states/us and on, without ever standing still."""
    motion = built(move(10, 3, 2, start=1, end=2), move(5, 2), move(10, 2, 2, 8, start=2))
    speeds = motion.speed[motion.duration_ps > 0] * US
    assert speeds[0] == pytest.approx(1)
    assert speeds.max() == pytest.approx(3, rel=1e-5)
    # The piece before the even run ends with 2.
    before = 2
    assert (motion.speed + motion.accel * motion.duration_ps)[motion.duration_ps > 0][before] * US == pytest.approx(2, rel=1e-5)
    assert motion.to_states[-1] == 25.5
    with pytest.raises(UnfitError, match=r"^a move of 1 states is too short to change its speed as told; that takes 25 states$"):
        built(move(1, 10, 2, start=10))
    with pytest.raises(UnfitError, match=r"^a start or end speed above the speed of 1 states/us$"):
        built(move(10, 1, 2, end=3))


def test_slows_down_otherwise() -> None:
    # C2 of tech-champion.com scaled: 2 and 4 states/us2 over 100 states.
    motion = built(replace(move(100, 1000, 2), decel=parse("4 states/us2", "acceleration")))
    up, down = np.flatnonzero(motion.duration_ps)
    assert (motion.duration_ps[up], motion.duration_ps[down]) == pytest.approx((8.165 * US, 4.082 * US), abs=5e-4 * US)
    assert motion.to_states[-1] == 100.5


# ---- properties

STEPS = st.lists(st.tuples(st.integers(-300, 300).filter(bool), st.integers(1, 40), st.integers(0, 30)), min_size=1, max_size=4)
MANY = settings(max_examples=60, derandomize=True, deadline=None)


def course(steps: list[tuple[int, int, int]], sign: int = 1) -> list[Move]:
    """Steps of (tenths of a state, tenths of a state/us, hundredths of a state/us2 or none)."""
    return [move(sign * by / 10, speed / 10, accel / 100) for by, speed, accel in steps]


@MANY
@given(STEPS)
def test_closed_loops_net_zero(steps: list[tuple[int, int, int]]) -> None:
    found = edges(*course(steps), Return(parse("1 states/us", "speed")), duty_error_a=deg(20), state_error=deg(10))
    assert np.where(found.ledger.up, 1, -1).sum() == 0
    for name in "ab":
        assert len(found.lines[name].toggles_ps) % 2 == 0


@MANY
@given(STEPS)
def test_mirrored_profile_mirrors_the_edges(steps: list[tuple[int, int, int]]) -> None:
    there, back = crossings(built(*course(steps))), crossings(built(*course(steps, -1)))
    # On a boundary the shaft is in the upper state, which a mirror does not keep: turns that end on one are left out.
    ends = np.cumsum([by for by, _, _ in steps])
    if ((ends - 5) % 10 == 0).any():
        return
    assert back.time_ps.tolist() == there.time_ps.tolist()
    assert back.number.tolist() == (1 - there.number).tolist()
    assert back.up.tolist() == (~there.up).tolist()


@MANY
@given(st.integers(1, 3000), st.sampled_from(A_LEADS_B), st.booleans(), st.integers(0, 40))
def test_full_turn(lines: int, start: str, forward: bool, duty: int) -> None:
    """Four times the line count, whatever the disc is like."""
    scale = replace(SCALE, states={**SCALE.states, "rev": Fraction(4 * lines)})
    encoder = Encoder(lines, start, duty_error_b=deg(duty), state_error=deg(20))
    turn = Move(parse("1 rev" if forward else "-1 rev", "distance"), parse("1 states/us", "speed"))
    motion = build_motion([turn], scale, _middle(start), 0, np.random.default_rng(1))
    found = encode(motion, encoder, scale, lambda _: np.random.default_rng(1))
    assert np.where(found.ledger.up, 1, -1).sum() == (4 * lines if forward else -4 * lines)
    assert len(found.lines["a"].toggles_ps) == len(found.lines["b"].toggles_ps) == 2 * lines


def counted(a: tuple[int, list[int]], b: tuple[int, list[int]]) -> int:
    """Net states that two lines tell."""
    events = sorted([*((t, 0) for t in a[1]), *((t, 1) for t in b[1])])
    levels, total = [a[0], b[0]], 0
    for _, which in events:
        before = A_LEADS_B.index(f"{levels[0]}{levels[1]}")
        levels[which] ^= 1
        total += 1 if (A_LEADS_B.index(f"{levels[0]}{levels[1]}") - before) % 4 == 1 else -1
    return total


@MANY
@given(STEPS)
def test_swapped_lines_negate(steps: list[tuple[int, int, int]]) -> None:
    profile = Profile(Path("x.yaml"), "x", "", (), None, tuple(course(steps)))
    swapped = replace(profile, disturb=(Swap(),))
    totals = []
    for one in (profile, swapped):
        lines = lay_out(one, SCALE, 1, 0).disturbed.lines
        a, b = ((line.first, line.toggles_ps.tolist()) for line in (lines["a"], lines["b"]))
        totals.append(counted(a, b))
    net = int(np.where(crossings(built(*course(steps))).up, 1, -1).sum())
    assert totals == [net, -net]


@MANY
@given(STEPS, st.integers(0, 1000), st.integers(0, 13))
def test_repeatable_and_never_on_one_ps(steps: list[tuple[int, int, int]], seed: int, jitter: int) -> None:
    tolerances = {"jitter": deg(jitter), "delay": Delays(a_rise=time("20 ns"), b_fall=time("33 ns"))}
    found, again = (edges(*course(steps), seed=seed, **tolerances) for _ in range(2))
    for name in "ab":
        assert found.lines[name].toggles_ps.tobytes() == again.lines[name].toggles_ps.tobytes()
    assert not np.intersect1d(found.lines["a"].toggles_ps, found.lines["b"].toggles_ps).size
