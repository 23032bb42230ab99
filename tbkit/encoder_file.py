"""Reads the encoder of a profile file."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from tbkit.contract import A_LEADS_B
from tbkit.encoder import FURTHEST_DEGREES, LINES, furthest_degrees, index_windows
from tbkit.presets import PRESETS
from tbkit.profile import Delays, Encoder, IndexMark
from tbkit.reading import MOST_TIMES, ONE
from tbkit.units import Quantity
from tbkit.yamltree import Entry

_ANGLES = ("duty_error", "phase_error", "state_error", "jitter", "eccentricity", "hysteresis")


def _index_mark(entry: Entry) -> IndexMark:
    section = entry.section(("width", "at", "gated", "delay", "jitter", "marks", "missing"))
    width, at = section.require("width", "90 deg"), section.require("at", "0 deg")
    gated, delay, jitter = section.get("gated"), section.get("delay"), section.get("jitter")
    marks, missing = section.get("marks"), section.get("missing")
    mark = IndexMark(width.quantity("angle") if width else ONE, at.quantity("angle", "not negative") if at else ONE)
    if jitter and (gated is None or gated.text() != "false"):
        jitter.problem("a gated index has the edges of A and B; `jitter` needs `gated: false`")
    return replace(
        mark,
        gated=gated is None or gated.flag(),
        delay=delay.quantity("time", "not negative") if delay else mark.delay,
        jitter=jitter.quantity("angle", "not negative") if jitter else mark.jitter,
        marks=tuple(item.quantity("angle") for item in marks.items()) if marks else (),
        missing=tuple(item.integer(1, MOST_TIMES) for item in missing.items()) if missing else (),
    )


def _delays(entry: Entry) -> Delays:
    """``{a: [rise, fall], b: ..., index: ...}``; one time is for both edges."""
    section = entry.section(LINES)
    times: dict[str, Quantity] = {}
    for line in LINES:
        if each := section.get(line):
            times[f"{line}_rise"], times[f"{line}_fall"] = _two(each, "time", "not negative", "[rise, fall]")
    return Delays(**times)


def _two(entry: Entry, kind: str, sign: str, both: str) -> tuple[Quantity, Quantity]:
    """One quantity for two uses, or a list with one for each; ``both`` is how to write that."""
    if not entry.is_list:
        one = entry.quantity(kind, sign)
        return one, one
    items = entry.items()
    if len(items) != 2:
        if items:
            entry.problem(f"found a list of {len(items)}, expected one {kind} or {both}")
        return ONE, ONE
    first, second = (item.quantity(kind, sign) for item in items)
    return first, second


def encoder(entry: Entry) -> Encoder:
    """The encoder, its preset with the keys that are given in place of the preset's; problems are noted at their places."""
    section = entry.section(("preset", "lines", "pitch", "start", "index", "delay", *_ANGLES))
    preset, lines, pitch, start = (section.get(key) for key in ("preset", "lines", "pitch", "start"))
    index, delay = section.get("index"), section.get("delay")
    found = PRESETS[preset.choice(tuple(PRESETS))].encoder if preset else Encoder()
    changes: dict[str, Any] = {}
    if lines:
        changes["lines"] = lines.integer(1, 1 << 24)
    if pitch:
        changes["pitch"] = pitch.quantity("length")
    if start:
        changes["start"] = start.choice(A_LEADS_B)
    if index:
        changes["index"] = _index_mark(index)
    if delay:
        changes["delay"] = _delays(delay)
    for key in _ANGLES:
        if given := section.get(key):
            if key == "duty_error":
                changes["duty_error_a"], changes["duty_error_b"] = _two(given, "angle", "any", "[of a, of b]")
            else:
                changes[key] = given.quantity("angle", "any" if key == "phase_error" else "not negative")
    found = replace(found, **changes)
    _check(found, entry, index, section.get("eccentricity"))
    return found


def _check(encoder: Encoder, entry: Entry, index: Entry | None, eccentricity: Entry | None) -> None:
    """Meaning that takes more than one key to see."""
    if index and encoder.lines is None:
        index.problem("an index needs the line count; add `lines: 1024` to the encoder")
    if eccentricity and encoder.lines is None:
        eccentricity.problem("a once-a-revolution error needs the line count; add `lines: 1024` to the encoder")
    if index and encoder.index and encoder.lines and entry.sound and encoder.index.width.value >= 360 * encoder.lines:
        index.problem(f"the width {encoder.index.width} is no less than the whole revolution of {360 * encoder.lines} deg")
    if index and entry.sound and encoder.index and encoder.index.marks:
        every = 360 * (encoder.lines or 1)
        begins = sorted(window.begin for window in index_windows(encoder))
        gaps = [(after - before) % (every // 90) for before, after in zip(begins, [*begins[1:], begins[0]], strict=True)]
        if min(gaps) <= encoder.index.width.value / 90:
            index.problem(f"two of its marks are less than their width of {encoder.index.width} apart")
    if entry.sound and (furthest := furthest_degrees(encoder)) >= FURTHEST_DEGREES:
        entry.problem(
            f"these tolerances move an edge by up to {float(furthest):g} deg;"
            f" from {FURTHEST_DEGREES} deg on A and B would change places"
        )
