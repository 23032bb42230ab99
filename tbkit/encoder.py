"""The encoder: shaft position turned into ideal edges of the lines A, B and index.

A line is its first level and the times at which it toggles, so a pulse added is two more toggles and a missing one two
fewer, whatever the level was.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import floor

import numpy as np

from tbkit.contract import A_LEADS_B
from tbkit.motion import Crossings, Int64s, Motion, crossings
from tbkit.profile import Encoder

LINES = ("a", "b", "index")


@dataclass(frozen=True, slots=True)
class Line:
    """One line: ``first`` level, and int64[n] ``toggles_ps`` in order."""

    first: int
    toggles_ps: Int64s


@dataclass(frozen=True, slots=True)
class Window:
    """The index mark on the ideal disc: active from ``begin`` to ``end`` (states), again every ``every`` states."""

    begin: Fraction
    end: Fraction
    every: int


@dataclass(frozen=True, slots=True)
class IdealEdges:
    """What a perfect encoder does.

    Attributes:
        lines: by name; an encoder without index has a still index line.
        ledger: every boundary between two states that the shaft truly crosses.
        first_states: the shaft's first position.
        window: the index mark, if there is one.
    """

    lines: dict[str, Line]
    ledger: Crossings
    first_states: float
    window: Window | None


def index_window(encoder: Encoder) -> Window | None:
    """The index mark in states; 90 electrical degrees are one state."""
    if encoder.index is None or encoder.lines is None:
        return None
    begin = encoder.index.at.value / 90
    return Window(begin, begin + encoder.index.width.value / 90, 4 * encoder.lines)


def encode(motion: Motion, encoder: Encoder) -> IdealEdges:
    """Edges of a perfect encoder on this shaft."""
    ledger = crossings(motion)
    first = floor(motion.first_states)
    # A changes at every odd boundary and B at every even one: 00 | 10 | 11 | 01 | 00.
    odd = ledger.number % 2 == 1
    state = A_LEADS_B[first % 4]
    lines = {
        "a": Line(int(state[0]), ledger.time_ps[odd]),
        "b": Line(int(state[1]), ledger.time_ps[~odd]),
        "index": Line(0, np.zeros(0, dtype=np.int64)),
    }
    window = index_window(encoder)
    if window is not None:
        edges = [crossings(motion, float(place), float(window.every)).time_ps for place in (window.begin, window.end)]
        into = (Fraction(motion.first_states) - window.begin) % window.every
        lines["index"] = Line(int(into < window.end - window.begin), np.sort(np.concatenate(edges), kind="stable"))
    return IdealEdges(lines, ledger, motion.first_states, window)
