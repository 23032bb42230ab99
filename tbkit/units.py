"""Quantities: text with a unit, kept exact, and turned into ps and states in one place.

A quantity stays a fraction until :class:`Scale` resolves it, because several units (``dwell``, ``clocks``, ``rev``) mean
nothing before a decoder and an encoder are known. Times come out as whole picoseconds, distances as states.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from math import ceil, pi
from typing import TYPE_CHECKING

from tbkit.errors import UnfitError

if TYPE_CHECKING:
    from tbkit.contract import Contract

PS_PER_S = 10**12

_TIME_PS = {"s": PS_PER_S, "ms": 10**9, "us": 10**6, "ns": 10**3, "ps": 1}
_DECODER_TIMES = ("clocks", "dwell", "shortest", "reject", "pass", "settle")
_METRES = {"m": Fraction(1), "mm": Fraction(1, 10**3), "um": Fraction(1, 10**6)}
_DISTANCES = ("states", "cycles", "rev", "deg", "rad", *_METRES, "overflow", "underflow")
#: A revolution in radians; a fraction that near makes no difference to whole ps.
_TURN_RAD = Fraction(2 * pi).limit_denominator(10**15)
_RATES_HZ = {"Hz": 1, "kHz": 10**3, "MHz": 10**6, "GHz": 10**9}
_SINGULAR = {"clock": "clocks", "state": "states", "cycle": "cycles"}

#: What to write for each kind of quantity; quoted in messages.
UNITS = {
    "time": ", ".join((*_TIME_PS, *_DECODER_TIMES)),
    "distance": ", ".join(_DISTANCES),
    "speed": "rpm, rev/s, deg/s, rad/s, mm/s, m/s, Hz (cycles per second), or any distance/time such as states/dwell",
    "acceleration": "rev/s2, deg/s2, rad/s2, m/s2, or any distance/time2 such as states/ms2",
    "jerk": "rev/s3, deg/s3, rad/s3, m/s3, or any distance/time3 such as states/ms3",
    "length": "m, mm, um",
    "angle": "deg (electrical degrees)",
    "rate": ", ".join(_RATES_HZ),
}

_QUANTITY = re.compile(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE]([+-]?\d+))?)\s*(.*?)\s*")
#: Longer numbers and larger exponents have no use, and would make fractions that never end.
_MOST_DIGITS, _LARGEST_EXPONENT = 40, 30
#: Longer times are refused: 11.6 days, so that sums of a few still fit into 64 bits.
LONGEST_PS = 10**18
#: The clock period where there is no decoder to tell it: how fast a broken wire chatters.
NOMINAL_PERIOD_PS = 10_000


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with a unit: ``value`` times ``distance`` per ``time`` to the power ``power``; unused parts are ``""``."""

    value: Fraction
    distance: str
    time: str
    power: int

    def __str__(self) -> str:
        number = str(self.value) if self.value.denominator == 1 else f"{float(self.value):g}"
        per = self.time if self.power < 2 else f"{self.time}{self.power}"
        return f"{number} {'/'.join(part for part in (self.distance, per) if part)}"


def a_kind(kind: str) -> str:
    """The kind with its article."""
    return f"an {kind}" if kind[0] == "a" else f"a {kind}"


def parse(text: str, kind: str) -> Quantity:
    """Read ``text`` as a quantity of ``kind``, one of the keys of :data:`UNITS`.

    Raises:
        ValueError: what stood there and which units fit.
    """
    match = _QUANTITY.fullmatch(text)
    shown = repr(text[:60])
    unfit = f"found {shown}, expected a number and a unit for {a_kind(kind)}: {UNITS[kind]}"
    if match is None:
        raise ValueError(unfit)
    number, exponent, unit = match.groups()
    if len(number) > _MOST_DIGITS or len(exponent or "") > 4 or abs(int(exponent or 0)) > _LARGEST_EXPONENT:
        msg = f"found {shown}, expected a number of at most {_MOST_DIGITS} digits with an exponent of at most {_LARGEST_EXPONENT}"
        raise ValueError(msg)
    quantity = _with_unit(Fraction(number), unit, kind)
    if quantity is None:
        raise ValueError(unfit)
    return quantity


def _with_unit(value: Fraction, unit: str, kind: str) -> Quantity | None:
    if kind == "time":
        name = _SINGULAR.get(unit, unit)
        return Quantity(value, "", name, 1) if name in _TIME_PS or name in _DECODER_TIMES else None
    if kind == "distance":
        name = _SINGULAR.get(unit, unit)
        return Quantity(value, name, "", 0) if name in _DISTANCES else None
    if kind == "length":
        return Quantity(value * _METRES[unit], "m", "", 0) if unit in _METRES else None
    if kind == "angle":
        return Quantity(value, "deg", "", 0) if unit == "deg" else None
    if kind == "rate":
        return Quantity(value * _RATES_HZ[unit], "", "s", 1) if unit in _RATES_HZ else None
    if kind == "speed" and unit == "rpm":
        return Quantity(value / 60, "rev", "s", 1)
    if kind == "speed" and unit in _RATES_HZ:
        return Quantity(value * _RATES_HZ[unit], "cycles", "s", 1)
    distance, slash, time = unit.partition("/")
    power = {"speed": 1, "acceleration": 2, "jerk": 3}[kind]
    if power > 1:
        if not time.endswith(str(power)):
            return None
        time = time[:-1].removesuffix("^")
    distance, time = _SINGULAR.get(distance, distance), _SINGULAR.get(time, time)
    if time == "min":
        value, time = value / 60**power, "s"
    if not slash or distance not in _DISTANCES or not (time in _TIME_PS or time in _DECODER_TIMES):
        return None
    return Quantity(value, distance, time, power)


