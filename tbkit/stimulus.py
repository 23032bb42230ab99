"""The stimulus: one profile compiled for one decoder, ready to be played.

Time is counted in clock periods: period k ends at the active clock edge at (k+1)·P, which sees the levels of its end.
Toggles keep 2 ps away from active edges, so nothing ever changes in the instant in which it is sampled.
"""

from __future__ import annotations

import zlib
from dataclasses import dataclass, replace

import numpy as np

from tbkit.contract import Contract
from tbkit.disturb import disturb
from tbkit.encoder import LINES, IdealEdges, Line, encode
from tbkit.errors import UnfitError
from tbkit.motion import Int64s, build_motion
from tbkit.profile import Profile
from tbkit.units import Scale

#: Bits of a word's levels, in this order; the bench template uses the same.
SIGNALS = (*LINES, "reset", "clear")
CLEARANCE_PS = 2
#: At most this many clock periods are simulated for one profile.
MOST_PERIODS = 2_000_000_000
#: A word holds its wait in 48 bits.
LONGEST_WAIT_PS = (1 << 48) - 1


@dataclass(frozen=True, slots=True)
class Unfold:
    """Turns played time back into the profile's own time: from ``played_ps[i]`` on, add ``cut_ps[i]``."""

    played_ps: Int64s
    cut_ps: Int64s

    def __call__(self, time_ps: int) -> int:
        return time_ps + int(self.cut_ps[np.searchsorted(self.played_ps, time_ps, side="right") - 1])


@dataclass(frozen=True, slots=True)
class Stimulus:
    """Everything that is played for one profile; times are as played (folded).

    Attributes:
        name, seed: what to repeat it by.
        period_ps: clock period P.
        lines: A, B and index.
        drives: the decoder's inputs ``reset`` and ``clear``.
        ideal: the true edges (``ledger`` times as played).
        begin_ps: when the motion begins.
        lost_ps: from when the lines no longer tell where the shaft is, or None.
        periods: how many clock periods are played.
        power_up: the decoder must come fresh from power-up.
    """

    name: str
    seed: int
    period_ps: int
    lines: dict[str, Line]
    drives: dict[str, Line]
    ideal: IdealEdges
    begin_ps: int
    lost_ps: int | None
    periods: int
    unfold: Unfold
    power_up: bool

    @property
    def edges(self) -> int:
        """Edges driven on A, B and index."""
        return sum(len(line.toggles_ps) for line in self.lines.values())

    def words(self) -> np.ndarray[tuple[int], np.dtype[np.uint64]]:
        """What the player reads: 64-bit words, the wait before it in ps (48 bits) and the levels after it (16 bits).

        The first word holds the levels to begin with; the last one waits for the end.
        """
        lines = {**self.lines, **self.drives}
        times = [lines[name].toggles_ps for name in SIGNALS]
        bits = np.repeat(1 << np.arange(len(SIGNALS), dtype=np.int64), [len(t) for t in times])
        time_ps = np.concatenate(times)
        order = np.argsort(time_ps, kind="stable")
        time_ps, bits = time_ps[order], bits[order]
        first = sum(lines[name].first << bit for bit, name in enumerate(SIGNALS))
        levels = first ^ np.bitwise_xor.accumulate(bits) if len(bits) else bits
        last = np.append(time_ps[1:] != time_ps[:-1], True)[: len(time_ps)]
        time_ps, levels = time_ps[last], levels[last]
        end_ps = self.periods * self.period_ps
        time_ps = np.concatenate([[0], time_ps, [end_ps]])
        levels = np.concatenate([[first], levels, levels[-1:] if len(levels) else [first]])
        waits = np.diff(time_ps, prepend=0)
        return waits.astype(np.uint64) << np.uint64(16) | levels.astype(np.uint64)


def generator(seed: int, name: str, stream: str) -> np.random.Generator:
    """A random generator of its own for each (seed, profile, use)."""
    return np.random.Generator(np.random.PCG64([seed, zlib.crc32(name.encode()), zlib.crc32(stream.encode())]))


def _clear_of_clock(line: Line, period_ps: int) -> Line:
    """Keep :data:`CLEARANCE_PS` from active edges, within the same clock period; toggles that meet cancel out."""
    phase = line.toggles_ps % period_ps
    moved = line.toggles_ps - phase + np.clip(phase, CLEARANCE_PS, period_ps - CLEARANCE_PS)
    times, how_many = np.unique(moved, return_counts=True)
    return Line(line.first, times[how_many % 2 == 1])


def _fold(times_ps: list[Int64s], quiet_ps: int, period_ps: int) -> Unfold:
    """Shorten every gap longer than ``quiet_ps`` by whole clock periods; the map from played time to the profile's."""
    events = np.unique(np.concatenate([np.zeros(1, dtype=np.int64), *times_ps]))
    gaps = np.diff(events)
    cuts = np.maximum(gaps - quiet_ps, 0) // period_ps * period_ps
    total = np.concatenate([[0], np.cumsum(cuts)])
    return Unfold(events - total, total)


