"""Disturbances: what goes wrong between the disc and the decoder's pins.

Each draws from its own generator, so adding one does not change the others. Each also says from when on the lines may no
longer tell where the shaft is, and what of it no decoder could notice.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from tbkit.contract import A_LEADS_B
from tbkit.encoder import Line
from tbkit.errors import UnfitError
from tbkit.motion import Crossings, Int64s
from tbkit.profile import (
    Aperture,
    Bounce,
    Disturbance,
    Glitch,
    Invert,
    Missing,
    Press,
    Stuck,
    Swap,
    Together,
    Unknown,
    Where,
)
from tbkit.units import PS_PER_S, Quantity, Scale

Generators = Callable[[str], np.random.Generator]

#: One disturbance strikes at most so many times: bounds the memory.
MOST_MOMENTS = 5_000_000


@dataclass(frozen=True, slots=True)
class Disturbed:
    """The lines on the way to the pins.

    Attributes:
        lines: A, B and index as they are so far.
        presses: (signal, from_ps, to_ps) of inputs acted on.
        lost_ps: from when the lines may no longer tell where the shaft is (None: they always do).
        undetectable: what no decoder of A and B could notice, in words.
        apertures_ps: widths of the apertures that act on the lines, each with its generator's name.
        unknown: the lines are X until reset takes hold.
    """

    lines: dict[str, Line]
    presses: tuple[tuple[str, int, int], ...] = ()
    lost_ps: int | None = None
    undetectable: tuple[str, ...] = ()
    apertures_ps: tuple[tuple[int, str], ...] = ()
    unknown: bool = False

    def with_line(self, name: str, line: Line, lost_ps: int | None = None) -> Disturbed:
        return replace(self, lines={**self.lines, name: line}).lost_from(lost_ps)

    def lost_from(self, lost_ps: int | None) -> Disturbed:
        both = [time for time in (self.lost_ps, lost_ps) if time is not None]
        return replace(self, lost_ps=min(both, default=None))


@dataclass(frozen=True, slots=True)
class Scene:
    """What disturbances may look at besides the lines.

    Attributes:
        scale: units.
        ledger: the true edges.
        span_ps: the time in which disturbances act, from the motion's begin to its end.
        generators: random generators by use.
        lost_ps: from when the encoder's own lines do not tell where the shaft is, or None.
    """

    scale: Scale
    ledger: Crossings
    span_ps: tuple[int, int]
    generators: Generators
    lost_ps: int | None = None

    @property
    def margin_ps(self) -> int:
        return (self.scale.clocks.get("pass", 0) + 1) * self.scale.period_ps

    def moments(self, where: Where, rng: np.random.Generator, what: str, length_ps: int = 0) -> Int64s:
        """The times at which a disturbance strikes, in order; ``what`` and ``length_ps`` are what begins there."""
        begin, end = self.span_ps
        if where.by == "times":
            # One in each of so many equal parts of the run, so that none touch.
            part = (end - begin) // where.number
            room = part - 2 * length_ps
            if room <= 0:
                msg = f"{where.number} {what} do not fit into its run without touching"
                raise UnfitError(msg)
            return begin + part * np.arange(where.number) + (rng.random(where.number) * room).astype(np.int64)
        if where.by == "at":
            return np.sort(np.array([begin + self.scale.time_ps(moment) for moment in where.moments], dtype=np.int64))
        if where.by == "edges":
            numbers = np.unique(np.array(where.numbers, dtype=np.int64)) - 1
            struck: Int64s = self.ledger.time_ps[numbers[numbers < len(self.ledger.time_ps)]]
            return struck
        if where.by == "state":
            entered = (self.ledger.number - ~self.ledger.up) % 4
            times: Int64s = self.ledger.time_ps[entered == A_LEADS_B.index(where.state)]
            return times
        assert where.rate is not None
        period = 1 / self.scale.rate_per_ps(where.rate)
        first = begin + period * float(where.phase.value) / 360
        if (end - first) / period > MOST_MOMENTS:
            msg = f"a rate of {1 / period * PS_PER_S:g} Hz strikes more than {MOST_MOMENTS} times in its run"
            raise UnfitError(msg)
        periodic: Int64s = np.rint(np.arange(first, end, period)).astype(np.int64)
        return periodic


def _any_within(times_ps: Int64s, begin_ps: Int64s, end_ps: Int64s) -> npt.NDArray[np.bool_]:
    first, last = np.searchsorted(times_ps, begin_ps, side="left"), np.searchsorted(times_ps, end_ps, side="right")
    return np.not_equal(first, last)


def _risk(before: Disturbed, name: str, begin_ps: Int64s, end_ps: Int64s, margin_ps: int, *, rejected: bool) -> int | None:
    """When the first pulse begins that could change the order of edges on A and B, and with it the position.

    A pulse that the filter rejects is harmless unless an edge of its own line is near, since that edge then moves.
    """
    if name == "index":
        return int(begin_ps.min()) if len(begin_ps) and not rejected else None
    own, other = before.lines[name].toggles_ps, before.lines["b" if name == "a" else "a"].toggles_ps
    risky = _any_within(other, begin_ps - margin_ps, end_ps + margin_ps)
    if rejected:
        risky &= _any_within(own, begin_ps - margin_ps, end_ps + margin_ps)
    return int(begin_ps[risky].min()) if risky.any() else None


def _with(line: Line, more_ps: Int64s) -> Line:
    return Line(line.first, np.sort(np.concatenate([line.toggles_ps, more_ps]), kind="stable"))


def _drawn(scale: Scale, shortest: Quantity, longest: Quantity, many: int, rng: np.random.Generator) -> Int64s:
    """int64[many] times between two bounds, evenly."""
    low, high = scale.time_ps(shortest), scale.time_ps(longest)
    return (low + rng.random(many) * (high - low)).astype(np.int64)


def _glitch(before: Disturbed, glitch: Glitch, scene: Scene, rng: np.random.Generator) -> Disturbed:
    longest = max(scene.scale.time_ps(width) for width in (glitch.shortest, glitch.longest))
    begin = scene.moments(glitch.where, rng, f"pulses of {glitch.longest}", longest) if longest else np.zeros(0, dtype=np.int64)
    width = _drawn(scene.scale, glitch.shortest, glitch.longest, len(begin), rng)
    # "1 reject" of a decoder without a filter: there is no pulse that it must reject.
    begin, width = begin[width > 0], width[width > 0]
    rejected = bool((width <= scene.scale.clocks.get("reject", 0) * scene.scale.period_ps).all())
    after = before
    for name in glitch.lines:
        risk = _risk(before, name, begin, begin + width, scene.margin_ps, rejected=rejected)
        if len(glitch.lines) > 1 and len(begin) and not rejected:
            risk = int(begin[0])
        after = after.with_line(name, _with(before.lines[name], np.concatenate([begin, begin + width])), risk)
    return after


def _bounce(before: Disturbed, bounce: Bounce, scene: Scene, rng: np.random.Generator) -> Disturbed:
    line = before.lines[bounce.line]
    edges = line.toggles_ps
    makes = (np.arange(len(edges)) + line.first) % 2 == 0
    edges = edges[{"both": makes | True, "make": makes, "break": ~makes}[bounce.only]]
    if bounce.where is not None:
        edges = edges[_next(edges, scene.moments(bounce.where, rng, "bouncing edges"))]
    pulses = bounce.fewest + (rng.random(len(edges)) * (bounce.most - bounce.fewest + 1)).astype(np.int64)
    lasts = _drawn(scene.scale, bounce.shortest, bounce.longest, len(edges), rng)
    toggles = 2 * pulses
    after = (rng.random(int(toggles.sum())) * np.repeat(lasts, toggles)).astype(np.int64)
    risk = _risk(before, bounce.line, edges, edges + lasts, scene.margin_ps, rejected=False)
    return before.with_line(bounce.line, _with(line, np.repeat(edges, toggles) + after), risk)


def _next(times_ps: Int64s, moments_ps: Int64s) -> Int64s:
    """Indices of the first of ``times_ps`` from each moment on, each once."""
    first = np.unique(np.searchsorted(times_ps, moments_ps, side="left"))
    return first[first < len(times_ps)]


def _missing(before: Disturbed, missing: Missing, scene: Scene, rng: np.random.Generator) -> Disturbed:
    line = before.lines[missing.line]
    begins = _next(line.toggles_ps[::2], scene.moments(missing.where, rng, "missing pulses"))
    gone = np.stack([2 * begins, 2 * begins + 1], axis=1).ravel()
    gone = gone[gone < len(line.toggles_ps)]
    if len(gone) == 0:
        return before
    lost = int(line.toggles_ps[gone[0]])
    many = len(begins)
    words = f"the {many} missing pulses of {missing.line}: A and B alone show a smaller motion, with no illegal transition"
    after = before.with_line(missing.line, Line(line.first, np.delete(line.toggles_ps, gone)), lost)
    return replace(after, undetectable=(*before.undetectable, words))


def _levels(line: Line, at_ps: Int64s) -> Int64s:
    return line.first ^ (np.searchsorted(line.toggles_ps, at_ps, side="right") & 1)


def _stuck(before: Disturbed, stuck: Stuck, scene: Scene, rng: np.random.Generator) -> Disturbed:
    line = before.lines[stuck.line]
    time_ps = None if stuck.time is None else scene.scale.time_ps(stuck.time)
    begins = scene.moments(stuck.where, rng, "times of being stuck", time_ps or 0)
    end_of_all = int(max(scene.span_ps[1], line.toggles_ps[-1] if len(line.toggles_ps) else 0)) + 1
    toggles, done = line.toggles_ps, -1
    for begin in begins.tolist():
        if begin < done:
            continue
        end = done = end_of_all if time_ps is None else begin + time_ps
        # As it was just before, and as it would be afterwards.
        enter, leave = (int(level) for level in _levels(line, np.array([begin - 1, end])))
        inside: list[int] = []
        level = int(stuck.level) if stuck.level != "noise" else enter
        if stuck.level == "noise":
            # A floating input: it toggles at random, some clocks apart.
            many = max(1, (end - begin) // (4 * scene.scale.period_ps))
            inside = np.sort(begin + (rng.random(min(many, 10_000)) * (end - begin)).astype(np.int64)).tolist()
            level = enter ^ (len(inside) & 1)
        edges = ([begin] if stuck.level != "noise" and enter != level else []) + inside
        if time_ps is not None and level != leave:
            edges.append(end)
        outside = toggles[(toggles < begin) | (toggles > end)]
        toggles = np.sort(np.concatenate([outside, np.array(edges, dtype=np.int64)]), kind="stable")
    if len(begins) == 0:
        return before
    does = "chatters" if stuck.level == "noise" else "is stuck"
    words = f"the {stuck.line} line that {does}: A and B alone cannot tell it from a motion"
    after = before.with_line(stuck.line, Line(line.first, toggles), int(begins[0]))
    return replace(after, undetectable=(*before.undetectable, words))


def _together(before: Disturbed, together: Together, scene: Scene, rng: np.random.Generator) -> Disturbed:
    """Each true edge that is struck waits for the next one."""
    times = scene.ledger.time_ps
    struck = np.unique(np.searchsorted(times, scene.moments(together.where, rng, "edges"), side="left"))
    # The next edge must be of the other line, and not be moved itself.
    struck = struck[struck + 1 < len(times)]
    odd = (scene.ledger.number & 1).astype(bool)
    struck = struck[odd[struck] != odd[struck + 1]]
    struck = struck[np.diff(struck, prepend=-2) > 1]
    after = before
    for name, mine in (("a", struck[odd[struck]]), ("b", struck[~odd[struck]])):
        line = after.lines[name]
        place = np.searchsorted(line.toggles_ps, times[mine])
        there = place < len(line.toggles_ps)
        there[there] = line.toggles_ps[place[there]] == times[mine][there]
        moved = line.toggles_ps.copy()
        moved[place[there]] = times[mine + 1][there]
        after = after.with_line(name, Line(line.first, np.sort(moved, kind="stable")))
    return after.lost_from(int(times[struck[0]]) if len(struck) else None)


def _press(before: Disturbed, press: Press, scene: Scene, rng: np.random.Generator) -> Disturbed:
    time_ps, offset = scene.scale.time_ps(press.time), scene.scale.time_ps(press.offset)
    if press.of_answer:
        answer = "answer of clear" if press.signal == "clear" else "answer"
        offset += scene.scale.clocks.get(answer, 0) * scene.scale.period_ps
    presses: list[tuple[str, int, int]] = []
    for moment in scene.moments(press.where, rng, f"presses of {press.time}", time_ps).tolist():
        begin = max(moment + offset, scene.span_ps[0])
        presses.append((press.signal, begin, begin + time_ps))
    return replace(before, presses=(*before.presses, *presses))


def _one(before: Disturbed, disturbance: Disturbance, scene: Scene, name: str) -> Disturbed:
    rng = scene.generators(name)
    match disturbance:
        case Glitch():
            return _glitch(before, disturbance, scene, rng)
        case Bounce():
            return _bounce(before, disturbance, scene, rng)
        case Missing():
            return _missing(before, disturbance, scene, rng)
        case Stuck():
            return _stuck(before, disturbance, scene, rng)
        case Together():
            return _together(before, disturbance, scene, rng)
        case Press():
            return _press(before, disturbance, scene, rng)
        case Swap():
            lines = {**before.lines, "a": before.lines["b"], "b": before.lines["a"]}
            words = "A and B swapped: the motion looks reversed"
            return replace(before, lines=lines, undetectable=(*before.undetectable, words)).lost_from(0)
        case Invert():
            line = before.lines[disturbance.line]
            looks = "the index looks like its gap" if disturbance.line == "index" else "the motion looks reversed"
            words = f"the {disturbance.line} line inverted: {looks}"
            after = before.with_line(disturbance.line, Line(1 - line.first, line.toggles_ps), 0)
            return replace(after, undetectable=(*before.undetectable, words))
        case Aperture():
            widths = (*before.apertures_ps, (scene.scale.time_ps(disturbance.width), name))
            return replace(before, apertures_ps=widths)
        case Unknown():
            return replace(before, unknown=True)


def disturb(lines: dict[str, Line], disturbances: tuple[Disturbance, ...], scene: Scene) -> Disturbed:
    """Apply the disturbances in order."""
    disturbed = Disturbed(lines, lost_ps=scene.lost_ps)
    if scene.lost_ps is not None:
        words = "delays of the encoder that change the order of edges: A and B then tell another motion"
        disturbed = replace(disturbed, undetectable=(words,))
    for n, disturbance in enumerate(disturbances):
        # By what it says, not by its place in the list, so that one more changes none of the others.
        alike = disturbances[:n].count(disturbance)
        disturbed = _one(disturbed, disturbance, scene, f"{disturbance} {alike}")
    return disturbed
