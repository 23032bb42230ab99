"""Motion: the shaft's position over time, and the times at which it passes given places.

Position is in states and time in whole picoseconds at the ends of pieces; inside a piece the position is a cubic of the
local time, and floats are used. Every piece is monotone. A place is passed on reaching it upwards and on leaving it
downwards: on a boundary the shaft is in the upper state, so a turn exactly on a boundary enters that state and leaves it.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
import numpy.typing as npt

Int64s = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]
Bools = npt.NDArray[np.bool_]

#: Crossings solved at a time: bounds the memory of what is in between.
CHUNK = 1 << 16
#: A piece with this many crossings is solved by itself, which saves much.
LONG_PIECE = 4096
#: Points of the table that gives the first guess in a long curved piece.
GRID = 1025
_MOST_STEPS = 80
_NEAR_PS = 0.01


@dataclass(frozen=True, slots=True)
class Motion:
    """Shaft position in states, as monotone cubic pieces one after another.

    Attributes:
        start_ps: int64[n], start of each piece.
        duration_ps: int64[n]; 0 is a jump.
        from_states, to_states: float64[n], positions at its ends.
        speed: float64[n], states/ps at its start.
        accel: float64[n], states/ps² at its start.
        jerk: float64[n], states/ps³.
        drives: (signal, start_ps, end_ps) of the inputs acted on.
        end_ps: end of the motion.
    """

    start_ps: Int64s
    duration_ps: Int64s
    from_states: Floats
    to_states: Floats
    speed: Floats
    accel: Floats
    jerk: Floats
    drives: tuple[tuple[str, int, int], ...]
    end_ps: int

    @property
    def first_states(self) -> float:
        return float(self.from_states[0])


@dataclass(frozen=True, slots=True)
class Places:
    """Places at ``offset + pitch·n + error(n)`` states for every whole n, in rising order.

    A reader that turns only after ``hysteresis`` states passes each place half of it later in either direction.
    ``jitter`` (given how many) is added each time a place is passed, in states. It moves the passing within its piece of
    motion only, and never before the one before it.
    """

    offset: float = 0.0
    pitch: float = 1.0
    error: Callable[[Int64s], Floats] | None = None
    hysteresis: float = 0.0
    jitter: Callable[[int], Floats] | None = None

    def at(self, number: Int64s) -> Floats:
        place: Floats = self.offset + self.pitch * number.astype(np.float64)
        return place if self.error is None else place + self.error(number)

    def below(self, position: Floats) -> Int64s:
        """The number of the last place at or below each position."""
        number = np.floor((position - self.offset) / self.pitch).astype(np.int64)
        if self.error is not None:
            # Errors may be many pitches, but change slowly: a few steps are enough.
            while (low := self.at(number + 1) <= position).any():
                number += low
            while (high := self.at(number) > position).any():
                number -= high
        return number


@dataclass(frozen=True, slots=True)
class Crossings:
    """Places passed, in order of time.

    Attributes:
        time_ps: int64[n].
        number: int64[n], which place.
        up: bool[n], whether it was passed towards larger positions.
    """

    time_ps: Int64s
    number: Int64s
    up: Bools


def crossings(motion: Motion, places: Places | None = None) -> Crossings:
    """When the shaft passes the places; without any, the boundaries between states."""
    places = places or Places()
    up = motion.to_states > motion.from_states
    half = places.hysteresis / 2
    reach = places.below(np.where(up, motion.to_states - half, motion.to_states + half))
    first = places.below(motion.from_states[:1])
    if half:
        # What has been passed depends on all that went before: a play of `hysteresis` states.
        at, passed = int(first[0]), []
        for goes_up, place in zip(up.tolist(), reach.tolist(), strict=True):
            at = max(at, place) if goes_up else min(at, place)
            passed.append(at)
        reach = np.array(passed, dtype=np.int64)
    before = np.concatenate([first, reach[:-1]])
    how_many = np.abs(reach - before)
    ends = np.cumsum(how_many)
    total = int(ends[-1])
    found = Crossings(np.empty(total, np.int64), np.empty(total, np.int64), np.empty(total, np.bool_))
    for low, high, piece in _batches(how_many, ends):
        nth = np.arange(low, high)
        # One long piece, whose numbers stay scalars, or many short ones, each crossing with its own.
        of: Any = np.searchsorted(ends, nth, side="right") if piece is None else piece
        goes_up = up[of]
        left = ends[of] - nth  # places still to pass in this piece, this one included
        number = np.where(goes_up, reach[of] - left + 1, reach[of] + left)
        sign = np.where(goes_up, 1.0, -1.0)
        distance = sign * (places.at(number) - motion.from_states[of]) + half
        if places.jitter is not None:
            distance += places.jitter(high - low)
        whole = sign * (motion.to_states[of] - motion.from_states[of])
        curve = _Curve(
            whole,
            motion.duration_ps[of].astype(np.float64),
            sign * motion.speed[of],
            sign * motion.accel[of],
            sign * motion.jerk[of],
        )
        local = _solve(np.clip(distance, 0.0, whole), curve)
        found.time_ps[low:high] = motion.start_ps[of] + np.rint(local).astype(np.int64)
        found.number[low:high] = number
        found.up[low:high] = goes_up
    if places.jitter is not None:
        np.maximum.accumulate(found.time_ps, out=found.time_ps)
    return found


def _batches(how_many: Int64s, ends: Int64s) -> Iterator[tuple[int, int, int | None]]:
    """(low, high, piece) of the crossings to solve together: parts of a long piece, or of many short ones (None)."""
    done = 0
    for piece in [*np.flatnonzero(how_many >= LONG_PIECE).tolist(), None]:
        begin = int(ends[-1] if piece is None else ends[piece] - how_many[piece])
        for low in range(done, begin, CHUNK):
            yield low, min(low + CHUNK, begin), None
        if piece is not None:
            done = int(ends[piece])
            for low in range(begin, done, CHUNK):
                yield low, min(low + CHUNK, done), piece


@dataclass(frozen=True, slots=True)
class _Curve:
    """Rising cubics ``v·t + a·t²/2 + j·t³/6`` that reach ``whole`` after ``duration``; scalars or one for each crossing."""

    whole: Any
    duration: Any
    v: Any
    a: Any
    j: Any

    def part(self, chosen: Bools) -> _Curve:
        """The curves of some crossings."""
        if np.ndim(self.v) == 0:
            return self
        return _Curve(*(getattr(self, field.name)[chosen] for field in fields(self)))


def _solve(distance: Floats, curve: _Curve) -> Floats:
    """The local time at which each curve has risen by ``distance``."""
    if np.ndim(curve.j) == 0 and curve.j and curve.duration > 0:
        grid = np.linspace(0.0, curve.duration, GRID)
        heights = grid * (curve.v + grid * (curve.a / 2 + grid * curve.j / 6))
        return _newton(distance, curve, np.interp(distance, heights, grid))
    with np.errstate(divide="ignore", invalid="ignore"):
        # The form 2d/(v + sqrt(v² + 2ad)) loses no digits, and is exact without jerk.
        root = np.sqrt(np.maximum(curve.v * curve.v + 2 * curve.a * distance, 0.0))
        time: Floats = np.where(curve.duration > 0, 2 * distance / (curve.v + root), 0.0)
    time = np.clip(np.nan_to_num(time, posinf=np.inf), 0.0, curve.duration)
    if np.ndim(curve.j):
        curved = (curve.j != 0) & (curve.duration > 0)
        if curved.any():
            bent = curve.part(curved)
            share = np.divide(distance[curved], bent.whole, out=np.zeros(len(bent.whole)), where=bent.whole > 0)
            # Starting from rest the cubic term rules; otherwise a straight line is near enough.
            guess = bent.duration * np.where(bent.v * bent.duration < 0.1 * bent.whole, np.cbrt(share), share)
            time[curved] = _newton(distance[curved], bent, guess)
    return time


def _newton(distance: Floats, curve: _Curve, time: Floats) -> Floats:
    """Newton's method inside a bracket that halves where a step would leave it; to a hundredth of a ps."""
    low, high = np.zeros_like(distance), np.zeros_like(distance) + curve.duration
    result, index = time.copy(), np.arange(len(time))
    for _ in range(_MOST_STEPS):
        off = time * (curve.v + time * (curve.a / 2 + time * (curve.j / 6))) - distance
        slope = curve.v + time * (curve.a + time * (curve.j / 2))
        above = off > 0
        np.copyto(high, time, where=above)
        np.copyto(low, time, where=~above)
        with np.errstate(divide="ignore", invalid="ignore"):
            following = time - off / slope
        bad = ~((following >= low) & (following <= high))
        if bad.any():
            following[bad] = (low[bad] + high[bad]) / 2
        going = np.abs(following - time) > _NEAR_PS
        result[index] = following
        if not going.any():
            break
        index, curve = index[going], curve.part(going)
        time, distance, low, high = following[going], distance[going], low[going], high[going]
    return result
