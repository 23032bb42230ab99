"""The stimulus: one profile compiled for one decoder, ready to be played.

Time is counted in clock periods: period k ends at the active clock edge at (k+1)·P, which sees the levels of its end.
Toggles keep 2 ps away from active edges, so nothing ever changes in the instant in which it is sampled.
"""

from __future__ import annotations

import zlib
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from tbkit.contract import A_LEADS_B, DEEDS, LATCH_GAP, Contract
from tbkit.course import build_motion
from tbkit.disturb import Disturbed, Scene, disturb
from tbkit.encoder import LINES, Edges, Line, encode, index_windows
from tbkit.errors import UnfitError
from tbkit.motion import CHUNK, Int64s, Motion
from tbkit.ordered import merged, run_lengths, run_starts
from tbkit.profile import Profile
from tbkit.units import Scale

#: Bits of a word's levels, in this order; the bench template uses the same.
DRIVES = ("reset", *DEEDS, "latch")
SIGNALS = (*LINES, *DRIVES)
#: The level bit that makes A, B and index X.
UNKNOWN = 1 << 15
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
        drives: ``reset`` and the other inputs acted on, by the names of :data:`DRIVES`.
        ideal: the encoder's own edges, before disturbances.
        begin_ps: when the motion begins.
        lost_ps: from when the lines no longer tell where the shaft is, or None.
        periods: how many clock periods are played.
        power_up: the decoder must come fresh from power-up.
        undetectable: what no decoder of A and B could notice, in words.
        unknown_ps: the lines are X up to here (0: they never are).
        aperture_ps: by how much less than it is a level may seem to last, because of apertures.
    """

    name: str
    seed: int
    period_ps: int
    lines: dict[str, Line]
    drives: dict[str, Line]
    ideal: Edges
    begin_ps: int
    lost_ps: int | None
    periods: int
    unfold: Unfold
    power_up: bool
    undetectable: tuple[str, ...] = ()
    unknown_ps: int = 0
    aperture_ps: int = 0

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
        bits = np.repeat(1 << np.arange(len(SIGNALS), dtype=np.uint16), [len(t) for t in times])
        time_ps = np.concatenate(times)
        order = np.argsort(time_ps, kind="stable")
        time_ps, bits = time_ps[order], bits[order]
        del order
        first = sum(lines[name].first << bit for bit, name in enumerate(SIGNALS))
        levels = np.bitwise_xor.accumulate(bits) ^ np.uint16(first) if len(bits) else bits
        last = np.append(time_ps[1:] != time_ps[:-1], True)[: len(time_ps)]
        time_ps, levels = time_ps[last], levels[last]
        if self.unknown_ps:
            # Nothing moves before reset is over, so this is the first word but one.
            time_ps, levels = np.append(self.unknown_ps, time_ps), np.append(np.uint16(first), levels)
            first |= UNKNOWN
        levels = np.concatenate([np.array([first], dtype=np.uint16), levels])
        waits = np.diff(time_ps, prepend=0, append=self.periods * self.period_ps)
        words = np.append(0, waits).astype(np.uint64)
        words <<= np.uint64(16)
        words |= np.append(levels, levels[-1])
        return words


def generator(seed: int, name: str, stream: str) -> np.random.Generator:
    """A random generator of its own for each (seed, profile, use)."""
    return np.random.Generator(np.random.PCG64([seed, zlib.crc32(name.encode()), zlib.crc32(stream.encode())]))


def _clear_of_clock(line: Line, period_ps: int, away_ps: int) -> Line:
    """Keep ``away_ps`` from active edges, within the same clock period; toggles that meet cancel out.

    Where there is no clock, that brings all toggles to the middle of a period: what comes and goes within it must not be seen.
    """
    phase = line.toggles_ps % period_ps
    moved = line.toggles_ps - phase + np.clip(phase, away_ps, period_ps - away_ps)
    return Line(line.first, moved[run_starts(moved)][run_lengths(moved) % 2 == 1])


def _fold(times_ps: list[Int64s], quiet_ps: int, period_ps: int) -> Unfold:
    """Shorten every gap longer than ``quiet_ps`` by whole clock periods; the map from played time to the profile's.

    Raises:
        UnfitError: a gap is left that is too long to be played.
    """
    events = merged(np.zeros(1, dtype=np.int64), *times_ps)
    gaps = np.diff(events)
    long = np.flatnonzero(gaps > quiet_ps)
    cuts = (gaps[long] - quiet_ps) // period_ps * period_ps
    gaps[long] -= cuts
    if gaps.max(initial=0) > LONGEST_WAIT_PS:
        msg = f"nothing moves for more than {LONGEST_WAIT_PS} ps, the longest wait that can be played"
        raise UnfitError(msg)
    total = np.append(0, np.cumsum(cuts))
    return Unfold(np.append(0, events[long + 1]) - total, total)


def _folded(times_ps: Int64s, unfold: Unfold) -> Int64s:
    """Times of the profile as played. A time in a gap that was cut lands at the latest just before the gap's end."""
    real_ps = unfold.played_ps + unfold.cut_ps
    last = len(real_ps) - 1
    folded = np.empty_like(times_ps)
    # In parts, so that what is in between takes little memory.
    for low in range(0, len(times_ps), CHUNK):
        some = times_ps[low : low + CHUNK]
        at = np.searchsorted(real_ps, some, side="right") - 1
        before_next = np.where(at < last, unfold.played_ps[np.minimum(at + 1, last)] - 1, np.iinfo(np.int64).max)
        folded[low : low + CHUNK] = np.minimum(some - unfold.cut_ps[at], before_next)
    return folded


