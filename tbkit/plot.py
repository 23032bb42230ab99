"""Pictures of a profile: the shaft, and the lines with what disturbs them; and its lines as VCD."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import EngFormatter, MaxNLocator
from vcd import VCDWriter

from tbkit import __version__
from tbkit.encoder import LINES, Line
from tbkit.motion import Floats, Int64s, Motion
from tbkit.profile import Encoder, Profile
from tbkit.stimulus import Scenario
from tbkit.units import PS_PER_S, Scale, parse

#: Points drawn for each piece of motion that is not straight, and at most for all of them.
_POINTS, _MOST_POINTS = 24, 200_000
#: A line with more toggles than this in a view is drawn as what fits into so many columns.
_COLUMNS = 2000
#: So many true edges are in the close view.
_CLOSE_EDGES = 12
_CLEAN, _BEHIND, _DISTURBED, _GRID = "#1f5f8b", "#a9b4bc", "#c2410c", "#e3e7ea"
#: Inches of a picture's parts.
_TOP, _SHAFT, _GAP, _VIEW, _BOTTOM = 0.5, 4.8, 0.35, 2.2, 1.0
_LABELS = {"a": "A", "b": "B", "index": "index"}
_HEIGHT = 1.5
#: Values from here on are written with k, M, G, ...
_PREFIXED = 10_000


def _shaft(motion: Motion) -> tuple[Floats, Floats, Floats, Floats]:
    """(seconds, states, states/s, states/s²) along the whole motion, dense enough to draw."""
    points = max(2, min(_POINTS, _MOST_POINTS // len(motion.start_ps)))
    share = np.linspace(0.0, 1.0, points)
    time = motion.duration_ps[:, None] * share
    v, a, j = motion.speed[:, None], motion.accel[:, None], motion.jerk[:, None]
    place = motion.from_states[:, None] + time * (v + time * (a / 2 + time * j / 6))
    jumps = motion.duration_ps == 0
    place[jumps] = motion.from_states[jumps, None] + (motion.to_states - motion.from_states)[jumps, None] * share
    speed = np.where(jumps[:, None], 0.0, v + time * (a + time * j / 2)) * PS_PER_S
    accel = np.where(jumps[:, None], 0.0, a + time * j) * float(PS_PER_S) ** 2
    seconds = (motion.start_ps[:, None] + time) / PS_PER_S
    return seconds.ravel(), place.ravel(), speed.ravel(), accel.ravel()


def _draw_line(axes: Axes, line: Line, view_ps: tuple[int, int], base: float, color: str, width: float) -> None:
    """One line's levels in a view, stepping between ``base`` and ``base + 1``."""
    begin_ps, end_ps = view_ps
    first, last = np.searchsorted(line.toggles_ps, view_ps).tolist()
    if last - first > _COLUMNS:
        # Too dense to tell edges apart: both levels where a column of the picture has both.
        bounds = np.linspace(begin_ps, end_ps, _COLUMNS + 1)
        passed = np.searchsorted(line.toggles_ps, bounds)
        level = (line.first + passed) % 2
        busy = np.diff(passed) > 0
        low, high = (np.append(np.where(busy, edge, level[:-1]), level[-1]) for edge in (0, 1))
        axes.fill_between(bounds / PS_PER_S, base + low, base + high, step="post", color=color, linewidth=width)
        return
    times = np.concatenate([[begin_ps], line.toggles_ps[first:last], [end_ps]])
    levels = (line.first + first + np.arange(len(times) - 1)) % 2
    axes.step(times / PS_PER_S, base + np.append(levels, levels[-1:]), where="post", color=color, linewidth=width)


def _inputs(scenario: Scenario) -> dict[str, Line]:
    """The decoder's inputs that the profile acts on, as lines."""
    found: dict[str, list[int]] = {}
    for signal, begin_ps, end_ps in sorted((*scenario.motion.drives, *scenario.disturbed.presses)):
        toggles = found.setdefault(signal, [])
        if toggles and begin_ps <= toggles[-1]:
            toggles[-1] = max(toggles[-1], end_ps)
        else:
            toggles += [begin_ps, end_ps]
    return {signal: Line(0, np.array(toggles, dtype=np.int64)) for signal, toggles in found.items()}


def _draw_lines(axes: Axes, scenario: Scenario, view_ps: tuple[int, int], label: str) -> None:
    """A, B, index and inputs one above the other; where one is not what the encoder gave, that is drawn behind it."""
    rows = [*((_LABELS[name], scenario.disturbed.lines[name], scenario.edges.lines[name]) for name in LINES)]
    rows += [(name, line, line) for name, line in _inputs(scenario).items()]
    for row, (_, pins, clean) in enumerate(reversed(rows)):
        disturbed = pins is not clean and not (pins.first == clean.first and np.array_equal(pins.toggles_ps, clean.toggles_ps))
        if disturbed:
            _draw_line(axes, clean, view_ps, _HEIGHT * row, _BEHIND, 3.2)
        _draw_line(axes, pins, view_ps, _HEIGHT * row, _DISTURBED if disturbed else _CLEAN, 1.3)
    axes.set_yticks([_HEIGHT * row + 0.5 for row in range(len(rows))], [name for name, *_ in reversed(rows)])
    axes.set_ylim(-0.3, _HEIGHT * len(rows) - 0.2)
    axes.set_ylabel(label)
    axes.spines[["top", "right", "left"]].set_visible(False)
    axes.tick_params(axis="y", length=0)