def _disc_units(lines: int | None, pitch: Quantity | None) -> dict[str, Fraction]:
    """Distance units that an encoder gives, in states."""
    states = {"states": Fraction(1), "cycles": Fraction(4)}
    if lines is not None:
        states |= {"rev": Fraction(4 * lines), "deg": Fraction(4 * lines, 360), "rad": 4 * lines / _TURN_RAD}
    if pitch is not None:
        states |= {name: 4 * length / pitch.value for name, length in _METRES.items()}
    return states


@dataclass(frozen=True, slots=True)
class Scale:
    """What the decoder's and the encoder's own units mean for one contract and one encoder.

    Attributes:
        period_ps: clock period.
        clocks: length of each decoder unit of time, in clocks (no entry: there is no decoder).
        states: length of each distance unit, in states (no entry: the unit has no meaning here).
    """

    period_ps: int
    clocks: dict[str, int]
    states: dict[str, Fraction]

    @classmethod
    def of(cls, contract: Contract | None, lines: int | None, pitch: Quantity | None = None) -> Scale:
        """Build the scale for a decoder (None: physical units only) and an encoder.

        ``lines`` are its cycles a revolution, ``pitch`` is the length of a cycle of a linear one (None: not stated).
        """
        states = _disc_units(lines, pitch)
        if contract is None:
            return cls(NOMINAL_PERIOD_PS, {}, states)
        filtering, count = contract.filter, contract.count
        clocks = {
            "clocks": 1,
            # Any single pulse of this length must be followed, so reversals at this speed are legal too.
            "dwell": max(contract.shortest_state, filtering.passes),
            # Straight running holds each line for two states, so a filter only has to pass two of them.
            "shortest": max(contract.shortest_state, ceil(filtering.passes / 2)),
            "reject": filtering.rejects,
            "pass": filtering.passes,
            "settle": contract.settle_clocks,
            # By how much later than a line an input must change to take effect with it; no units that can be written.
            "answer": contract.main_latency.min - contract.latency.inputs.min,
            "answer of clear": contract.latency.error.min - contract.latency.clear.min,
        }
        if count is not None:
            states["overflow"] = Fraction((count.highest - contract.start.count + 1) * count.states_per_count)
            states["underflow"] = Fraction((contract.start.count - count.lowest + 1) * count.states_per_count)
        return cls(contract.clock.period_ps, clocks, states)

    def _unit_ps(self, unit: str) -> Fraction:
        if unit in _TIME_PS:
            return Fraction(_TIME_PS[unit])
        if unit not in self.clocks:
            msg = f"the unit {unit!r} needs a decoder; name its file after the profile's"
            raise UnfitError(msg)
        return Fraction(self.clocks[unit] * self.period_ps)

    @staticmethod
    def rate_per_ps(quantity: Quantity) -> float:
        """A rate as a number per ps."""
        return float(quantity.value / PS_PER_S)

    def _unit_states(self, unit: str) -> Fraction:
        if unit not in self.states:
            if unit in ("rev", "deg", "rad"):
                msg = f"the unit {unit!r} needs the encoder's line count: add `encoder: {{lines: 1024}}` to the profile"
            elif unit in _METRES:
                msg = f"the unit {unit!r} needs the length of a cycle: add `encoder: {{pitch: 20 um}}` to the profile"
            else:
                msg = f"the unit {unit!r} needs a decoder with a count output"
            raise UnfitError(msg)
        return self.states[unit]

    def time_ps(self, quantity: Quantity) -> int:
        """Length of a time in ps, rounded once, half to even.

        Raises:
            UnfitError: the time is longer than :data:`LONGEST_PS`.
        """
        time_ps = round(quantity.value * self._unit_ps(quantity.time))
        if abs(time_ps) > LONGEST_PS:
            msg = f"{quantity} is longer than {LONGEST_PS // PS_PER_S} s, the most that is simulated"
            raise UnfitError(msg)
        return time_ps

    def distance_states(self, quantity: Quantity) -> Fraction:
        """Length of a distance in states, exact.

        Raises:
            UnfitError: the unit has no meaning for this decoder and encoder.
        """
        return quantity.value * self._unit_states(quantity.distance)

    def per_time(self, quantity: Quantity) -> Fraction:
        """A speed in states/ps, an acceleration in states/ps² or a jerk in states/ps³, exact.

        Raises:
            UnfitError: the unit has no meaning for this decoder and encoder, or its time is zero clocks long.
        """
        time = self._unit_ps(quantity.time)
        if time == 0:
            msg = f"{quantity}: one {quantity.time!r} is 0 clocks for this decoder"
            raise UnfitError(msg)
        return quantity.value * self._unit_states(quantity.distance) / time**quantity.power