@dataclass(frozen=True, slots=True)
class Scenario:
    """One profile laid out in its own time, before it is fitted to a clock.

    Attributes:
        motion: the shaft.
        edges: what the encoder makes of it.
        disturbed: what arrives at the pins.
        begin_ps: when the motion begins.
    """

    motion: Motion
    edges: Edges
    disturbed: Disturbed
    begin_ps: int


def lay_out(
    profile: Profile, scale: Scale, seed: int, begin_ps: int, most_states: int = MOST_PERIODS, place: Fraction | None = None
) -> Scenario:
    """Motion, encoder and disturbances of a profile; the motion begins at ``begin_ps``.

    The shaft begins at ``place`` (states), or where the encoder tells.

    Raises:
        UnfitError: something has no meaning for this decoder, or there are more than ``most_states``.
    """

    def generators(use: str) -> np.random.Generator:
        return generator(seed, profile.name, use)

    encoder = profile.encoder
    start = A_LEADS_B.index(encoder.start) + Fraction(1, 2) if place is None else place
    motion = build_motion(profile.motion, scale, start, begin_ps, generators("motion"), index_windows(encoder))
    # A state takes a clock at least, or nothing could be counted: said before the edges are made, which take memory.
    states = int(np.abs(motion.to_states - motion.from_states).sum())
    if states > most_states:
        raise _too_long(states, most_states)
    edges = encode(motion, encoder, scale, generators)
    scene = Scene(scale, edges.ledger, (begin_ps, motion.end_ps), generators, edges.lost_ps)
    return Scenario(motion, edges, disturb(edges.lines, profile.disturb, scene), begin_ps)


