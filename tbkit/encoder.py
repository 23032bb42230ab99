"""The encoder: shaft position turned into edges of the lines A, B and index, with the tolerances of a real one.

Angles are electrical: 360 degrees are one cycle, 90 a state. Three things that are easily confused are kept apart: *duty*
is how long a line is high, *phase* is from the centre of A high to the centre of B high, and the edge-to-edge distance of A
and B is the width of a state, which follows from both. (Definitions: Avago HEDR-8000 and HEDT-5140 data sheets, page 3.)

A line is its first level and the times at which it toggles, so a pulse added is two more toggles and a missing one two
fewer, whatever the level was.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from math import floor, pi

import numpy as np

from tbkit.contract import A_LEADS_B
from tbkit.motion import Crossings, Floats, Int64s, Motion, Places, crossings
from tbkit.profile import Delays, Encoder
from tbkit.units import Scale

LINES = ("a", "b", "index")
#: Tolerances may not move an edge as far as this from its place: edges would change places.
FURTHEST_DEGREES = 45
#: Errors of single graduations repeat after a revolution, or after this many edges where none is known.
GRADUATIONS = 1 << 16

Generators = Callable[[str], np.random.Generator]


@dataclass(frozen=True, slots=True)
class Line:
    """One line: ``first`` level, and int64[n] ``toggles_ps`` in order."""

    first: int
    toggles_ps: Int64s


@dataclass(frozen=True, slots=True)
class Window:
    """An index mark on the ideal disc: active from ``begin`` to ``end`` (states), again every ``every`` states."""

    begin: Fraction
    end: Fraction
    every: int


@dataclass(frozen=True, slots=True)
class Edges:
    """What the encoder does on this shaft, before cables and noise.

    Attributes:
        lines: by name; an encoder without index has a still index line.
        ledger: every boundary between two states that is passed, when its edge leaves the encoder; place n is that between
            states n-1 and n.
        first_states: the shaft's first position.
        windows: the ideal index marks.
        exact_index: the index line is active exactly in whole states, so the shaft tells when it is.
        lost_ps: from when delays change the order of edges on A and B, so that they tell another motion; None: never.
    """

    lines: dict[str, Line]
    ledger: Crossings
    first_states: float
    windows: tuple[Window, ...]
    exact_index: bool
    lost_ps: int | None = None


def index_windows(encoder: Encoder) -> tuple[Window, ...]:
    """The index marks in states; 90 electrical degrees are one state."""
    if encoder.index is None or encoder.lines is None:
        return ()
    every = 4 * encoder.lines
    width = encoder.index.width.value / 90
    # Further marks are told by the angle of the shaft, and lie on whole cycles so that all are alike.
    further = [round(mark.value / 360 * encoder.lines) * 4 for mark in encoder.index.marks]
    places = [(encoder.index.at.value / 90 + more) % every for more in (0, *further)]
    return tuple(Window(place, place + width, every) for place in places)


def _errors(encoder: Encoder, generators: Generators) -> Callable[[Int64s], Floats] | None:
    """How far each boundary is from its ideal place, in states; None for a perfect disc."""
    duty_a, duty_b, phase = (float(q.value) / 90 for q in (encoder.duty_error_a, encoder.duty_error_b, encoder.phase_error))
    # Places mod 4: B falls at 0, A rises at 1, B rises at 2, A falls at 3.
    fixed = np.array([phase + duty_b / 2, -duty_a / 2, phase - duty_b / 2, duty_a / 2])
    graduation, wobble = float(encoder.state_error.value) / 90, float(encoder.eccentricity.value) / 90
    if not (fixed.any() or graduation or wobble):
        return None
    period = 4 * encoder.lines if encoder.lines and encoder.lines <= GRADUATIONS // 4 else GRADUATIONS
    table = np.tile(fixed, period // 4)
    if graduation:
        table += (generators("graduations").random(period) - 0.5) * graduation

    def error(number: Int64s) -> Floats:
        moved: Floats = table[number % period]
        return moved + _wobble(encoder, number) if wobble else moved

    return error


def _wobble(encoder: Encoder, place: Floats | Int64s) -> Floats:
    """The once-a-revolution error at places of the disc, in states; none where the shaft begins."""
    if encoder.lines is None:
        return np.zeros(np.shape(place))
    turn = 2 * np.pi / (4 * encoder.lines)
    moved: Floats = float(encoder.eccentricity.value) / 90 * np.sin(turn * (place - A_LEADS_B.index(encoder.start)))
    return moved


def furthest_degrees(encoder: Encoder) -> Fraction:
    """The most that tolerances move an edge towards its neighbour, in electrical degrees.

    A once-a-revolution error moves both; half the difference counts.
    """
    duty = max(abs(encoder.duty_error_a.value), abs(encoder.duty_error_b.value)) / 2
    wobble = encoder.eccentricity.value * Fraction(pi) / (4 * encoder.lines) if encoder.lines else Fraction(0)
    return duty + abs(encoder.phase_error.value) + encoder.state_error.value / 2 + 3 * encoder.jitter.value + wobble


def encode(motion: Motion, encoder: Encoder, scale: Scale, generators: Generators) -> Edges:
    """Edges of this encoder on this shaft."""
    jitter = float(encoder.jitter.value) / 90
    ledger = crossings(
        motion,
        Places(
            error=_errors(encoder, generators),
            hysteresis=float(encoder.hysteresis.value) / 90,
            jitter=_shake(jitter, generators("jitter")),
        ),
    )
    state = A_LEADS_B[floor(motion.first_states) % 4]
    odd = (ledger.number & 1).astype(bool)
    firsts = {"a": int(state[0]), "b": int(state[1])}
    jumps = motion.start_ps[(motion.duration_ps == 0) & (motion.from_states != motion.to_states)]
    ledger = replace(ledger, time_ps=_apart(ledger, ledger.time_ps, jumps)[0])
    sent_ps = ledger.time_ps.copy()
    delay = encoder.delay
    for name, mine, rise, fall in (("a", odd, delay.a_rise, delay.a_fall), ("b", ~odd, delay.b_rise, delay.b_fall)):
        sent_ps[mine] += _delays(int(mine.sum()), firsts[name], scale.time_ps(rise), scale.time_ps(fall))
    sent_ps, lost_ps = _apart(ledger, sent_ps, jumps)
    lines = {
        "a": _swallowed(Line(firsts["a"], sent_ps[odd])),
        "b": _swallowed(Line(firsts["b"], sent_ps[~odd])),
        "index": Line(0, np.zeros(0, dtype=np.int64)),
    }
    windows = index_windows(encoder)
    if encoder.index is not None and windows:
        lines["index"] = _index_line(motion, encoder, windows, ledger, scale, generators)
    ledger = replace(ledger, time_ps=np.maximum.accumulate(sent_ps))
    return Edges(lines, ledger, motion.first_states, windows, _is_exact(encoder, windows), lost_ps)


def _shake(jitter: float, noise: np.random.Generator) -> Callable[[int], Floats] | None:
    """Normal noise of that standard deviation, cut at three of them; None for none."""
    return (lambda many: np.clip(noise.standard_normal(many) * jitter, -3 * jitter, 3 * jitter)) if jitter else None


def _apart(ledger: Crossings, sent_ps: Int64s, jumps_ps: Int64s) -> tuple[Int64s, int | None]:
    """(the times with no two lines' edges on one ps, when the first edge overtakes one of the other line).

    Rounding can put an edge of A and one of B on one ps, which would look like an illegal transition: the later one then
    waits a ps. Where the motion jumps both are meant to change at once.
    """
    other = (ledger.number[1:] ^ ledger.number[:-1]) & 1 == 1
    asked = np.isin(ledger.time_ps[1:], jumps_ps) & (ledger.time_ps[1:] == ledger.time_ps[:-1])
    met = other & ~asked & (sent_ps[1:] == sent_ps[:-1])
    moved = sent_ps.copy()
    moved[1:] += met
    overtaken = other & ~asked & (moved[1:] < moved[:-1])
    return moved, int(moved[1:][overtaken].min()) if overtaken.any() else None


def _is_exact(encoder: Encoder, windows: Sequence[Window]) -> bool:
    mark = encoder.index
    if mark is None:
        return True
    whole = all(window.begin.denominator == window.end.denominator == 1 for window in windows)
    delayed = mark.delay.value or encoder.delay != Delays()
    return whole and mark.gated and not (delayed or mark.missing)


def _delays(many: int, first: int, rise_ps: int, fall_ps: int) -> Int64s:
    """The delay of each toggle of a line that begins at ``first``."""
    rising = (np.arange(many) + first) % 2 == 0
    return np.where(rising, rise_ps, fall_ps).astype(np.int64)


def _swallowed(line: Line) -> Line:
    """Without the pulses whose end a delay has brought before their begin."""
    times = line.toggles_ps
    while len(times) and (swallowed := np.flatnonzero(np.diff(times) < 0)).size:
        # Both edges of each such pulse go; of pulses that share an edge, the first one.
        first = swallowed[np.diff(swallowed, prepend=-2) > 1]
        times = np.delete(times, np.concatenate([first, first + 1]))
    return Line(line.first, times)


def _index_line(
    motion: Motion, encoder: Encoder, windows: Sequence[Window], ledger: Crossings, scale: Scale, generators: Generators
) -> Line:
    """The index line: every mark's passes, without those that are not seen."""
    mark = encoder.index
    assert mark is not None
    noise, jitter = generators("index jitter"), float(mark.jitter.value) / 90
    hysteresis = float(encoder.hysteresis.value) / 90
    begins: list[Int64s] = []
    start_inside = False
    for window in windows:
        start_inside |= (Fraction(motion.first_states) - window.begin) % window.every < window.end - window.begin
        for place in (window.begin, window.end):
            if mark.gated and place.denominator == 1:
                # The edge of A or B at that place is the edge of the index.
                begins.append(ledger.time_ps[ledger.number % window.every == int(place) % window.every])
            else:
                # The disc moves the index as it moves A and B.
                offset = float(place) + float(_wobble(encoder, np.array(float(place))))
                own = Places(offset, float(window.every), hysteresis=hysteresis, jitter=_shake(jitter, noise))
                begins.append(crossings(motion, own).time_ps)
    toggles = np.sort(np.concatenate(begins), kind="stable")
    line = Line(int(start_inside), toggles)
    gone = [2 * (n - 1) + half + line.first for n in mark.missing for half in (0, 1)]
    toggles = np.delete(toggles, [n for n in gone if n < len(toggles)])
    delay = encoder.delay
    rise_ps, fall_ps = (scale.time_ps(mark.delay) + scale.time_ps(own) for own in (delay.index_rise, delay.index_fall))
    return _swallowed(Line(line.first, toggles + _delays(len(toggles), line.first, rise_ps, fall_ps)))
