"""A motion profile: what the machine does, the encoder on it, and what goes wrong, as frozen values.

Quantities keep their units here, since several mean nothing before a decoder is known.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path

from tbkit.units import Quantity

_NO_ANGLE = Quantity(Fraction(0), "deg", "", 0)
_NO_TIME = Quantity(Fraction(0), "", "s", 1)


@dataclass(frozen=True, slots=True)
class Rest:
    """All lines still for ``time``."""

    time: Quantity


@dataclass(frozen=True, slots=True)
class Move:
    """Over the signed distance ``by``: at constant speed, as a trapezoid with ``accel``, in seven phases with ``jerk`` too.

    ``start_speed`` and ``end_speed`` (None: 0) are those of a trapezoid or of seven phases. ``decel`` (None: as ``accel``) is
    how a trapezoid slows down.
    """

    by: Quantity
    speed: Quantity
    accel: Quantity | None = None
    jerk: Quantity | None = None
    start_speed: Quantity | None = None
    end_speed: Quantity | None = None
    decel: Quantity | None = None


@dataclass(frozen=True, slots=True)
class Return:
    """Back to exactly where the motion began."""

    speed: Quantity
    accel: Quantity | None = None
    jerk: Quantity | None = None


@dataclass(frozen=True, slots=True)
class Sine:
    """``cycles`` to and fro by ``amplitude`` either way, the rate going evenly from ``first`` to ``last``."""

    amplitude: Quantity
    first: Quantity
    last: Quantity
    cycles: int


@dataclass(frozen=True, slots=True)
class Table:
    """Points (time, distance) joined by straight lines; the first is where the shaft is."""

    points: tuple[tuple[Quantity, Quantity], ...]


@dataclass(frozen=True, slots=True)
class Clicks:
    """A knob with detents: ``times`` clicks of the signed distance ``click``, each taking ``time``, one ``every`` so often."""

    click: Quantity
    time: Quantity
    every: Quantity
    times: int


@dataclass(frozen=True, slots=True)
class Home:
    """Looks for the index: fast past it, back to ``back_off`` before it, slowly into its middle."""

    forward: bool
    fast: Quantity
    slow: Quantity
    accel: Quantity
    back_off: Quantity


@dataclass(frozen=True, slots=True)
class Reverse:
    """Run ``run`` or a little more until the middle of ``state``, turn round there, run ``run`` back; ``times`` over."""

    state: str
    forward: bool
    run: Quantity
    speed: Quantity
    times: int


@dataclass(frozen=True, slots=True)
class Dither:
    """Rock to and fro over ``over``, ``times`` there and back, one way taking ``every``."""

    over: Quantity
    every: Quantity
    times: int


@dataclass(frozen=True, slots=True)
class Illegal:
    """Both lines change at once, ``times`` over; half of ``every`` is waited before and after each."""

    every: Quantity
    times: int


@dataclass(frozen=True, slots=True)
class Walk:
    """Runs of random length (in states, ``shortest`` to ``longest``), direction and speed until ``travel`` is covered."""

    travel: Quantity
    slow: Quantity
    fast: Quantity
    shortest: int
    longest: int
    accel: Quantity | None = None


@dataclass(frozen=True, slots=True)
class Drive:
    """Something is done to an input of the decoder for ``time``; with ``moving`` the shaft runs meanwhile."""

    signal: str
    time: Quantity
    moving: Quantity | None


@dataclass(frozen=True, slots=True)
class Repeat:
    times: int
    actions: tuple[Action, ...]


Action = Rest | Move | Return | Sine | Table | Clicks | Home | Reverse | Dither | Illegal | Walk | Drive | Repeat


@dataclass(frozen=True, slots=True)
class Where:
    """When a disturbance strikes; ``by`` says how.

    Attributes:
        by: ``times`` (``number`` of them, spread at random), ``at`` (the ``moments`` after the motion's begin), ``edges``
            (the ``numbers`` of true edges, from 1), ``state`` (each time the shaft enters ``state``) or ``rate``
            (periodic with ``rate``, the first after ``phase`` degrees of it).
    """

    by: str
    number: int = 0
    moments: tuple[Quantity, ...] = ()
    numbers: tuple[int, ...] = ()
    state: str = "00"
    rate: Quantity | None = None
    phase: Quantity = _NO_ANGLE


@dataclass(frozen=True, slots=True)
class Glitch:
    """Pulses on one or more lines at once, each as long as drawn between ``shortest`` and ``longest``."""

    lines: tuple[str, ...]
    shortest: Quantity
    longest: Quantity
    where: Where


@dataclass(frozen=True, slots=True)
class Bounce:
    """Edges of the line chatter: a number of extra pulses within a time, both drawn from a range.

    ``only``: edges that ``make`` (the line becomes active), that ``break``, or ``both``. ``where``: the first such edge from each
    moment on (None: every edge).
    """

    line: str
    shortest: Quantity
    longest: Quantity
    fewest: int
    most: int
    only: str = "both"
    where: Where | None = None


@dataclass(frozen=True, slots=True)
class Missing:
    """Pulses of the line that never appear, both edges of each: the first one to begin from each moment on."""

    line: str
    where: Where


@dataclass(frozen=True, slots=True)
class Stuck:
    """The line stays at ``level`` for ``time`` (None: to the end); ``noise``: a broken wire that chatters at random."""

    line: str
    level: str
    time: Quantity | None
    where: Where


@dataclass(frozen=True, slots=True)
class Swap:
    """A and B are swapped."""


@dataclass(frozen=True, slots=True)
class Invert:
    """The line is inverted."""

    line: str


@dataclass(frozen=True, slots=True)
class Together:
    """A state is skipped: the edge that begins it waits for the edge that ends it, so both lines change at once."""

    where: Where


@dataclass(frozen=True, slots=True)
class Press:
    """Something is done to an input of the decoder for ``time``, ``offset`` after each moment.

    Not before the motion begins; presses that overlap are one. ``signal``: ``reset`` or a word of
    :data:`~tbkit.contract.DEEDS`. With ``of_answer`` the offset is that to the clock in which the decoder answers to the moment:
    with an offset of none both take effect in the same clock.
    """

    signal: str
    time: Quantity
    offset: Quantity
    where: Where
    of_answer: bool = False


@dataclass(frozen=True, slots=True)
class Aperture:
    """Metastability as RTL simulation can show it.

    An edge less than ``width`` before a clock edge is seen by it or by the next one, each line on its own, by the seed.
    """

    width: Quantity


@dataclass(frozen=True, slots=True)
class Unknown:
    """A, B and index are X from power-up until half of the reset is over; a decoder without reset is left out."""


Disturbance = Glitch | Bounce | Missing | Stuck | Swap | Invert | Together | Press | Aperture | Unknown


@dataclass(frozen=True, slots=True)
class IndexMark:
    """The index mark of a disc.

    Attributes:
        width, at: electrical degrees; ``at`` counts from the start of the state 00 that begins a revolution.
        gated: its edges are those of A and B at its ends, as in encoders that gate it; otherwise it has its own.
        delay: of the line against A and B.
        jitter: of its own edges, electrical degrees, standard deviation.
        marks: further marks, as angles of the shaft after the first.
        missing: passes of the mark (numbered from 1) that are not seen.
    """

    width: Quantity
    at: Quantity
    gated: bool = True
    delay: Quantity = _NO_TIME
    jitter: Quantity = _NO_ANGLE
    marks: tuple[Quantity, ...] = ()
    missing: tuple[int, ...] = ()


@dataclass(frozen=True, slots=True)
class Delays:
    """How much later than the disc each edge of a line comes, by its direction."""

    a_rise: Quantity = _NO_TIME
    a_fall: Quantity = _NO_TIME
    b_rise: Quantity = _NO_TIME
    b_fall: Quantity = _NO_TIME
    index_rise: Quantity = _NO_TIME
    index_fall: Quantity = _NO_TIME


@dataclass(frozen=True, slots=True)
class Encoder:
    """An incremental encoder; angles are electrical degrees.

    Attributes:
        lines: cycles a revolution.
        start: the state AB in whose middle the shaft begins.
        index: its mark, if it has one.
        pitch: length of a cycle of a linear encoder.
        duty_error_a, duty_error_b: by how much each line is high longer than 180.
        phase_error: by how much the centre of B high comes later than 90 after the centre of A high.
        state_error: width of the band in which each graduation lies about its place.
        jitter: of every edge each time it passes, standard deviation.
        eccentricity: amplitude of the once-a-revolution error, which is none where the shaft begins.
        hysteresis: how far the shaft turns back before the encoder follows.
        delay: of each line and edge.
    """

    lines: int | None = None
    start: str = "00"
    index: IndexMark | None = None
    pitch: Quantity | None = None
    duty_error_a: Quantity = _NO_ANGLE
    duty_error_b: Quantity = _NO_ANGLE
    phase_error: Quantity = _NO_ANGLE
    state_error: Quantity = _NO_ANGLE
    jitter: Quantity = _NO_ANGLE
    eccentricity: Quantity = _NO_ANGLE
    hysteresis: Quantity = _NO_ANGLE
    delay: Delays = field(default_factory=Delays)


@dataclass(frozen=True, slots=True)
class Profile:
    """``needs``: what a decoder must have for this profile to make sense; without it the profile is left out."""

    file: Path
    name: str
    about: str
    needs: tuple[str, ...]
    seed: int | None
    motion: tuple[Action, ...]
    encoder: Encoder = field(default_factory=Encoder)
    disturb: tuple[Disturbance, ...] = ()
    power_up: bool = False
