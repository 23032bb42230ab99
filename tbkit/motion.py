"""Motion: a profile's actions turned into shaft position over time, and the times at which it crosses a boundary.

Position is in states; the shaft begins in the middle of its first state. On a boundary the shaft is in the upper state,
so a turn exactly on a boundary enters that state and leaves it again. Time is whole ps at the ends of segments; inside a
segment the position is a polynomial of the local time and floats are used.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import ceil, floor, sqrt

import numpy as np
import numpy.typing as npt

from tbkit.contract import A_LEADS_B
from tbkit.errors import UnfitError
from tbkit.profile import Action, Dither, Drive, Illegal, Move, Repeat, Rest, Reverse, Walk
from tbkit.units import LONGEST_PS, PS_PER_S, Quantity, Scale

Int64s = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]

#: More states or pieces of motion than this in one profile are refused rather than left to eat the memory.
MOST_STATES = 50_000_000
MOST_SEGMENTS = 2_500_000


@dataclass(frozen=True, slots=True)
class Motion:
    """Shaft position in states, as quadratic segments one after another.

    Attributes:
        start_ps: int64[n], start of each segment.
        duration_ps: int64[n]; 0 is a jump.
        from_states, to_states: float64[n], positions at its ends.
        speed: float64[n], states/ps at its start.
        accel: float64[n], states/ps².
        drives: (signal, start_ps, end_ps) of the inputs acted on.
        end_ps: end of the motion.
    """

    start_ps: Int64s
    duration_ps: Int64s
    from_states: Floats
    to_states: Floats
    speed: Floats
    accel: Floats
    drives: tuple[tuple[str, int, int], ...]
    end_ps: int

    @property
    def first_states(self) -> float:
        return float(self.from_states[0])


class _Path:
    """Grows segment by segment; position is exact."""

    def __init__(self, scale: Scale, start_state: str, start_ps: int, rng: np.random.Generator) -> None:
        self.scale = scale
        self.rng = rng
        self.now_ps = start_ps
        self.at = A_LEADS_B.index(start_state) + Fraction(1, 2)
        self.segments: list[tuple[int, int, float, float, float, float]] = []
        self.drives: list[tuple[str, int, int]] = []
        self.travel = Fraction(0)
        # A motion always has one segment, so that a first position exists.
        self.stand(0)

    def stand(self, time_ps: int) -> None:
        self._add(time_ps, self.at, 0.0, 0.0)

    def _add(self, time_ps: int, end: Fraction, speed: float, accel: float) -> None:
        if len(self.segments) >= MOST_SEGMENTS:
            msg = f"it has more than {MOST_SEGMENTS} pieces of motion"
            raise UnfitError(msg)
        if self.now_ps + time_ps > LONGEST_PS:
            msg = f"it takes longer than {LONGEST_PS // PS_PER_S} s, the most that is simulated"
            raise UnfitError(msg)
        self.segments.append((self.now_ps, time_ps, float(self.at), float(end), speed, accel))
        self.at, self.now_ps = end, self.now_ps + time_ps

    def piece(self, by: Fraction, time_ps: int, speed: float, accel: float) -> None:
        """A segment that covers ``by`` in ``time_ps`` with the given start speed and acceleration."""
        self.travel += abs(by)
        self._check_travel(self.travel)
        self._add(time_ps, self.at + by, speed, accel)

    @staticmethod
    def _check_travel(travel: Fraction) -> None:
        if travel > MOST_STATES:
            msg = f"it covers more than {MOST_STATES} states"
            raise UnfitError(msg)

    def run(self, by: Fraction, speed: Fraction) -> None:
        """Constant speed."""
        time_ps = max(1, round(abs(by) / speed))
        self.piece(by, time_ps, float(by) / time_ps, 0.0)

    def trapezoid(self, by: Fraction, speed: Fraction, accel: Fraction) -> None:
        """Rest to rest with bounded acceleration; triangular when the distance is too short for the speed.

        Standard closed form (Biagiotti & Melchiorri 2008, section 3.2): ramps of v/a, or of sqrt(h/a).
        """
        sign, length = (1 if by > 0 else -1), abs(by)
        if length * accel <= speed * speed:
            ramp_ps, ramp_by, cruise = max(1, round(sqrt(length / accel))), length / 2, Fraction(0)
        else:
            ramp_ps, ramp_by = max(1, round(speed / accel)), speed * speed / accel / 2
            cruise = length - 2 * ramp_by
        # The ramp's time is rounded to whole ps, so its acceleration is taken from the time: the distance stays exact.
        slope = 2 * float(ramp_by) / ramp_ps**2
        self.piece(sign * ramp_by, ramp_ps, 0.0, sign * slope)
        if cruise:
            self.run(sign * cruise, speed)
        self.piece(sign * ramp_by, ramp_ps, sign * slope * ramp_ps, -sign * slope)

    def act(self, action: Action) -> None:
        match action:
            case Rest():
                self.stand(self.scale.time_ps(action.time))
            case Move():
                self.move(action)
            case Reverse():
                self.reverse(action)
            case Dither():
                self.dither(action)
            case Illegal():
                self.illegal(action)
            case Walk():
                self.walk(action)
            case Drive():
                self.drive(action)
            case Repeat():
                for _ in range(action.times):
                    for inner in action.actions:
                        self.act(inner)

    def move(self, action: Move) -> None:
        by, speed = self.scale.distance_states(action.by), self.scale.per_time(action.speed)
        if action.accel is None:
            self.run(by, speed)
        else:
            self.trapezoid(by, speed, self.scale.per_time(action.accel))

    def dither(self, action: Dither) -> None:
        by, time_ps = self.scale.distance_states(action.over), self._some_time(action.every)
        for _ in range(action.times):
            self.piece(by, time_ps, float(by) / time_ps, 0.0)
            self.piece(-by, time_ps, -float(by) / time_ps, 0.0)

    def illegal(self, action: Illegal) -> None:
        half_ps = self._some_time(action.every) // 2
        for _ in range(action.times):
            self.stand(half_ps)
            self.piece(Fraction(2), 0, 0.0, 0.0)
            self.stand(half_ps)

    def drive(self, action: Drive) -> None:
        begin_ps, time_ps = self.now_ps, self._some_time(action.time)
        if action.moving is None:
            self.stand(time_ps)
        else:
            speed = self.scale.per_time(action.moving)
            # Whole states, so that the motion still ends in the middle of a state, and not before the input is released.
            self.run(Fraction(ceil(abs(speed) * time_ps)) * (1 if speed > 0 else -1), abs(speed))
        self.drives.append((action.signal, begin_ps, begin_ps + time_ps))

    def _some_time(self, quantity: Quantity) -> int:
        time_ps = self.scale.time_ps(quantity)
        if time_ps <= 0:
            msg = f"{quantity} is no time at all for this decoder"
            raise UnfitError(msg)
        return time_ps

    def reverse(self, action: Reverse) -> None:
        sign = 1 if action.forward else -1
        run, speed = self.scale.distance_states(action.run), self.scale.per_time(action.speed)
        goal = A_LEADS_B.index(action.state) + Fraction(1, 2)
        there = self.at + sign * run
        # On to the next middle of that state.
        there += sign * ((sign * (goal - there)) % 4)
        self.run(there - self.at, speed)
        for n in range(action.times):
            self.run(-sign * run, speed)
            if n + 1 < action.times:
                self.run(sign * run, speed)

    def walk(self, action: Walk) -> None:
        travel = self.scale.distance_states(action.travel)
        slow, fast = self.scale.per_time(action.slow), self.scale.per_time(action.fast)
        low, ratio = float(slow), float(fast) / float(slow)
        goal = self.travel + travel
        # Said before the runs are drawn, which takes long.
        self._check_travel(goal)
        while self.travel < goal:
            length = int(action.shortest + self.rng.random() * (action.longest - action.shortest + 1))
            sign = 1 if self.rng.random() < 0.5 else -1
            # Speeds are drawn evenly on a logarithmic scale: slow runs would else be rare.
            self.run(Fraction(sign * length), Fraction(low * ratio ** self.rng.random()))


def build_motion(actions: tuple[Action, ...], scale: Scale, start_state: str, start_ps: int, rng: np.random.Generator) -> Motion:
    """Lay the actions one after another, starting at ``start_ps`` in the middle of ``start_state``.

    Raises:
        UnfitError: an action has no meaning for this decoder or encoder.
    """
    path = _Path(scale, start_state, start_ps, rng)
    for action in actions:
        path.act(action)
    start, duration, first, last, speed, accel = zip(*path.segments, strict=True)
    return Motion(
        np.array(start, dtype=np.int64),
        np.array(duration, dtype=np.int64),
        np.array(first),
        np.array(last),
        np.array(speed),
        np.array(accel),
        tuple(path.drives),
        path.now_ps,
    )


@dataclass(frozen=True, slots=True)
class Crossings:
    """Boundary crossings in order of time.

    Attributes:
        time_ps: int64[n].
        number: int64[n], which boundary: position ``offset + pitch * number``.
        up: bool[n], whether it was crossed towards larger positions.
    """

    time_ps: Int64s
    number: Int64s
    up: npt.NDArray[np.bool_]


def crossings(motion: Motion, offset: float = 0.0, pitch: float = 1.0) -> Crossings:
    """When the shaft crosses the positions ``offset + pitch * n`` for every whole n, in states.

    Every segment is monotone (a move starts or ends at rest), so each boundary is crossed at most once in it, at the root
    of a quadratic; the form 2d/(v + sqrt(v² + 2ad)) loses no digits.
    """
    first = np.floor((motion.from_states - offset) / pitch).astype(np.int64)
    last = np.floor((motion.to_states - offset) / pitch).astype(np.int64)
    how_many = np.abs(last - first)
    segment = np.repeat(np.arange(len(first)), how_many)
    nth = np.arange(len(segment)) - np.repeat(np.cumsum(how_many) - how_many, how_many)
    up = (last > first)[segment]
    number = np.where(up, first[segment] + 1 + nth, first[segment] - nth)
    distance = offset + pitch * number - motion.from_states[segment]
    speed, accel = motion.speed[segment], motion.accel[segment]
    duration = motion.duration_ps[segment]
    sign = np.where(up, 1.0, -1.0)
    root = np.sqrt(np.maximum(speed * speed + 2 * accel * distance, 0.0))
    with np.errstate(divide="ignore", invalid="ignore"):
        local = np.where(duration > 0, 2 * distance / (speed + sign * root), 0.0)
    local = np.clip(np.nan_to_num(local), 0, duration)
    time_ps = motion.start_ps[segment] + np.rint(local).astype(np.int64)
    return Crossings(time_ps, number, up)


def state_at(position_states: float) -> str:
    """The state AB at a position."""
    return A_LEADS_B[floor(position_states) % 4]
