"""Closed forms of moves, against published values and against another solver."""

from __future__ import annotations

from math import cbrt, sqrt

import numpy as np
import pytest
import ruckig

from tbkit.kinematics import ImpossibleMoveError, Phase, double_s, trapezoid


def time_of(phases: list[Phase]) -> float:
    return sum(phase.time for phase in phases)


def distance_of(phases: list[Phase]) -> float:
    return sum(phase.distance for phase in phases)


def quickest(h: float, v0: float, vmax: float, amax: float, jmax: float) -> float:
    """The least time that the ruckig package finds, to a stop."""
    given = ruckig.InputParameter(1)
    given.current_position, given.current_velocity, given.current_acceleration = [0.0], [v0], [0.0]
    given.target_position, given.target_velocity, given.target_acceleration = [h], [0.0], [0.0]
    given.max_velocity, given.max_acceleration, given.max_jerk = [vmax], [amax], [jmax]
    found = ruckig.Trajectory(1)
    assert ruckig.Ruckig(1).calculate(given, found) == ruckig.Result.Working
    return float(found.duration)


def holds(phases: list[Phase], h: float, v0: float, v1: float, limits: tuple[float, float, float]) -> None:
    """The phases join without a step in speed or (with bounded jerk) acceleration, cover h, and stay inside the limits."""
    vmax, amax, jmax = limits
    v, a = v0, 0.0
    for phase in phases:
        assert phase.v == pytest.approx(v, abs=1e-9 * vmax)
        if jmax:
            assert phase.a == pytest.approx(a, abs=1e-9 * amax)
        else:
            a = phase.a
        v, a = v + phase.time * (a + phase.time * phase.j / 2), a + phase.time * phase.j
        assert abs(phase.j) <= jmax
        assert abs(a) <= amax * (1 + 1e-9)
        assert -1e-9 * vmax <= v <= vmax * (1 + 1e-9)
    assert v == pytest.approx(v1, abs=1e-8 * vmax)
    assert distance_of(phases) == pytest.approx(h, rel=1e-9)


# ---- trapezoids


def test_trapezoid() -> None:
    # C1: closed form (Biagiotti & Melchiorri, Trajectory Planning for Automatic Machines and Robots, 2008, section 3.2).
    up, cruise, down = trapezoid(10, 0, 0, 5, 10)
    assert (up.time, cruise.time, down.time) == (0.5, 1.5, 0.5)
    up, down = trapezoid(2, 0, 0, 5, 10)
    assert (up.time, down.time, down.v) == pytest.approx((0.447214, 0.447214, 4.472136), abs=5e-7)


def test_unlike_ramps() -> None:
    # C2: tech-champion.com: accelerations 2 and 4 over 100 peak at sqrt(2abD/(a+b)) = 16.330 after 8.165 s, then 4.082 s.
    up, down = trapezoid(100, 0, 0, 1e9, 2, 4)
    assert (down.v, up.time, down.time) == pytest.approx((16.330, 8.165, 4.082), abs=5e-4)
    assert down.a == -4


@pytest.mark.parametrize(("h", "seconds"), [(1, 2.0), (2, 3.0)])
def test_boundless_jerk(h: float, seconds: float) -> None:
    # C12: ruckig's tests for boundless jerk, and the closed form.
    assert time_of(trapezoid(h, 0, 0, 1, 1)) == pytest.approx(seconds, rel=1e-12)
    # The jerk-limited move comes to it from above.
    assert double_s(h, 0, 0, 1, 1, 1e6).time == pytest.approx(seconds, abs=2e-6)


# ---- seven phases, from one speed to another


def test_reaches_its_speed() -> None:
    # C3: Biagiotti & Melchiorri 2008, example 3.9.
    move = double_s(10, 1, 0, 5, 10, 30)
    assert (move.ta, move.tv, move.td, move.tj1, move.tj2) == pytest.approx((0.7333, 1.1433, 0.8333, 0.3333, 0.3333), abs=5e-5)
    assert move.time == pytest.approx(2.71, abs=5e-5)
    assert move.time == pytest.approx(quickest(10, 1, 5, 10, 30), rel=1e-9)


