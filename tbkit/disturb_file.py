"""Reads the disturbances of a profile file."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

from tbkit.contract import A_LEADS_B, DEEDS
from tbkit.encoder import LINES
from tbkit.presets import BOUNCES
from tbkit.profile import Aperture, Bounce, Disturbance, Glitch, Invert, Missing, Press, Stuck, Swap, Together, Unknown, Where
from tbkit.reading import MOST_TIMES, ONE, optional, pair, quantity, range_, tagged
from tbkit.units import Quantity
from tbkit.yamltree import Entry, Section

MOST_BOUNCES = 1000

_WHERE = ("times", "at", "edges", "state", "rate", "phase")


def _sometimes(section: Section) -> Where | None:
    """Where a disturbance strikes if that is said, else None: everywhere."""
    return _where(section) if any(section.get(key) for key in _WHERE) else None


def _where(section: Section, example: str = "20") -> Where:
    """When a disturbance strikes: exactly one of the keys of ``_WHERE``, and ``phase`` with ``rate``."""
    given = [key for key in _WHERE[:-1] if section.get(key)]
    if len(given) != 1:
        if section.entry.is_map:
            found = " and ".join(given) or "none"
            section.entry.problem(f"found {found} of {', '.join(_WHERE[:-1])}; write one, for example `times: {example}`")
        return Where("times", 1)
    by = given[0]
    entry, phase = section.get(by), section.get("phase")
    assert entry is not None
    if phase and by != "rate":
        phase.problem("`phase` belongs to `rate`")
    match by:
        case "times":
            return Where(by, number=entry.integer(1, MOST_TIMES))
        case "at":
            items = entry.items() if entry.is_list else [entry]
            return Where(by, moments=tuple(item.quantity("time", "not negative") for item in items))
        case "edges":
            items = entry.items() if entry.is_list else [entry]
            return Where(by, numbers=tuple(item.integer(1, MOST_TIMES) for item in items))
        case "state":
            return Where(by, state=entry.choice(A_LEADS_B))
        case _:
            shift = phase.quantity("angle", "not negative") if phase else Quantity(Fraction(0), "deg", "", 0)
            return Where(by, rate=entry.quantity("rate"), phase=shift)


def _glitch(entry: Entry) -> Disturbance:
    section = entry.section(("on", "width", *_WHERE))
    on, width = section.require("on", "a"), section.require("width", "1 reject")
    shortest, longest = pair(width, "time") if width else (ONE, ONE)
    lines = tuple(item.choice(LINES) for item in (on.items() if on.is_list else [on])) if on else ("a",)
    return Glitch(lines, shortest, longest, _where(section))


def _bounce(entry: Entry) -> Disturbance:
    section = entry.section(("on", "preset", "for", "pulses", "only", *_WHERE))
    on, named, only = section.require("on", "a"), section.get("preset"), section.get("only")
    preset = BOUNCES[named.choice(tuple(BOUNCES))] if named else None
    # What a preset tells may still be told otherwise.
    time = section.get("for") if preset else section.require("for", "[0.2 us, 2 us]")
    pulses = section.get("pulses") if preset and preset.pulses else section.require("pulses", "3..9")
    # That bounces last for a tenth of their limit at least is common practice, no source.
    shortest, longest = (replace(preset.longest, value=preset.longest.value / 10), preset.longest) if preset else (ONE, ONE)
    if time:
        shortest, longest = pair(time, "time")
    fewest, most = range_(pulses, 0, MOST_BOUNCES) if pulses else (preset and preset.pulses) or (0, 0)
    which = only.choice(("both", "make", "break")) if only else "both"
    return Bounce(on.choice(LINES) if on else "a", shortest, longest, fewest, most, which, _sometimes(section))


def _missing(entry: Entry) -> Disturbance:
    section = entry.section(("on", *_WHERE))
    on = section.require("on", "a")
    return Missing(on.choice(LINES) if on else "a", _where(section, "3"))


def _stuck(entry: Entry) -> Disturbance:
    section = entry.section(("on", "level", "for", *_WHERE))
    on, level = section.require("on", "a"), section.require("level", "0")
    stuck = level.choice(("0", "1", "noise")) if level else "0"
    return Stuck(on.choice(LINES) if on else "a", stuck, optional(section, "for", "time"), _where(section, "1"))


def _swap(entry: Entry) -> Disturbance:
    entry.choice(("a-and-b",))
    return Swap()


def _invert(entry: Entry) -> Disturbance:
    return Invert(entry.choice(LINES))


def _together(entry: Entry) -> Disturbance:
    return Together(_where(entry.section(_WHERE)))


def _press(signal: str) -> Callable[[Entry], Disturbance]:
    def read(entry: Entry) -> Disturbance:
        section = entry.section(("for", "offset", "of", *_WHERE))
        offset, of = section.get("offset"), section.get("of")
        none = Quantity(Fraction(0), "", "s", 1)
        return Press(
            signal,
            quantity(section, "for", "time", "4 clocks"),
            offset.quantity("time", "any") if offset else none,
            _where(section, "5"),
            of is not None and of.choice(("edge", "answer")) == "answer",
        )

    return read


def _aperture(entry: Entry) -> Disturbance:
    return Aperture(quantity(entry.section(("width",)), "width", "time", "0.2 ns"))


def _unknown(entry: Entry) -> Disturbance:
    entry.choice(("until-reset",))
    return Unknown()


_DISTURBANCES: dict[str, Callable[[Entry], Disturbance]] = {
    "glitch": _glitch,
    "bounce": _bounce,
    "missing": _missing,
    "stuck": _stuck,
    "swap": _swap,
    "invert": _invert,
    "together": _together,
    **{signal: _press(signal) for signal in ("reset", *DEEDS)},
    "aperture": _aperture,
    "unknown": _unknown,
}


def disturbances(entry: Entry) -> tuple[Disturbance, ...]:
    """The list of disturbances; problems are noted at their places."""
    return tuple(tagged(entry, _DISTURBANCES, "a", "disturbance"))
