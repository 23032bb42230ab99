"""Lays a profile's actions one after another into a motion.

Positions at the ends of actions are exact fractions of a state, so that any way back ends where it began; the mathematics
inside an action is in floats.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from fractions import Fraction
from math import ceil, cos, pi, sin, sqrt

import numpy as np

from tbkit.contract import A_LEADS_B
from tbkit.encoder import Window
from tbkit.errors import UnfitError
from tbkit.kinematics import ImpossibleMoveError, Phase, double_s, trapezoid
from tbkit.motion import Motion
from tbkit.profile import (
    Action,
    Clicks,
    Dither,
    Drive,
    Home,
    Illegal,
    Move,
    Repeat,
    Rest,
    Return,
    Reverse,
    Sine,
    Table,
    Walk,
)
from tbkit.units import LONGEST_PS, PS_PER_S, Quantity, Scale

#: More states than this in one profile is refused rather than left to eat the memory.
MOST_STATES = 50_000_000
MOST_PIECES = 2_500_000
#: A sine is laid as cubic pieces that stay this near to it, in states.
SINE_ERROR_STATES = 1e-4

_Piece = tuple[int, int, float, float, float, float, float]


def _too_many() -> UnfitError:
    return UnfitError(f"it has more than {MOST_PIECES} pieces of motion")


class Course:
    """Grows piece by piece; ``at`` (states) is exact between actions, ``now_ps`` always."""

    def __init__(
        self, scale: Scale, start: Fraction, start_ps: int, rng: np.random.Generator, marks: Sequence[Window] = ()
    ) -> None:
        self.scale = scale
        self.rng = rng
        self.marks = marks
        self.now_ps = start_ps
        self.at = start
        self.origin = self.at
        self.travel = Fraction(0)
        self.pieces: list[_Piece] = []
        self.drives: list[tuple[str, int, int]] = []
        # A motion always has one piece, so that a first position exists.
        self.stand(0)

    def motion(self) -> Motion:
        columns = list(zip(*self.pieces, strict=True))
        start, duration = (np.array(column, dtype=np.int64) for column in columns[:2])
        first, last, speed, accel, jerk = (np.array(column, dtype=np.float64) for column in columns[2:])
        return Motion(start, duration, first, last, speed, accel, jerk, tuple(self.drives), self.now_ps)

    # --- pieces ----------------------------------------------------------------------------------------------------

    def stand(self, time_ps: int) -> None:
        self._add(time_ps, float(self.at), float(self.at))

    def _add(self, time_ps: int, begin: float, end: float, speed: float = 0.0, accel: float = 0.0, jerk: float = 0.0) -> None:
        if len(self.pieces) >= MOST_PIECES:
            raise _too_many()
        if self.now_ps + time_ps > LONGEST_PS:
            msg = f"it takes longer than {LONGEST_PS // PS_PER_S} s, the most that is simulated"
            raise UnfitError(msg)
        self.pieces.append((self.now_ps, time_ps, begin, end, speed, accel, jerk))
        self.now_ps += time_ps

    def jump(self, by: Fraction) -> None:
        """No time passes: every boundary on the way is passed at once."""
        self._travels(by)
        self._add(0, float(self.at), float(self.at + by))
        self.at += by

    def run(self, by: Fraction, speed: Fraction) -> None:
        """Constant speed."""
        time_ps = max(1, round(abs(by) / speed))
        self.straight(by, time_ps)

    def straight(self, by: Fraction, time_ps: int) -> None:
        """Constant speed, for a given time."""
        self._travels(by)
        end = self.at + by
        self._add(time_ps, float(self.at), float(end), float(by) / time_ps)
        self.at = end

    def curve(self, by: Fraction, phases: Sequence[Phase]) -> None:
        """Phases that cover ``abs(by)``, in its direction."""
        self._travels(by)
        sign, first, end = (1 if by > 0 else -1), float(self.at), self.at + by
        # Ends fall on whole ps, so a phase of less than half a ps has no time, and is left out; the next one covers its way.
        stops_ps = [self.now_ps + round(time) for time in itertools.accumulate(phase.time for phase in phases)]
        covered = itertools.accumulate(phase.distance for phase in phases)
        rows = list(zip(phases, [self.now_ps, *stops_ps], stops_ps, covered, strict=False))
        kept = [row for row in rows if row[2] > row[1]] or [(phases[-1], self.now_ps, self.now_ps + 1, float(abs(by)))]
        place = first
        for n, (phase, _, stop_ps, way) in enumerate(kept):
            target = float(end) if n + 1 == len(kept) else first + sign * min(way, float(abs(by)))
            # Stretched to whole ps by a hair, which leaves the distance exact.
            time_ps = stop_ps - self.now_ps
            k = phase.time / time_ps
            self._add(time_ps, place, target, sign * phase.v * k, sign * phase.a * k**2, sign * phase.j * k**3)
            place = target
        self.at = end

    def hermite(self, places: Sequence[float], speeds: Sequence[float], times_ps: Sequence[int]) -> None:
        """Cubics through ``places`` (states) with ``speeds`` (states/ps) at ``times_ps`` after now; rising or falling each."""
        for n in range(len(places) - 1):
            time = times_ps[n + 1] - times_ps[n]
            by = places[n + 1] - places[n]
            bend = (3 * by / time - 2 * speeds[n] - speeds[n + 1]) / time
            twist = (speeds[n] + speeds[n + 1] - 2 * by / time) / time**2
            self._add(time, places[n], places[n + 1], speeds[n], 2 * bend, 6 * twist)
        self._travels(Fraction(sum(abs(b - a) for a, b in itertools.pairwise(places))))

    def _travels(self, by: Fraction) -> None:
        self.travel += abs(by)
        self._check_travel(self.travel)

    @staticmethod
    def _check_travel(travel: Fraction) -> None:
        if travel > MOST_STATES:
            msg = f"it covers more than {MOST_STATES} states"
            raise UnfitError(msg)

    def _some_time(self, quantity: Quantity) -> int:
        time_ps = self.scale.time_ps(quantity)
        if time_ps <= 0:
            msg = f"{quantity} is no time at all for this decoder"
            raise UnfitError(msg)
        return time_ps

    # --- actions ---------------------------------------------------------------------------------------------------

    def act(self, action: Action) -> None:
        match action:
            case Rest():
                self.stand(self.scale.time_ps(action.time))
            case Repeat():
                for _ in range(action.times):
                    for inner in action.actions:
                        self.act(inner)
            case Move():
                self.move(self.scale.distance_states(action.by), action)
            case Return():
                self.give_back(action)
            case Sine():
                self.sine(action)
            case _:
                self._act_special(action)

    def _act_special(self, action: Action) -> None:
        match action:
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
            case Table():
                self.table(action)
            case Clicks():
                self.clicks(action)
            case Home():
                self.home(action)

    def move(self, by: Fraction, how: Move | Return) -> None:
        """Over ``by``, at constant speed, as a trapezoid (with ``accel``) or with bounded jerk (with ``jerk`` too)."""
        per_time = self.scale.per_time
        if how.accel is None:
            self.run(by, per_time(how.speed))
            return
        top = float(per_time(how.speed))
        ends = (how.start_speed, how.end_speed) if isinstance(how, Move) else (None, None)
        slowing = how.decel if isinstance(how, Move) else None
        v0, v1 = (float(per_time(speed)) if speed else 0.0 for speed in ends)
        if max(v0, v1) > top:
            msg = f"a start or end speed above the speed of {how.speed}"
            raise UnfitError(msg)
        accel, length = float(per_time(how.accel)), float(abs(by))
        try:
            if how.jerk is None:
                phases = trapezoid(length, v0, v1, top, accel, float(per_time(slowing)) if slowing else None)
            else:
                phases = double_s(length, v0, v1, top, accel, float(per_time(how.jerk))).phases()
        except ImpossibleMoveError as error:
            msg = f"a move of {length:g} states is too short to change its speed as told; that takes {error.least:.6g} states"
            raise UnfitError(msg) from error
        self.curve(by, phases)

    def give_back(self, action: Return) -> None:
        if self.origin != self.at:
            self.move(self.origin - self.at, action)

    def sine(self, action: Sine) -> None:
        """To and fro about where it is, from ``first`` to ``last`` frequency, and back to where it began."""
        amplitude = self.scale.distance_states(action.amplitude)
        first, last = (self.scale.rate_per_ps(rate) for rate in (action.first, action.last))
        cycles = action.cycles
        quarter = max(2, ceil(pi / 2 / (384 * SINE_ERROR_STATES / float(amplitude)) ** 0.25))
        # The phase is turns(t) = first·t + (last - first)·t²/(2·time), with cycles whole turns in the whole time.
        if 4 * quarter * cycles > MOST_PIECES:
            raise _too_many()
        self._check_travel(self.travel + 4 * amplitude * cycles)
        time = 2 * cycles / (first + last)
        slope = (last - first) / time
        times, places, speeds = [], [], []
        origin, size = float(self.at), float(amplitude)
        for n in range(4 * quarter * cycles + 1):
            turns = n / (4 * quarter)
            t = 2 * turns / (first + sqrt(first * first + 2 * slope * turns)) if turns else 0.0
            angle = 2 * pi * (n % (4 * quarter)) / (4 * quarter)
            times.append(round(t))
            places.append(origin + size * sin(angle))
            # At the crests the speed is 0 exactly, so that every piece is monotone.
            crest = n % (2 * quarter) == quarter
            speeds.append(0.0 if crest else size * cos(angle) * 2 * pi * (first + slope * t))
        if min(np.diff(times), default=1) <= 0:
            msg = f"{action.last} is too fast for a sine of {action.amplitude}"
            raise UnfitError(msg)
        places[0] = places[-1] = origin
        self.hermite(places, speeds, times)

    def table(self, action: Table) -> None:
        """Straight lines through the points; the first point is where the shaft is now."""
        origin, begin_ps = self.at, self.now_ps
        first_time, first_angle = action.points[0]
        for time, angle in action.points[1:]:
            stop_ps = begin_ps + self.scale.time_ps(time) - self.scale.time_ps(first_time)
            by = origin + self.scale.distance_states(angle) - self.scale.distance_states(first_angle) - self.at
            if by:
                self.straight(by, max(1, stop_ps - self.now_ps))
            else:
                self.stand(max(0, stop_ps - self.now_ps))

    def clicks(self, action: Clicks) -> None:
        """A knob with detents: each click speeds up to the crest and slows down into the next detent, then rests."""
        one, time_ps = self.scale.distance_states(action.click), self._some_time(action.time)
        rest_ps = max(0, self.scale.time_ps(action.every) - time_ps)
        accel = 4 * float(abs(one)) / time_ps**2
        for _ in range(action.times):
            self.curve(one, trapezoid(float(abs(one)), 0.0, 0.0, 2 * float(abs(one)) / time_ps, accel))
            self.stand(rest_ps)

    def home(self, action: Home) -> None:
        """Fast until the index has been seen, stop, back off to before it, and slowly onto it."""
        if not self.marks:
            msg = "it looks for the index; give the encoder one: `encoder: {lines: 1024, index: {width: 90 deg, at: 0 deg}}`"
            raise UnfitError(msg)
        sign = 1 if action.forward else -1
        fast, slow, accel = (self.scale.per_time(q) for q in (action.fast, action.slow, action.accel))
        stopping = Fraction(ceil(fast * fast / (2 * accel)))
        near, far = self._next_mark(sign)
        back = self.scale.distance_states(action.back_off)
        length = abs(near - self.at)
        # Speeds up, meets the mark at speed, stops behind it.
        self._ramps(sign * (length + stopping + 1), fast, accel)
        self._ramps(near - sign * back - self.at, fast, accel)
        # Stops in the mark's middle.
        self.run((near + far) / 2 - self.at, slow)

    def _ramps(self, by: Fraction, speed: Fraction, accel: Fraction) -> None:
        if by:
            self.curve(by, trapezoid(float(abs(by)), 0.0, 0.0, float(speed), float(accel)))

    def _next_mark(self, sign: int) -> tuple[Fraction, Fraction]:
        """The near and the far edge of the next index mark in a direction, not the one the shaft may be in."""
        found = []
        for mark in self.marks:
            near, far = (mark.begin, mark.end) if sign > 0 else (mark.end, mark.begin)
            ahead = (sign * (near - self.at)) % mark.every
            found.append((ahead or Fraction(mark.every), near, far))
        ahead, near, far = min(found)
        start = self.at + sign * ahead
        return start, start + (far - near)

    def dither(self, action: Dither) -> None:
        by, time_ps = self.scale.distance_states(action.over), self._some_time(action.every)
        for _ in range(action.times):
            self.straight(by, time_ps)
            self.straight(-by, time_ps)

    def illegal(self, action: Illegal) -> None:
        half_ps = self._some_time(action.every) // 2
        for _ in range(action.times):
            self.stand(half_ps)
            self.jump(Fraction(2))
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
        accel = None if action.accel is None else self.scale.per_time(action.accel)
        low, ratio = float(slow), float(fast) / float(slow)
        goal = self.travel + travel
        # Said before the runs are drawn, which takes long.
        self._check_travel(goal)
        while self.travel < goal:
            length = int(action.shortest + self.rng.random() * (action.longest - action.shortest + 1))
            by = Fraction(length if self.rng.random() < 0.5 else -length)
            # Speeds are drawn evenly on a logarithmic scale: slow runs would else be rare.
            speed = Fraction(low * ratio ** self.rng.random())
            if accel is None:
                self.run(by, speed)
            else:
                self._ramps(by, speed, accel)


def build_motion(
    actions: Sequence[Action],
    scale: Scale,
    start: Fraction,
    start_ps: int,
    rng: np.random.Generator,
    marks: Sequence[Window] = (),
) -> Motion:
    """Lay the actions one after another, starting at ``start_ps`` and at ``start`` (states).

    Raises:
        UnfitError: an action has no meaning for this decoder or encoder, or cannot be done.
    """
    course = Course(scale, start, start_ps, rng, marks)
    for action in actions:
        course.act(action)
    return course.motion()
