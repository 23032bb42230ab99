"""Where the shaft is when, against closed forms and another solver."""

from __future__ import annotations

from fractions import Fraction
from math import floor, sqrt

import numpy as np
import pytest
from scipy.interpolate import PPoly

import tbkit.course
from tbkit.contract import A_LEADS_B
from tbkit.course import build_motion
from tbkit.errors import UnfitError
from tbkit.motion import Crossings, Motion, crossings
from tbkit.profile import Action, Dither, Drive, Illegal, Move, Repeat, Rest, Reverse, Walk
from tbkit.units import Quantity, Scale, parse

# 10 MHz; an encoder of 7 lines, so that tenths and degrees are no whole states.
SCALE = Scale(
    100_000, {"clocks": 1, "dwell": 2, "settle": 10}, {"states": Fraction(1), "rev": Fraction(28), "deg": Fraction(28, 360)}
)
US = 10**6


def states(number: float) -> Quantity:
    return parse(f"{number} states", "distance")


def move(by: str, speed: str, accel: str | None = None) -> Move:
    return Move(parse(by, "distance"), parse(speed, "speed"), parse(accel, "acceleration") if accel else None)


def time(text: str) -> Quantity:
    return parse(text, "time")


def built(*actions: Action, start: str = "00", seed: int = 1) -> Motion:
    return build_motion(actions, SCALE, A_LEADS_B.index(start) + Fraction(1, 2), 0, np.random.default_rng(seed))


def trapezoid(h: float, v: float, a: float) -> Motion:
    """A move over ``h`` states at most ``v`` states/us and ``a`` states/us2 fast, without the empty piece that comes first."""
    whole = built(move(f"{h} states", f"{v} states/us", f"{a} states/us2"))
    return Motion(*(getattr(whole, name)[1:] for name in ARRAYS), drives=(), end_ps=whole.end_ps)


ARRAYS = ("start_ps", "duration_ps", "from_states", "to_states", "speed", "accel", "jerk")


def net(found: Crossings) -> int:
    return int(np.where(found.up, 1, -1).sum())


# ---- closed form (Biagiotti & Melchiorri, Trajectory Planning for Automatic Machines and Robots, 2008, section 3.2)


def test_trapezoid() -> None:
    # closed form: h 10, v 5, a 10 gives ramps of v/a = 0.5, a cruise of h/v - v/a = 1.5, and 2.5 in all.
    motion = trapezoid(10, 5, 10)
    assert motion.duration_ps.tolist() == [500_000, 1_500_000, 500_000]
    assert motion.end_ps == 2_500_000
    assert motion.to_states.tolist() == pytest.approx([0.5 + 1.25, 0.5 + 8.75, 10.5], rel=1e-15)
    assert motion.to_states[-1] == 10.5
    assert motion.speed.tolist() == pytest.approx([0, 5 / US, 5 / US])
    assert motion.accel.tolist() == pytest.approx([10 / US**2, 0, -10 / US**2])


def test_triangle() -> None:
    # closed form: h 2, v 5, a 10 never reaches v: ramps of sqrt(h/a) = 0.447214, 0.894427 in all, peak sqrt(h·a) = 4.472136.
    motion = trapezoid(2, 5, 10)
    # The ends of phases are rounded, not their lengths.
    assert motion.duration_ps.tolist() == [447_214, 447_213]
    assert motion.end_ps == 894_427
    # A phase whose length is rounded keeps its distance: one state, slowing down to rest.
    assert motion.speed[1] * US == pytest.approx(2 / 0.447213, rel=1e-12)
    assert motion.speed[1] * US == pytest.approx(4.472136, rel=2e-6)


def test_triangle_peak() -> None:
    # closed form, as on tech-champion.com: the peak is sqrt(2abD/(a+b)), here with a = b = 2 and D = 100.
    motion = trapezoid(100, 1000, 2)
    assert motion.speed[1] * US == pytest.approx(sqrt(2 * 2 * 2 * 100 / (2 + 2)), rel=1e-6)


@pytest.mark.parametrize(("h", "seconds"), [(1, 2.0), (2, 3.0)])
def test_limit_of_trapezoids(h: int, seconds: float) -> None:
    # closed form, and ruckig's own tests for boundless jerk: v 1, a 1 takes 2.0 for h 1 and 3.0 for h 2.
    assert trapezoid(h, 1, 1).end_ps == seconds * US


