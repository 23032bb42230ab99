"""A motion profile: what the machine does, the encoder on it, and what goes wrong, as frozen values.

Quantities keep their units here, since several mean nothing before a decoder is known.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from tbkit.units import Quantity


@dataclass(frozen=True, slots=True)
class Rest:
    """All lines still for ``time``."""

    time: Quantity


@dataclass(frozen=True, slots=True)
class Move:
    """From rest to rest over the signed distance ``by``; constant speed, or a trapezoid if ``accel`` is given."""

    by: Quantity
    speed: Quantity
    accel: Quantity | None


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


@dataclass(frozen=True, slots=True)
class Drive:
    """An input of the decoder (``reset`` or ``clear``) is asserted for ``time``; with ``moving`` the shaft runs meanwhile."""

    signal: str
    time: Quantity
    moving: Quantity | None


@dataclass(frozen=True, slots=True)
class Repeat:
    times: int
    actions: tuple[Action, ...]


Action = Rest | Move | Reverse | Dither | Illegal | Walk | Drive | Repeat


@dataclass(frozen=True, slots=True)
class Glitch:
    """``times`` pulses of ``width`` on one line, spread over the run at random."""

    line: str
    width: Quantity
    times: int


@dataclass(frozen=True, slots=True)
class Bounce:
    """Each edge of the line chatters: a number of extra pulses within a time, both drawn from a range."""

    line: str
    shortest: Quantity
    longest: Quantity
    fewest: int
    most: int


@dataclass(frozen=True, slots=True)
class Missing:
    """Pulses of the line (numbered from 1) that never appear: both their edges are missing."""

    line: str
    pulses: tuple[int, ...]


Disturbance = Glitch | Bounce | Missing


@dataclass(frozen=True, slots=True)
class IndexMark:
    """``width`` and position ``at`` in electrical degrees from the start of state 00 that begins a revolution."""

    width: Quantity
    at: Quantity


@dataclass(frozen=True, slots=True)
class Encoder:
    """``lines``: cycles a revolution; ``start``: the state AB in whose middle the shaft begins."""

    lines: int | None = None
    start: str = "00"
    index: IndexMark | None = None


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
