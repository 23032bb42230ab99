"""Disturbances: what goes wrong between the disc and the decoder's pins.

Each draws from its own generator, so adding one does not change the others.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from tbkit.encoder import Line
from tbkit.errors import UnfitError
from tbkit.motion import Int64s
from tbkit.profile import Bounce, Disturbance, Glitch, Missing
from tbkit.units import Scale


@dataclass(frozen=True, slots=True)
class _Context:
    """What a disturbance may look at: all lines as they are so far, the units, and the time it may act in."""

    lines: dict[str, Line]
    scale: Scale
    span_ps: tuple[int, int]

    @property
    def margin_ps(self) -> int:
        return (self.scale.clocks["pass"] + 1) * self.scale.period_ps

    def first_risk(self, name: str, begin_ps: Int64s, end_ps: Int64s, *, sure_to_fail: bool) -> int | None:
        """When the first pulse begins that could change the order of edges on A and B, and with it the position.

        A pulse shorter than the filter lets pass is harmless unless an edge of its own line is near, since that edge moves.
        """
        if name == "index":
            return int(begin_ps.min()) if len(begin_ps) and not sure_to_fail else None
        own, other = self.lines[name].toggles_ps, self.lines["b" if name == "a" else "a"].toggles_ps
        risky = _any_within(other, begin_ps - self.margin_ps, end_ps + self.margin_ps)
        if sure_to_fail:
            risky &= _any_within(own, begin_ps - self.margin_ps, end_ps + self.margin_ps)
        return int(begin_ps[risky].min()) if risky.any() else None


def _any_within(times_ps: Int64s, begin_ps: Int64s, end_ps: Int64s) -> npt.NDArray[np.bool_]:
    first, last = np.searchsorted(times_ps, begin_ps, side="left"), np.searchsorted(times_ps, end_ps, side="right")
    return np.not_equal(first, last)


def _with(line: Line, more_ps: Int64s) -> Line:
    return Line(line.first, np.sort(np.concatenate([line.toggles_ps, more_ps]), kind="stable"))


def _glitch(disturbance: Glitch, context: _Context, rng: np.random.Generator) -> tuple[Line, int | None]:
    line = context.lines[disturbance.line]
    width = context.scale.time_ps(disturbance.width)
    if width == 0:
        # "1 reject" of a decoder without a filter: there is no pulse that it must reject.
        return line, None
    begin, end = context.span_ps
    # One in each of `times` equal parts of the run, so that none touch.
    part = (end - begin) // disturbance.times
    room = part - 2 * width
    if room <= 0:
        msg = f"{disturbance.times} pulses of {disturbance.width} do not fit into its run without touching"
        raise UnfitError(msg)
    starts = begin + part * np.arange(disturbance.times) + (rng.random(disturbance.times) * room).astype(np.int64)
    rejected = width <= context.scale.clocks["reject"] * context.scale.period_ps
    risk = context.first_risk(disturbance.line, starts, starts + width, sure_to_fail=rejected)
    return _with(line, np.concatenate([starts, starts + width])), risk


def _bounce(disturbance: Bounce, context: _Context, rng: np.random.Generator) -> tuple[Line, int | None]:
    line = context.lines[disturbance.line]
    edges = line.toggles_ps
    low, high = context.scale.time_ps(disturbance.shortest), context.scale.time_ps(disturbance.longest)
    pulses = disturbance.fewest + (rng.random(len(edges)) * (disturbance.most - disturbance.fewest + 1)).astype(np.int64)
    lasts = (low + rng.random(len(edges)) * (high - low)).astype(np.int64)
    toggles = 2 * pulses
    after = (rng.random(int(toggles.sum())) * np.repeat(lasts, toggles)).astype(np.int64)
    risk = context.first_risk(disturbance.line, edges, edges + lasts, sure_to_fail=False)
    return _with(line, np.repeat(edges, toggles) + after), risk


def _missing(disturbance: Missing, context: _Context) -> tuple[Line, int | None]:
    line = context.lines[disturbance.line]
    gone = np.array([2 * (n - 1) + half for n in sorted(set(disturbance.pulses)) for half in (0, 1)], dtype=np.int64)
    gone = gone[gone < len(line.toggles_ps)]
    if len(gone) == 0:
        return line, None
    return Line(line.first, np.delete(line.toggles_ps, gone)), int(line.toggles_ps[gone[0]])


def disturb(
    lines: dict[str, Line],
    disturbances: tuple[Disturbance, ...],
    scale: Scale,
    span_ps: tuple[int, int],
    generators: list[np.random.Generator],
) -> tuple[dict[str, Line], int | None]:
    """Apply the disturbances in order, within ``span_ps``.

    Raises:
        UnfitError: there is no room for them.

    Returns:
        The lines, and the time from which they may no longer tell where the shaft is (None: they always do).
    """
    lines = dict(lines)
    lost_ps: list[int] = []
    for disturbance, rng in zip(disturbances, generators, strict=True):
        context = _Context(lines, scale, span_ps)
        match disturbance:
            case Glitch():
                line, lost = _glitch(disturbance, context, rng)
            case Bounce():
                line, lost = _bounce(disturbance, context, rng)
            case Missing():
                line, lost = _missing(disturbance, context)
        lines[disturbance.line] = line
        if lost is not None:
            lost_ps.append(lost)
    return lines, min(lost_ps, default=None)