def closed_form(h: float, v: float, a: float) -> PPoly:
    """Distance covered against us, straight from the textbook and without rounding."""
    if h * a <= v * v:
        ramp, cruise, v = sqrt(h / a), 0.0, sqrt(h * a)
    else:
        ramp, cruise = v / a, h / v - v / a
    pieces = [[a / 2, 0, -a / 2], [0, v, v], [0, a * ramp**2 / 2, h - a * ramp**2 / 2]]
    if not cruise:
        pieces = [[piece[0], piece[2]] for piece in pieces]
    ends = [0, ramp, ramp + cruise, 2 * ramp + cruise] if cruise else [0, ramp, 2 * ramp]
    return PPoly(np.array(pieces), np.array(ends))


def test_crossings_against_another_solver() -> None:
    """A hundred moves: the times at which boundaries are crossed, against the roots that SciPy finds of the same motion."""
    rng = np.random.default_rng(42)
    compared = 0
    for _ in range(100):
        h, v, a = round(rng.uniform(1, 60), 3), round(10 ** rng.uniform(-1, 1), 3), round(10 ** rng.uniform(-2, 1), 4)
        motion = trapezoid(h, v, a)
        found = crossings(motion)
        # The pieces as they were laid, their times in whole ps: only the solving differs. In us, to keep numbers near 1.
        laid = PPoly(
            np.array([motion.accel * US**2 / 2, motion.speed * US, motion.from_states]),
            np.append(motion.start_ps, motion.end_ps) / US,
        )
        ideal = closed_form(h, v, a)
        for number, time_ps in zip(found.number.tolist(), found.time_ps.tolist(), strict=True):
            roots = laid.solve(number, extrapolate=False) * US
            assert np.abs(roots - time_ps).min() <= 1
            # Each of the three pieces is half a ps off at most, and the crossing itself.
            assert np.abs(ideal.solve(number - 0.5, extrapolate=False) * US - time_ps).min() <= 2
        assert found.number.tolist() == list(range(1, int(0.5 + h) + 1))
        assert np.all(np.diff(found.time_ps) > 0)
        compared += len(found.number)
    assert compared > 2000


# ---- turning, mirrored motion, closed loops


def test_turn_on_a_boundary() -> None:
    """On a boundary the shaft is in the upper state: that one is entered and left from below, and never left from above."""
    from_below = crossings(built(move("0.5 states", "1 states/us"), move("-0.5 states", "1 states/us")))
    assert from_below.number.tolist() == [1, 1]
    assert from_below.up.tolist() == [True, False]
    assert from_below.time_ps.tolist() == [500_000, 500_000]
    from_above = crossings(built(move("-0.5 states", "1 states/us"), move("0.5 states", "1 states/us")))
    assert from_above.number.tolist() == []
    # The same for a move that comes to rest on the boundary, where the speed is zero and roots lose their digits.
    slow = crossings(built(move("2.5 states", "9 states/us", "2 states/us2"), Rest(time("1 us")), move("-1 states", "1 states/us")))
    assert slow.number.tolist() == [1, 2, 3, 3]
    assert slow.time_ps[2] <= 2 * round(sqrt(2.5 / 2) * US) <= slow.time_ps[3] - US
    assert net(slow) == 2


@pytest.mark.parametrize("accel", [None, "0.7 states/us2"])
def test_mirrored_motion(accel: str | None) -> None:
    """Backwards from the middle of a state, boundaries are met at the same times as forwards."""
    there = crossings(built(move("37.2 states", "3 states/us", accel)))
    back = crossings(built(move("-37.2 states", "3 states/us", accel)))
    assert len(there.number) == 37
    assert back.time_ps.tolist() == there.time_ps.tolist()
    assert back.number.tolist() == (1 - there.number).tolist()
    assert not back.up.any()


def test_there_and_back_in_time() -> None:
    """A move that speeds up and slows down alike is the same seen from its end."""
    found = crossings(trapezoid(41, 2, 0.3))
    motion = trapezoid(41, 2, 0.3)
    assert np.abs(found.time_ps + found.time_ps[::-1] - motion.end_ps).max() <= 1


def test_closed_loops() -> None:
    """Whatever the distances, as long as they add up to nothing the shaft is exactly where it was."""
    loops = [
        [move("0.1 rev", "700 rpm")] * 10 + [move("-1 rev", "90 rpm", "5000 rev/s2")],
        [move("7.77 deg", "1.1 states/us", "0.3 states/us2")] * 3 + [move("-23.31 deg", "1.7 states/us")],
        [Dither(states(2.6), time("0.77 us"), 33)],
        [Repeat(3, (move("0.7 states", "1 states/us"), move("-0.3 states", "1 states/us"), move("-0.4 states", "1 states/us")))],
    ]
    for loop in loops:
        motion = built(*loop)
        assert motion.to_states[-1] == motion.from_states[0] == 0.5
        assert len(crossings(motion).number) > 0
        assert net(crossings(motion)) == 0