def test_does_not_reach_its_speed() -> None:
    # C4: example 3.10.
    move = double_s(10, 1, 0, 10, 10, 30)
    assert (move.ta, move.tv, move.td, move.tj1, move.tj2) == pytest.approx((1.0747, 0, 1.1747, 0.3333, 0.3333), abs=5e-5)
    assert move.top_speed == pytest.approx(8.4136, abs=5e-5)
    assert move.time == pytest.approx(2.24938, abs=5e-5)
    assert move.time == pytest.approx(quickest(10, 1, 10, 10, 30), rel=1e-6)


def test_lowered_acceleration() -> None:
    # C5: example 3.11. Its own numbers (0.4666, 1.4718, 0.2321, 8.6329) follow from a search that lowers the acceleration by 1 %
    # a step; by 0.01 % a step they are these, which the bisection here approaches from the other side.
    move = double_s(10, 7, 0, 10, 10, 30)
    assert (move.ta, move.td, move.tj1) == pytest.approx((0.46882, 1.46427, 0.23440), abs=1e-3)
    assert move.top_speed == pytest.approx(8.64844, abs=1e-3)
    assert move.tv == 0


def test_only_slows_down() -> None:
    # C6: example 3.12.
    move = double_s(10, 7.5, 0, 10, 10, 30)
    assert (move.ta, move.tv, move.td, move.tj2) == pytest.approx((0, 0, 2.6667, 0.0973), abs=5e-5)
    assert move.tj2 * 30 == pytest.approx(2.9190, abs=5e-4)
    # And its mirror image only speeds up.
    mirrored = double_s(10, 0, 7.5, 10, 10, 30)
    assert (mirrored.ta, mirrored.td, mirrored.tj1) == pytest.approx((move.td, 0, move.tj2), rel=1e-12)


def test_triangular_acceleration() -> None:
    # C7: example 3.13, of which only Tj and Ta could be confirmed.
    move = double_s(10, 0, 0, 10, 20, 30)
    assert (move.tj1, move.ta, move.td) == pytest.approx((0.5503, 1.1006, 1.1006), abs=5e-5)


def test_textbook_is_not_the_quickest() -> None:
    # C11, a trap: for examples 3.11 and 3.12 the true least times are 1.78045 and 1.75422 s (ruckig), the textbook takes longer.
    for v0, least, textbook in ((7, 1.78045, 1.93309), (7.5, 1.75422, 2.66667)):
        assert quickest(10, v0, 10, 10, 30) == pytest.approx(least, abs=5e-6)
        assert double_s(10, v0, 0, 10, 10, 30).time == pytest.approx(textbook, abs=1e-4)


# ---- seven phases, from rest to rest


@pytest.mark.parametrize(
    ("h", "vmax", "amax", "jmax", "seconds"),
    [
        # C8: ruckig's tests of known examples.
        (1, 1, 1, 1, 3.1748021039),
        (1, 1, 1, 2, 2.5615528128),
        (1, 0.6, 1, 2, 2.7666666667),
        (1, 0.4, 1, 2, 3.3944271910),
        (400, 1800, 20000, 200000, 0.4119588818),
        # C10: closed form, ruckig and SciPy agree.
        (10, 5, 10, 30, 2.8333333333),
    ],
)
def test_known_times(h: float, vmax: float, amax: float, jmax: float, seconds: float) -> None:
    move = double_s(h, 0, 0, vmax, amax, jmax)
    assert move.time == pytest.approx(seconds, rel=1e-10)
    assert quickest(h, 0, vmax, amax, jmax) == pytest.approx(seconds, rel=1e-9)


@pytest.mark.parametrize(("vmax", "seconds"), [(1, 2.2319602829), (0.6, 2.4103158340)])
def test_known_times_from_a_speed(vmax: float, seconds: float) -> None:
    # C9: ruckig's tests of known examples, from 0.3 over 1 with a 1 and j 2. The examples that begin the wrong way (h = -1)
    # have no counterpart here: a move never turns round.
    assert quickest(1, 0.3, vmax, 1, 2) == pytest.approx(seconds, rel=1e-9)
    # Where the speed is not reached the textbook lowers the acceleration of both ramps, which takes a little longer.
    taken = double_s(1, 0.3, 0, vmax, 1, 2).time
    assert taken == pytest.approx(seconds, rel=1e-9) if vmax < 1 else seconds < taken < 1.02 * seconds