def _folded(times_ps: Int64s, unfold: Unfold) -> Int64s:
    """Times of the profile as played. A time in a gap that was cut lands at the latest just before the gap's end."""
    real = unfold.played_ps + unfold.cut_ps
    at = np.searchsorted(real, times_ps, side="right") - 1
    played = times_ps - unfold.cut_ps[at]
    ceiling = np.append(unfold.played_ps[1:] - 1, np.iinfo(np.int64).max)[at]
    folded: Int64s = np.minimum(played, ceiling)
    return folded


def compile_stimulus(profile: Profile, contract: Contract, seed: int, most_periods: int = MOST_PERIODS) -> Stimulus:
    """Compile ``profile`` for a decoder: reset, settle, then the motion, then rest.

    A profile that takes more than ``most_periods`` clock periods is refused.

    Raises:
        UnfitError: the profile needs something the decoder does not have.
    """
    _check_needs(profile, contract)
    seed = profile.seed if profile.seed is not None else seed
    scale = Scale.of(contract, profile.encoder.lines)
    period_ps = contract.clock.period_ps
    reset_clocks = contract.reset.clocks if contract.reset else 0
    settle = contract.settle_clocks
    # Not a whole number of half periods, so that edges of simple motions fall inside a clock period.
    begin_ps = (reset_clocks + 1 + settle) * period_ps + 3 * period_ps // 8
    motion = build_motion(profile.motion, scale, profile.encoder.start, begin_ps, generator(seed, profile.name, "motion"))
    # A state takes a clock at least, or nothing could be counted: said before the edges are made, which take memory.
    states = int(np.abs(motion.to_states - motion.from_states).sum())
    if states > most_periods:
        raise _too_long(states, most_periods)
    ideal = encode(motion, profile.encoder)
    generators = [
        generator(seed, profile.name, f"{n} {type(disturbance).__name__}") for n, disturbance in enumerate(profile.disturb)
    ]
    lines, lost_ps = disturb(ideal.lines, profile.disturb, scale, (begin_ps, motion.end_ps), generators)
    drives = {"reset": Line(0, np.zeros(0, dtype=np.int64)), "clear": Line(0, np.zeros(0, dtype=np.int64))}
    if contract.reset:
        drives["reset"] = Line(1, np.array([reset_clocks * period_ps + period_ps // 2], dtype=np.int64))
    ports = {"reset": contract.reset, "clear": contract.clear_error}
    for signal, from_ps, to_ps in motion.drives:
        if ports[signal] is None:
            msg = f"it drives the {signal} input, which this decoder does not have"
            raise UnfitError(msg)
        line = drives[signal]
        drives[signal] = Line(line.first, np.append(line.toggles_ps, [from_ps, to_ps]))

    lines = {name: _clear_of_clock(line, period_ps) for name, line in lines.items()}
    drives = {name: _clear_of_clock(line, period_ps) for name, line in drives.items()}
    moving = [line.toggles_ps for line in (*lines.values(), *drives.values())]
    # Twice the time to come to rest: the first half ends all activity, the second shows that it has ended.
    quiet_ps = 2 * (settle + 8) * period_ps if not contract.timers else np.iinfo(np.int64).max
    unfold = _fold([*moving, np.array([begin_ps], dtype=np.int64)], quiet_ps, period_ps)
    end_ps = int(_folded(np.array([motion.end_ps]), unfold)[0])
    last_ps = max([end_ps, *(int(unfold.played_ps[-1]),)])
    periods = last_ps // period_ps + 2 * settle + 8
    if periods > most_periods:
        raise _too_long(periods, most_periods)
    if np.diff(unfold.played_ps, append=periods * period_ps).max() > LONGEST_WAIT_PS:
        msg = f"nothing moves for more than {LONGEST_WAIT_PS} ps, the longest wait that can be played"
        raise UnfitError(msg)

    def play(line: Line) -> Line:
        return Line(line.first, _folded(line.toggles_ps, unfold))

    return Stimulus(
        profile.name,
        seed,
        period_ps,
        {name: play(line) for name, line in lines.items()},
        {name: play(line) for name, line in drives.items()},
        replace(ideal, ledger=replace(ideal.ledger, time_ps=_folded(ideal.ledger.time_ps, unfold))),
        int(_folded(np.array([begin_ps]), unfold)[0]),
        None if lost_ps is None else int(_folded(np.array([lost_ps]), unfold)[0]),
        periods,
        unfold,
        profile.power_up,
    )


def _too_long(periods: int, most: int) -> UnfitError:
    return UnfitError(f"it would take {periods} clock periods or more; at most {most} are simulated")


def _check_needs(profile: Profile, contract: Contract) -> None:
    has = {
        "count": ("a count", contract.count is not None),
        "direction": ("a direction", contract.direction is not None),
        "step": ("a step", contract.step is not None),
        "error": ("an error", contract.error is not None),
        "sticky-error": ("a sticky error", contract.error is not None and contract.error.sticky),
        "clear-error": ("a clear-error input", contract.clear_error is not None),
        "index": ("an index action", contract.index is not None),
        "reset": ("a reset", contract.reset is not None),
        "no-reset": ("no reset", contract.reset is None),
        "filter": ("a filter", contract.filter.rejects > 0),
    }
    missing = [has[need][0] for need in profile.needs if not has[need][1]]
    if missing:
        msg = f"for decoders with {' and '.join(missing)}"
        raise UnfitError(msg)
