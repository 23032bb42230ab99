"""Closed forms of moves with bounded speed, acceleration and jerk.

Pure mathematics in whatever units the caller uses, as long as they agree. A move is a list of phases, one after another,
each with constant jerk. Formulas: Biagiotti & Melchiorri, *Trajectory Planning for Automatic Machines and Robots*,
Springer 2008, section 3.2 (trapezoid) and 3.4 (double S); the step factor of their search is replaced by bisection.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

_BISECTIONS = 80


class ImpossibleMoveError(ValueError):
    """The distance is too short for the change of speed; ``least`` is how long it must be."""

    def __init__(self, least: float) -> None:
        self.least = least
        super().__init__(f"needs a distance of at least {least:g}")


@dataclass(frozen=True, slots=True)
class Phase:
    """``time`` long, from speed ``v`` and acceleration ``a`` with constant jerk ``j``."""

    time: float
    v: float
    a: float
    j: float

    @property
    def distance(self) -> float:
        return self.time * (self.v + self.time * (self.a / 2 + self.time * self.j / 6))


def trapezoid(h: float, v0: float, v1: float, vmax: float, amax: float, dmax: float | None = None) -> list[Phase]:
    """From speed ``v0`` to ``v1`` over the distance ``h`` > 0, no faster than ``vmax``; triangular where h is short.

    It slows down with ``dmax`` (None: as it speeds up).

    Raises:
        ImpossibleMoveError: h is too short to get from v0 to v1.
    """
    dmax = amax if dmax is None else dmax
    least = abs(v1 * v1 - v0 * v0) / (2 * (amax if v1 > v0 else dmax))
    if h < least:
        raise ImpossibleMoveError(least)
    peak = sqrt((2 * h * amax * dmax + dmax * v0 * v0 + amax * v1 * v1) / (amax + dmax))
    top = min(vmax, peak)
    up, down = (top - v0) / amax, (top - v1) / dmax
    ramps = (top * top - v0 * v0) / (2 * amax) + (top * top - v1 * v1) / (2 * dmax)
    cruise = (h - ramps) / top if peak > vmax else 0.0
    return _phases([(up, v0, amax, 0.0), (cruise, top, 0.0, 0.0), (down, top, -dmax, 0.0)])


@dataclass(frozen=True, slots=True)
class DoubleS:
    """Times of a seven-phase move: ``ta`` speeding up, ``tv`` at speed, ``td`` slowing down, ``tj1``/``tj2`` of jerk in each."""

    ta: float
    tv: float
    td: float
    tj1: float
    tj2: float
    v0: float
    v1: float
    jmax: float

    @property
    def time(self) -> float:
        return self.ta + self.tv + self.td

    @property
    def top_speed(self) -> float:
        return self.v0 + (self.ta - self.tj1) * self.jmax * self.tj1

    def phases(self) -> list[Phase]:
        j, up, down = self.jmax, self.jmax * self.tj1, self.jmax * self.tj2
        top = self.top_speed
        return _phases(
            [
                (self.tj1, self.v0, 0.0, j),
                (self.ta - 2 * self.tj1, self.v0 + up * self.tj1 / 2, up, 0.0),
                (self.tj1, top - up * self.tj1 / 2, up, -j),
                (self.tv, top, 0.0, 0.0),
                (self.tj2, top, 0.0, -j),
                (self.td - 2 * self.tj2, top - down * self.tj2 / 2, -down, 0.0),
                (self.tj2, self.v1 + down * self.tj2 / 2, -down, j),
            ]
        )


def double_s(h: float, v0: float, v1: float, vmax: float, amax: float, jmax: float) -> DoubleS:
    """Seven phases from speed ``v0`` to ``v1`` over ``h`` > 0, with bounded speed, acceleration and jerk.

    Where the speed cannot be reached the acceleration is lowered until both ramps fit, as the source does; with speeds at
    the ends that are not 0 this is not always the quickest move.

    Raises:
        ImpossibleMoveError: h is too short to get from v0 to v1 under these bounds.
    """
    least = _least_distance(v0, v1, amax, jmax)
    if h < least * (1 - 1e-12):
        raise ImpossibleMoveError(least)
    tj1, ta = _ramp(vmax - v0, amax, jmax)
    tj2, td = _ramp(vmax - v1, amax, jmax)
    tv = h / vmax - ta / 2 * (1 + v0 / vmax) - td / 2 * (1 + v1 / vmax)
    if tv >= 0:
        return DoubleS(ta, tv, td, tj1, tj2, v0, v1, jmax)

    def times(a: float) -> tuple[float, float, float]:
        tj = a / jmax
        root = sqrt(a**4 / jmax**2 + 2 * (v0 * v0 + v1 * v1) + a * (4 * h - 2 * a / jmax * (v0 + v1)))
        return tj, (a * tj - 2 * v0 + root) / (2 * a), (a * tj - 2 * v1 + root) / (2 * a)

    def fits(a: float) -> bool:
        tj, up, down = times(a)
        return up >= 2 * tj and down >= 2 * tj

    a = amax
    if not fits(a):
        low, high = 0.0, amax
        for _ in range(_BISECTIONS):
            middle = (low + high) / 2
            _, up, down = times(middle)
            # Below zero one ramp has gone altogether, which a lower acceleration does not bring back.
            if up < 0 or down < 0:
                return _one_ramp(h, v0, v1, jmax)
            low, high = (middle, high) if fits(middle) else (low, middle)
        a = low
    tj, ta, td = times(a)
    if ta < 0 or td < 0:
        return _one_ramp(h, v0, v1, jmax)
    return DoubleS(ta, 0.0, td, tj, tj, v0, v1, jmax)


def _ramp(dv: float, amax: float, jmax: float) -> tuple[float, float]:
    """(time of jerk, whole time) of a change of speed by ``dv`` >= 0."""
    if dv * jmax < amax * amax:
        tj = sqrt(dv / jmax)
        return tj, 2 * tj
    return amax / jmax, amax / jmax + dv / amax


def _least_distance(v0: float, v1: float, amax: float, jmax: float) -> float:
    _, time = _ramp(abs(v1 - v0), amax, jmax)
    return time * (v0 + v1) / 2


def _one_ramp(h: float, v0: float, v1: float, jmax: float) -> DoubleS:
    """Only slowing down (or speeding up), in the time in which the mean of both speeds covers ``h``."""
    time = 2 * h / (v0 + v1)
    inside = jmax * (jmax * h * h - (v0 + v1) ** 2 * abs(v1 - v0))
    tj = (jmax * h - sqrt(max(inside, 0.0))) / (jmax * (v0 + v1))
    if v1 < v0:
        return DoubleS(0.0, 0.0, time, 0.0, tj, v0, v1, jmax)
    return DoubleS(time, 0.0, 0.0, tj, 0.0, v0, v1, jmax)


def _phases(rows: list[tuple[float, float, float, float]]) -> list[Phase]:
    return [Phase(*row) for row in rows if row[0] > 0]