def compile_stimulus(profile: Profile, contract: Contract, seed: int, most_periods: int = MOST_PERIODS) -> Stimulus:
    """Compile ``profile`` for a decoder: reset, settle, then the motion, then rest.

    A profile that takes more than ``most_periods`` clock periods is refused.

    Raises:
        UnfitError: the profile needs something the decoder does not have.
    """
    _check_needs(profile, contract)
    seed = profile.seed if profile.seed is not None else seed
    scale = Scale.of(contract, profile.encoder.lines, profile.encoder.pitch)
    period_ps, settle = contract.clock.period_ps, contract.settle_clocks
    reset_clocks = contract.reset.clocks if contract.reset else 0
    # Not a whole number of half periods, so that edges of simple motions fall inside a clock period.
    begin_ps = (reset_clocks + 1 + settle) * period_ps + 3 * period_ps // 8
    scenario = lay_out(profile, scale, seed, begin_ps, most_periods)
    disturbed, edges = scenario.disturbed, scenario.edges
    if disturbed.apertures_ps and not contract.clock.port:
        msg = "an aperture is for decoders with a clock"
        raise UnfitError(msg)
    if disturbed.unknown and contract.reset is None:
        msg = "its lines are X until reset, and this decoder has no reset"
        raise UnfitError(msg)
    drives = _drives(contract, scenario, reset_clocks)
    lines = disturbed.lines
    for width_ps, name in disturbed.apertures_ps:
        lines = {
            line: _through_aperture(one, width_ps, period_ps, generator(seed, profile.name, f"{name} {line}"))
            for line, one in lines.items()
        }
    away_ps = CLEARANCE_PS if contract.clock.port else period_ps // 2
    edge_ps = contract.clock.edge_ps
    lines = {name: _clear_of_clock(line, edge_ps, away_ps) for name, line in lines.items()}
    drives = {name: _clear_of_clock(line, edge_ps, away_ps) for name, line in drives.items()}
    moving = [line.toggles_ps for line in (*lines.values(), *drives.values())]
    # Twice the time to come to rest: the first half ends all activity, the second shows that it has ended.
    quiet_ps = 2 * (settle + 8) * period_ps if not contract.timers else np.iinfo(np.int64).max
    unfold = _fold([*moving, np.array([begin_ps], dtype=np.int64)], quiet_ps, period_ps)

    def played(time_ps: int) -> int:
        return int(_folded(np.array([time_ps]), unfold)[0])

    last_ps = played(max([scenario.motion.end_ps, *(int(times[-1]) for times in moving if len(times))]))
    periods = last_ps // period_ps + 2 * settle + 8
    if periods > most_periods:
        raise _too_long(periods, most_periods)

    def play(some: dict[str, Line]) -> dict[str, Line]:
        return {name: Line(line.first, _folded(line.toggles_ps, unfold)) for name, line in some.items()}

    drives = {
        **play(drives),
        "latch": _asking(contract, periods, played(begin_ps) // period_ps, generator(seed, profile.name, "latch")),
    }
    ledger = replace(edges.ledger, time_ps=_folded(edges.ledger.time_ps, unfold))
    return Stimulus(
        profile.name,
        seed,
        period_ps,
        play(lines),
        drives,
        replace(edges, lines=play(edges.lines), ledger=ledger),
        played(begin_ps),
        None if disturbed.lost_ps is None else played(disturbed.lost_ps),
        periods,
        unfold,
        profile.power_up,
        (*disturbed.undetectable, *too_fast(ledger.time_ps, period_ps)),
        (reset_clocks + 1) // 2 * period_ps + period_ps // 4 if disturbed.unknown else 0,
        sum(width_ps + CLEARANCE_PS for width_ps, _ in disturbed.apertures_ps),
    )


def _drives(contract: Contract, scenario: Scenario, reset_clocks: int) -> dict[str, Line]:
    """The inputs acted on: power-on reset, and what motion and disturbances do with them.

    Raises:
        UnfitError: the decoder does not have that input.
    """
    period_ps = contract.clock.period_ps
    ports = {"reset": contract.reset, **{signal: contract.input(role) for signal, role in DEEDS.items()}}
    spans: dict[str, list[tuple[int, int]]] = {name: [] for name in ports}
    for signal, from_ps, to_ps in sorted((*scenario.motion.drives, *scenario.disturbed.presses)):
        if ports[signal] is None:
            msg = f"it drives the {DEEDS.get(signal, signal)} input, which this decoder does not have"
            raise UnfitError(msg)
        known = spans[signal]
        if known and from_ps <= known[-1][1]:
            known[-1] = (known[-1][0], max(known[-1][1], to_ps))
        else:
            known.append((from_ps, to_ps))
    drives = {name: Line(0, np.array(known, dtype=np.int64).reshape(-1)) for name, known in spans.items()}
    if contract.reset:
        release = np.array([reset_clocks * period_ps + period_ps // 2], dtype=np.int64)
        drives["reset"] = Line(1, np.concatenate([release, drives["reset"].toggles_ps]))
    return drives


def _asking(contract: Contract, periods: int, begin: int, rng: np.random.Generator) -> Line:
    """How a latch input is driven: all the time up to the period ``begin``, then at random: at every distance from an edge."""
    latch = contract.input("latch")
    if latch is None:
        return Line(0, np.zeros(0, dtype=np.int64))
    # By pairs: for how long it is asserted and then not.
    early = np.ones((begin // 2, 2), dtype=np.int64) if latch.edge else np.array([[begin, 1]], dtype=np.int64)
    rest = np.stack([rng.integers(1, 3, periods // 2 + 1), rng.integers(1, LATCH_GAP + 1, periods // 2 + 1)], axis=1)
    toggles = np.concatenate([[0], np.cumsum(np.concatenate([early, rest]).reshape(-1))])
    toggles = toggles[toggles < periods]
    # Within a period, clear of its ends.
    return Line(0, toggles * contract.clock.period_ps + contract.clock.period_ps // 3)


def _through_aperture(line: Line, width_ps: int, period_ps: int, rng: np.random.Generator) -> Line:
    """Edges less than ``width_ps`` before a clock edge are seen by it or by the next one, by chance."""
    inside = line.toggles_ps % period_ps >= period_ps - width_ps
    late = inside & (rng.random(len(inside)) < 0.5)
    moved = np.where(late, line.toggles_ps - line.toggles_ps % period_ps + period_ps + CLEARANCE_PS, line.toggles_ps)
    return Line(line.first, np.sort(moved, kind="stable"))


def too_fast(ledger_ps: Int64s, period_ps: int) -> tuple[str, ...]:
    """What is too fast for any sampled decoder: three states or more within one clock look like another motion."""
    period = ledger_ps // period_ps
    third = period[2:] == period[:-2]
    third[1:] &= period[1:-2] != period[:-3]
    worst = int(third.sum())
    text = f"{worst} clocks in which three states or more go by: every sampled decoder takes them for another motion"
    return (text,) if worst else ()


def _too_long(periods: int, most: int) -> UnfitError:
    return UnfitError(f"it would take {periods} clock periods or more; at most {most} are simulated")


def _check_needs(profile: Profile, contract: Contract) -> None:
    has = {
        "count": ("a count", contract.count is not None),
        "direction": ("a direction", contract.direction is not None),
        "step": ("a step", contract.step is not None),
        "error": ("an error", contract.error is not None),
        "sticky-error": ("a sticky error", contract.error is not None and contract.error.sticky),
        **{role: (f"{'an' if role[0] in 'ae' else 'a'} {role} input", contract.input(role) is not None) for role in DEEDS.values()},
        "index": ("an index action", contract.index is not None),
        "reset": ("a reset", contract.reset is not None),
        "no-reset": ("no reset", contract.reset is None),
        "filter": ("a filter", contract.filter.rejects > 0),
    }
    missing = [has[need][0] for need in profile.needs if not has[need][1]]
    if missing:
        msg = f"for decoders with {' and '.join(missing)}"
        raise UnfitError(msg)