def test_known_time_with_a_slow_cruise() -> None:
    # C9 as well: from 0.2 over 2, no faster than 0.4.
    assert double_s(2, 0.2, 0, 0.4, 1, 2).time == pytest.approx(5.6053274785, rel=1e-10)


def test_parts() -> None:
    # C10: Tj 1/3, Ta 5/6, Tv 7/6.
    move = double_s(10, 0, 0, 5, 10, 30)
    assert (move.tj1, move.ta, move.tv) == pytest.approx((1 / 3, 5 / 6, 7 / 6), rel=1e-12)


def test_which_bounds_are_met() -> None:
    """C13: standard algebra of seven phases: which of the bounds are reached."""
    rng = np.random.default_rng(13)
    seen = set()
    for h, v, a, j in 10 ** rng.uniform(-2, 2, (300, 4)):
        move = double_s(h, 0, 0, v, a, j)
        tj, _ = (sqrt(v / j), 0) if v * j < a * a else (a / j, 0)
        ramp = 2 * tj if v * j < a * a else tj + v / a
        case = "cruise" if h >= v * ramp else "triangle" if h < 2 * a**3 / j**2 else "trapezoid"
        seen.add(case)
        if case == "cruise":
            assert (move.tv >= 0, move.ta) == (True, pytest.approx(ramp))
        else:
            assert move.tv == 0
        if case == "triangle":
            # Tj = cbrt(h/2j), T = 4 Tj.
            assert (move.tj1, move.time) == pytest.approx((cbrt(h / (2 * j)), 4 * cbrt(h / (2 * j))), rel=1e-9)
        if case == "trapezoid":
            assert move.tj1 == pytest.approx(a / j, rel=1e-12)
    assert seen == {"cruise", "triangle", "trapezoid"}


def test_random_times_against_another_solver() -> None:
    """C14: from rest to rest the textbook is the quickest, so the times are those of ruckig."""
    rng = np.random.default_rng(14)
    for h, v, a, j in 10 ** rng.uniform(-2, 2, (200, 4)):
        assert double_s(h, 0, 0, v, a, j).time == pytest.approx(quickest(h, 0, v, a, j), rel=1e-8)


# ---- with any speeds at the ends


def test_random_moves_hold_their_bounds() -> None:
    rng = np.random.default_rng(15)
    done = 0
    for h, v, a, j in 10 ** rng.uniform(-1, 1, (300, 4)):
        v0, v1 = rng.random(2) * v
        # The shortest ramp from one speed to the other: with a whole plateau of acceleration, or without.
        dv = abs(v1 - v0)
        ramp = a / j + dv / a if dv * j >= a * a else 2 * sqrt(dv / j)
        if h < ramp * (v0 + v1) / 2:
            with pytest.raises(ImpossibleMoveError):
                double_s(h, v0, v1, v, a, j)
        else:
            holds(double_s(h, v0, v1, v, a, j).phases(), h, v0, v1, (v, a, j))
            done += 1
        if h < abs(v1**2 - v0**2) / (2 * a):
            with pytest.raises(ImpossibleMoveError):
                trapezoid(h, v0, v1, v, a)
        else:
            holds(trapezoid(h, v0, v1, v, a), h, v0, v1, (v, a, 0.0))
    assert done > 150


def test_impossible_moves() -> None:
    """Too short for the change of speed; the least distance is told, and does."""
    # From 10 to rest with 2: 100 / 4 = 25.
    with pytest.raises(ImpossibleMoveError, match="needs a distance of at least 25") as caught:
        trapezoid(24, 10, 0, 20, 2)
    assert caught.value.least == 25
    assert distance_of(trapezoid(25, 10, 0, 20, 2)) == pytest.approx(25)
    # From 1 to 5 with a 10 and j 30: 4 takes Tj = 1/3 and 4/10 + 1/3 s at a mean speed of 3.
    with pytest.raises(ImpossibleMoveError, match=r"needs a distance of at least 2\.2") as caught:
        double_s(2.1, 1, 5, 5, 10, 30)
    assert caught.value.least == pytest.approx(3 * (0.4 + 1 / 3))
    assert distance_of(double_s(2.2001, 1, 5, 5, 10, 30).phases()) == pytest.approx(2.2001)