def _jumps(scenario: Scenario, view_ps: tuple[int, int]) -> Int64s:
    """When the shaft jumps, so that both lines change at once, in a view."""
    motion = scenario.motion
    times: Int64s = motion.start_ps[(motion.duration_ps == 0) & (motion.from_states != motion.to_states)]
    within: Int64s = times[(times >= view_ps[0]) & (times <= view_ps[1])]
    return within


def _odd(scenario: Scenario) -> Int64s:
    """When edges come that the encoder did not give, or are missing that it gave, in order."""
    odd = [np.setxor1d(scenario.edges.lines[name].toggles_ps, scenario.disturbed.lines[name].toggles_ps) for name in LINES]
    return np.sort(np.concatenate(odd))


def _views(scenario: Scenario) -> list[tuple[str, tuple[int, int]]]:
    """(label, (begin_ps, end_ps)): the whole run, some edges and a single one, near the first that is disturbed."""
    whole = (scenario.begin_ps, max(scenario.motion.end_ps, scenario.begin_ps + 1))
    views = [("lines: whole run", whole)]
    times = scenario.edges.ledger.time_ps
    if len(times) == 0:
        return views
    odd = _odd(scenario)
    jumps = _jumps(scenario, whole)
    focus = int(next(iter([*odd[:1], *jumps[:1], times[len(times) // 2]])))
    if len(times) > _CLOSE_EDGES:
        views.append((f"lines: {_CLOSE_EDGES} edges", _around(times, focus, _CLOSE_EDGES)))
    if len(odd):
        # All that is odd up to the next true edge.
        following = times[np.searchsorted(times, focus, side="right") :][:1]
        last = int(odd[odd < following[0]][-1]) if len(following) and following[0] > focus else int(odd[-1])
        margin = max((last - focus) // 3, 1000)
        views.append(("lines: one disturbance", (focus - margin, last + margin)))
    elif len(times) > 1:
        views.append(("lines: one edge", _around(times, focus, 1)))
    return views


def _around(times_ps: Int64s, focus_ps: int, many: int) -> tuple[int, int]:
    """A view of about so many edges with the focus in it, and half a gap to spare at each end."""
    near = int(np.searchsorted(times_ps, focus_ps, side="right")) - 1
    first = int(np.clip(near - many // 2, 0, len(times_ps) - many - 1))
    begin, end = min(int(times_ps[first]), focus_ps), max(int(times_ps[first + many]), focus_ps)
    gap = max((end - begin) // (2 * many), 500)
    return begin - gap, end + gap


def _time_axis(axes: Axes, view_ps: tuple[int, int]) -> None:
    axes.set_xlim(view_ps[0] / PS_PER_S, view_ps[1] / PS_PER_S)
    # Far from zero a close view needs many digits: told from its own begin instead.
    offset_ps = view_ps[0] if view_ps[0] > 20 * (view_ps[1] - view_ps[0]) else 0
    scale = EngFormatter(unit="s", sep=" ")
    axes.xaxis.set_major_locator(MaxNLocator(7, steps=[1, 2, 5, 10]))
    if offset_ps:
        ticks = offset_ps + np.asarray(MaxNLocator(6, steps=[1, 2, 5, 10]).tick_values(0, view_ps[1] - offset_ps))
        ticks = ticks[(ticks >= view_ps[0]) & (ticks <= view_ps[1])]
        axes.set_xticks(ticks / PS_PER_S, [scale(float(tick - offset_ps) / PS_PER_S) for tick in ticks])
        axes.set_xlabel(f"time after {offset_ps / 10**6:,.6f} µs")
    else:
        axes.xaxis.set_major_formatter(scale)
        axes.set_xlabel("time")


def _in_units(encoder: Encoder, place: Floats, speed: Floats, accel: Floats) -> tuple[tuple[Floats, ...], tuple[str, ...]]:
    """Angle, speed and acceleration in the units that the encoder gives a meaning, and their labels."""
    if encoder.lines is not None:
        turn = 4 * encoder.lines
        return (place / turn, speed / turn * 60, accel / turn), ("angle / rev", "speed / rpm", "acceleration /\n(rev/s²)")
    if encoder.pitch is not None:
        metre = float(Scale.of(None, None, encoder.pitch).distance_states(parse("1 m", "distance")))
        labels = ("position / m", "speed / (m/s)", "acceleration /\n(m/s²)")
        return (place / metre, speed / metre, accel / metre), labels
    return (place, speed, accel), ("angle / states", "speed / (states/s)", "acceleration /\n(states/s²)")


def draw(profile: Profile, scenario: Scenario) -> Figure:
    views = _views(scenario)
    # Laid out by hand, in inches: matplotlib's own layouts differ a little from run to run.
    height = _TOP + _SHAFT + _GAP + _VIEW * len(views) + _BOTTOM
    figure = Figure(figsize=(10, height))
    figure.suptitle(profile.name, fontsize=14, y=1 - 0.25 / height)
    sides = {"left": 0.115, "right": 0.96}
    middle = _BOTTOM + _VIEW * len(views)
    above = figure.add_gridspec(3, 1, top=1 - _TOP / height, bottom=(middle + _GAP) / height, hspace=0.12, **sides)
    below = figure.add_gridspec(len(views), 1, top=middle / height, bottom=_BOTTOM / height, hspace=0.42, **sides)
    shaft_axes = [figure.add_subplot(above[row]) for row in range(3)]
    line_axes = [figure.add_subplot(below[row]) for row in range(len(views))]
    seconds, place, speed, accel = _shaft(scenario.motion)
    curves, labels = _in_units(profile.encoder, place, speed, accel)
    whole = views[0][1]
    for axes, values, label in zip(shaft_axes, curves, labels, strict=True):
        axes.plot(seconds, values, color=_CLEAN, linewidth=1.3)
        axes.set_ylabel(label)
        axes.grid(visible=True, color=_GRID, linewidth=0.6)
        most = float(np.abs(values).max())
        if most >= _PREFIXED:
            axes.yaxis.set_major_formatter(EngFormatter(sep=" "))
        if most == 0:
            axes.set_ylim(-1, 1)
        _time_axis(axes, whole)
        axes.set_xlabel("")
        axes.tick_params(labelbottom=False)
    for axes, (label, view_ps) in zip(line_axes, views, strict=True):
        _draw_lines(axes, scenario, view_ps, label)
        _time_axis(axes, view_ps)
        times = scenario.edges.ledger.time_ps
        first, last = np.searchsorted(times, view_ps)
        if last - first <= 2 * _CLOSE_EDGES:
            for time in times[first:last] / PS_PER_S:
                axes.axvline(time, color=_GRID, linewidth=0.9, zorder=0)
            for time in _jumps(scenario, view_ps) / PS_PER_S:
                axes.axvline(time, color=_DISTURBED, linewidth=0.9, linestyle="--", zorder=0)
    for axes in (*shaft_axes, *line_axes):
        axes.yaxis.set_label_coords(-0.09, 0.5)
    figure.text(0.5, 0.15 / height, _legend(scenario), fontsize=9, color="#4a5560", ha="center")
    return figure


def _legend(scenario: Scenario) -> str:
    parts = ["blue: as the encoder gives it"]
    if len(_odd(scenario)):
        parts.append("orange: disturbed, with the encoder's own in grey behind")
    parts.append("thin verticals: true edges")
    if len(_jumps(scenario, (scenario.begin_ps, scenario.motion.end_ps))):
        parts.append("dashed: both lines at once")
    return "; ".join(parts)


def write(profile: Profile, scenario: Scenario, path: Path) -> None:
    """Write a picture, or the lines as VCD, by the ending of ``path``: ``.png``, ``.svg`` or ``.vcd``.

    Raises:
        OSError: it cannot be written.
    """
    if path.suffix == ".vcd":
        write_vcd(scenario, path)
    else:
        write_picture(profile, scenario, path)


def write_picture(profile: Profile, scenario: Scenario, path: Path) -> None:
    """Write the picture as PNG or SVG, by the ending of ``path``; the same profile gives the same bytes.

    Raises:
        OSError: it cannot be written.
    """
    maker = f"tbkit {__version__}"
    metadata = {"Date": None, "Creator": maker} if path.suffix == ".svg" else {"Software": maker}
    # Text stays text in SVG, ids do not depend on chance, and no date is written.
    with mpl.rc_context({"svg.fonttype": "none", "svg.hashsalt": "tbkit", "agg.path.chunksize": 10_000}):
        draw(profile, scenario).savefig(path, dpi=110, metadata=metadata)


def write_vcd(scenario: Scenario, path: Path) -> None:
    """Write A, B, index and the inputs acted on as they arrive at the pins; one time step is 1 ps.

    Raises:
        OSError: it cannot be written.
    """
    lines: dict[str, Line] = {**scenario.disturbed.lines, **_inputs(scenario)}
    changes: Sequence[tuple[int, str]] = sorted((time, name) for name, line in lines.items() for time in line.toggles_ps.tolist())
    level = {name: line.first for name, line in lines.items()}
    with (
        path.open("w", encoding="ascii") as file,
        VCDWriter(file, timescale="1 ps", date="", version=f"tbkit {__version__}") as writer,
    ):
        names = {name: writer.register_var("encoder", name, "wire", size=1, init=level[name]) for name in lines}
        for time, name in changes:
            level[name] ^= 1
            writer.change(names[name], time, level[name])
        writer.close(max([scenario.motion.end_ps, *(time for time, _ in changes[-1:])]))