def test_times_are_rounded_and_distances_are_not() -> None:
    """A third of a us is 333333 ps, three of them 999999; the shaft still comes exactly to where it was sent."""
    motion = built(*[move("1 states", "3 states/us")] * 3)
    assert motion.duration_ps.tolist() == [0, 333_333, 333_333, 333_333]
    assert motion.to_states.tolist() == [0.5, 1.5, 2.5, 3.5]
    assert motion.end_ps == 999_999
    for n, time_ps in enumerate(crossings(motion).time_ps.tolist()):
        assert abs(time_ps - (333_333 * n + Fraction(333_333, 2))) <= Fraction(1, 2)
    # Too fast for a ps: a move takes one all the same.
    assert built(move("1 states", "1e6 states/ps")).end_ps == 1


# ---- the other actions


@pytest.mark.parametrize(
    ("state", "forward", "turns"),
    [("11", True, [6.5, 3.5]), ("00", True, [4.5, 1.5]), ("10", False, [-2.5, 0.5]), ("00", False, [-3.5, -0.5])],
)
def test_reverse(state: str, forward: bool, turns: list[float]) -> None:
    """On to the first middle of that state that is at least 3 states away, then to and fro over 3 states."""
    motion = built(Reverse(state, forward, states(3), parse("1 states/us", "speed"), 2))
    assert motion.to_states.tolist() == [0.5, *turns, *turns]
    assert A_LEADS_B[floor(turns[0]) % 4] == state
    assert motion.end_ps == (abs(turns[0] - 0.5) + 9) * US


def test_illegal_jump() -> None:
    """Both boundaries are crossed at one time, half the period after its begin."""
    motion = built(Illegal(time("3 us"), 2), start="10")
    found = crossings(motion)
    assert found.time_ps.tolist() == [1_500_000, 1_500_000, 4_500_000, 4_500_000]
    assert found.number.tolist() == [2, 3, 4, 5]
    assert motion.end_ps == 6 * US


def test_walk() -> None:
    """Runs of 2 to 5 states at 0.5 to 2 states/us, each length and both directions, until 900 states are covered."""
    walk = Walk(states(900), parse("0.5 states/us", "speed"), parse("2 states/us", "speed"), 2, 5)
    motion = built(walk)
    lengths = np.abs(motion.to_states - motion.from_states)[1:]
    assert 900 <= lengths.sum() < 905
    assert set(lengths.tolist()) == {2.0, 3.0, 4.0, 5.0}
    speeds = motion.speed[1:] * US
    assert 0.49 < np.abs(speeds).min() < 0.6
    assert 1.8 < np.abs(speeds).max() < 2.01
    assert 0.4 < np.mean(speeds > 0) < 0.6
    assert built(walk, seed=2).end_ps != motion.end_ps


def test_driven_inputs() -> None:
    """With the shaft moving, it moves on until the input is released, by whole states."""
    still = built(Rest(time("1 us")), Drive("clear", time("3 clocks"), None))
    assert still.drives == (("clear", US, US + 300_000),)
    assert still.end_ps == US + 300_000
    moving = built(Drive("reset", time("2.2 us"), parse("-1 states/us", "speed")))
    assert moving.drives == (("reset", 0, 2_200_000),)
    assert moving.to_states[-1] == 0.5 - 3
    assert moving.end_ps == 3 * US


def test_refusals(monkeypatch: pytest.MonkeyPatch) -> None:
    def refusal(*actions: Action) -> str:
        with pytest.raises(UnfitError) as caught:
            built(*actions)
        return str(caught.value)

    assert refusal(move("50000001 states", "1 states/us")) == "it covers more than 50000000 states"
    endless_walk = Walk(states(10**9), parse("1 states/us", "speed"), parse("1 states/us", "speed"), 1, 8)
    monkeypatch.setattr(tbkit.course, "MOST_PIECES", 10)
    assert refusal(endless_walk) == "it covers more than 50000000 states"
    monkeypatch.undo()
    assert refusal(Dither(states(1), time("0.4 ps"), 1)) == "0.4 ps is no time at all for this decoder"
    assert refusal(Rest(time("1e30 s"))) == f"{10**30} s is longer than 1000000 s, the most that is simulated"
    too_long = "it takes longer than 1000000 s, the most that is simulated"
    assert refusal(*[Rest(time("600000 s"))] * 2) == too_long
    assert refusal(move("1 states", "1e-30 rpm")) == too_long
    assert refusal(move("1 states", "1 rpm", "1e-30 rev/s2")) == too_long
    # Repeats inside repeats soon ask for more than there is memory.
    monkeypatch.setattr(tbkit.course, "MOST_PIECES", 100)
    endless = Repeat(200, (Repeat(200, (Rest(time("0 ns")),)),))
    assert refusal(endless) == "it has more than 100 pieces of motion"
