"""Tolerances that makers publish for classes of encoders, and how contacts bounce, as starting points.

Each is a data sheet's limit, not a measurement. ``typical`` and ``worst`` are the two columns of the sheet. The width of a
state follows from duty and phase: the worst cases are chosen within both limits so that it meets its own.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from tbkit.profile import Delays, Encoder
from tbkit.units import Quantity


@dataclass(frozen=True, slots=True)
class Preset:
    """An encoder with its tolerances; ``source`` names the sheet and its date, ``says`` the figures taken from it."""

    encoder: Encoder
    source: str
    says: str


@dataclass(frozen=True, slots=True)
class BouncePreset:
    """How long contacts bounce, up to ``longest``, and how often (None: not published)."""

    longest: Quantity
    pulses: tuple[int, int] | None
    source: str


def _deg(value: float) -> Quantity:
    return Quantity(Fraction(value), "deg", "", 0)


def _ns(value: int) -> Quantity:
    return Quantity(Fraction(value), "", "ns", 1)


def _us(value: int) -> Quantity:
    return Quantity(Fraction(value), "", "us", 1)


BOUNCES: dict[str, BouncePreset] = {
    "knob": BouncePreset(_us(2000), None, "Bourns PEC11R and PEC12R data sheets: contact bounce 2.0 ms at most at 15 rpm"),
    "knob-rough": BouncePreset(_us(5000), None, "a generic knob of 24 pulses, data on a distributor's page: 5.0 ms at most"),
    "switch": BouncePreset(
        _us(6200), None, "Ganssle, A Guide to Debouncing, 2004 and 2008: 6200 us at most for 16 of 18 switches (an outlier: 157 ms)"
    ),
    "contact": BouncePreset(
        _us(1000), (10, 100), "Horowitz and Hill, The Art of Electronics, 2nd edition, page 506: 10 to 100 closures in about 1 ms"
    ),
}


PRESETS: dict[str, Preset] = {
    "code-wheel-2000-typical": Preset(
        Encoder(duty_error_a=_deg(7), duty_error_b=_deg(7), phase_error=_deg(2)),
        "Broadcom/HP HEDS-9040 data sheet, option T00, pages 5-6 (no date on the reprint)",
        "pulse width error 7 deg, phase error 2 deg, typical",
    ),
    "code-wheel-2000-worst": Preset(
        Encoder(duty_error_a=_deg(40), duty_error_b=_deg(40), phase_error=_deg(10)),
        "Broadcom/HP HEDS-9040 data sheet, option T00, pages 5-6 (no date on the reprint)",
        "state down to 40 deg; within pulse width error 50 deg and phase error 15 deg, maximum",
    ),
    "code-wheel-1000-typical": Preset(
        Encoder(duty_error_a=_deg(10), duty_error_b=_deg(10), phase_error=_deg(2)),
        "HP HEDS-9140 data sheet, option B00, page 6 (no date on the reprint)",
        "pulse width error 10 deg, phase error 2 deg, typical",
    ),
    "code-wheel-1000-worst": Preset(
        Encoder(duty_error_a=_deg(35), duty_error_b=_deg(35), phase_error=_deg(10)),
        "HP HEDS-9140 data sheet, option B00, page 6 (no date on the reprint)",
        "state down to 45 deg; within pulse width error 45 deg and phase error 15 deg, maximum",
    ),
    "capacitive-2048": Preset(
        Encoder(
            duty_error_a=_deg(3.6),
            duty_error_b=_deg(3.6),
            delay=Delays(a_rise=_ns(30), a_fall=_ns(30), b_rise=_ns(30), b_fall=_ns(30)),
        ),
        "CUI AMT10 data sheet, 2021-08-04, pages 1-2",
        "duty 49 to 51 % at 256, 512, 1024 and 2048 pulses, rise and fall 30 ns",
    ),
}
