"""Reads a profile file into a :class:`~tbkit.profile.Profile`."""

from __future__ import annotations

import re
from collections.abc import Callable
from fractions import Fraction
from pathlib import Path
from typing import TypeVar

from tbkit.contract import A_LEADS_B
from tbkit.profile import (
    Action,
    Bounce,
    Disturbance,
    Dither,
    Drive,
    Encoder,
    Glitch,
    Illegal,
    IndexMark,
    Missing,
    Move,
    Profile,
    Repeat,
    Rest,
    Reverse,
    Walk,
)
from tbkit.units import Quantity
from tbkit.yamltree import Entry, Section, load, nearest, quoted

T = TypeVar("T")

MOST_TIMES = 1_000_000
MOST_BOUNCES = 1000
NEEDS = ("count", "direction", "step", "error", "sticky-error", "clear-error", "index", "reset", "no-reset", "filter")
_LINES = ("a", "b", "index")
_ONE = Quantity(Fraction(1), "states", "clocks", 1)


def _quantity(section: Section, key: str, kind: str, example: str, sign: str = "positive") -> Quantity:
    entry = section.require(key, example)
    return entry.quantity(kind, sign) if entry else _ONE


def _times(section: Section, default: int | None = None) -> int:
    entry = section.get("times") if default is not None else section.require("times", "10")
    return entry.integer(1, MOST_TIMES) if entry else default or 1


def _range(entry: Entry, lowest: int, highest: int) -> tuple[int, int]:
    """``3..9`` or a single number."""

    def read(text: str) -> tuple[int, int]:
        match = re.fullmatch(r"(\d{1,9})(?:\.\.(\d{1,9}))?", text)
        least, most = (int(match.group(1)), int(match.group(2) or match.group(1))) if match else (lowest - 1, 0)
        if least > most >= lowest:
            msg = f"the range {text} runs backwards; write {most}..{least}"
            raise ValueError(msg)
        if not lowest <= least <= most <= highest:
            msg = f"found {quoted(text)}, expected a whole number from {lowest} to {highest}, or a range such as 3..9"
            raise ValueError(msg)
        return least, most

    return entry.convert(read, (lowest, lowest))


def _pair(entry: Entry, kind: str) -> tuple[Quantity, Quantity]:
    """``2 us`` or ``[0.2 us, 2 us]``."""
    if not entry.is_list:
        one = entry.quantity(kind)
        return one, one
    items = entry.items()
    if len(items) != 2:
        if items:
            entry.problem(f"found a list of {len(items)}, expected one {kind} or [least, most]")
        return _ONE, _ONE
    least, most = (item.quantity(kind) for item in items)
    return least, most


def _rest(entry: Entry) -> Action:
    return Rest(entry.quantity("time", "not negative"))


def _move(entry: Entry) -> Action:
    section = entry.section(("by", "speed", "accel"))
    by = _quantity(section, "by", "distance", "2 rev", "not zero")
    speed = _quantity(section, "speed", "speed", "3000 rpm")
    accel = section.get("accel")
    return Move(by, speed, accel.quantity("acceleration") if accel else None)


def _reverse(entry: Entry) -> Action:
    section = entry.section(("in", "going", "run", "speed", "times"))
    state, going, run = section.require("in", "11"), section.require("going", "forward"), section.get("run")
    return Reverse(
        state.choice(A_LEADS_B) if state else "00",
        going is None or going.choice(("forward", "backward")) == "forward",
        run.quantity("distance") if run else Quantity(Fraction(3), "states", "", 0),
        _quantity(section, "speed", "speed", "1 states/dwell"),
        _times(section, 1),
    )


def _dither(entry: Entry) -> Action:
    section = entry.section(("over", "every", "times"))
    over = section.get("over")
    return Dither(
        over.quantity("distance", "not zero") if over else Quantity(Fraction(1), "states", "", 0),
        _quantity(section, "every", "time", "2 us"),
        _times(section),
    )


def _illegal(entry: Entry) -> Action:
    section = entry.section(("every", "times"))
    return Illegal(_quantity(section, "every", "time", "2 settle"), _times(section, 1))


def _walk(entry: Entry) -> Action:
    section = entry.section(("travel", "speed", "run"))
    speed, run = section.require("speed", "[0.1 states/dwell, 1 states/dwell]"), section.get("run")
    slow, fast = _pair(speed, "speed") if speed else (_ONE, _ONE)
    shortest, longest = _range(run, 1, MOST_TIMES) if run else (1, 8)
    return Walk(_quantity(section, "travel", "distance", "2000 states"), slow, fast, shortest, longest)


def _drive(signal: str) -> Callable[[Entry], Action]:
    def read(entry: Entry) -> Action:
        section = entry.section(("for", "moving"))
        moving = section.get("moving")
        return Drive(
            signal,
            _quantity(section, "for", "time", "4 clocks"),
            moving.quantity("speed", "not zero") if moving else None,
        )

    return read


def _repeat(entry: Entry) -> Action:
    section = entry.section(("times", "do"))
    do = section.require("do", "[{rest: 10 us}]")
    return Repeat(_times(section), _actions(do) if do else ())


_ACTIONS: dict[str, Callable[[Entry], Action]] = {
    "rest": _rest,
    "move": _move,
    "reverse": _reverse,
    "dither": _dither,
    "illegal": _illegal,
    "walk": _walk,
    "reset": _drive("reset"),
    "clear": _drive("clear"),
    "repeat": _repeat,
}


def _glitch(entry: Entry) -> Disturbance:
    section = entry.section(("on", "width", "times"))
    on = section.require("on", "a")
    return Glitch(on.choice(_LINES) if on else "a", _quantity(section, "width", "time", "1 reject"), _times(section))


def _bounce(entry: Entry) -> Disturbance:
    section = entry.section(("on", "for", "pulses"))
    on, time, pulses = section.require("on", "a"), section.require("for", "[0.2 us, 2 us]"), section.require("pulses", "3..9")
    shortest, longest = _pair(time, "time") if time else (_ONE, _ONE)
    fewest, most = _range(pulses, 0, MOST_BOUNCES) if pulses else (0, 0)
    return Bounce(on.choice(_LINES) if on else "a", shortest, longest, fewest, most)


def _missing(entry: Entry) -> Disturbance:
    section = entry.section(("on", "pulses"))
    on, pulses = section.require("on", "a"), section.require("pulses", "[3, 8]")
    numbers = tuple(item.integer(1, MOST_TIMES) for item in pulses.items()) if pulses else ()
    return Missing(on.choice(_LINES) if on else "a", numbers)


_DISTURBANCES: dict[str, Callable[[Entry], Disturbance]] = {"glitch": _glitch, "bounce": _bounce, "missing": _missing}


def _tagged(entry: Entry, readers: dict[str, Callable[[Entry], T]], article: str, what: str) -> list[T]:
    """A list of maps with one key each: the name of an action and its settings."""
    found: list[T] = []
    for item in entry.items(f"a list of {what}s, each begun with `-`"):
        pairs = item.pairs(f"{article} {what} such as `{next(iter(readers))}: ...`")
        if not pairs and item.sound:
            item.problem(f"found an empty map, expected {article} {what} such as `{next(iter(readers))}: ...`")
        if len(pairs) > 1:
            item.problem(f"found {len(pairs)} keys, expected one {what} an item; start each with its own `-`")
        for name, value in pairs[:1]:
            if name in readers:
                found.append(readers[name](value))
            else:
                value.problem(f"unknown {what}; known: {', '.join(readers)}{nearest(name, readers)}")
    return found


def _actions(entry: Entry) -> tuple[Action, ...]:
    return tuple(_tagged(entry, _ACTIONS, "an", "action"))


def _encoder(entry: Entry) -> Encoder:
    section = entry.section(("lines", "start", "index"))
    lines, start, index = section.get("lines"), section.get("start"), section.get("index")
    mark = None
    if index is not None:
        inner = index.section(("width", "at"))
        width, at = inner.require("width", "90 deg"), inner.require("at", "0 deg")
        mark = IndexMark(width.quantity("angle") if width else _ONE, at.quantity("angle", "not negative") if at else _ONE)
        if lines is None:
            index.problem("an index needs the line count; add `lines: 1024` to the encoder")
    line_count = lines.integer(1, 1 << 24) if lines else None
    if index and mark and line_count and entry.sound and mark.width.value >= 360 * line_count:
        index.problem(f"the width {mark.width} is no less than the whole revolution of {360 * line_count} deg")
    return Encoder(line_count, start.choice(A_LEADS_B) if start else "00", mark)


def read_profile(path: Path) -> Profile:
    """Read and check a profile file.

    Raises:
        InputError: with every problem found, each at its line.
    """
    document = load(path, "profile")
    top = document.root.section(("profile", "about", "needs", "power_up", "seed", "encoder", "motion", "disturb"))
    name, about, needs = top.require("profile", "spindle-reversal"), top.get("about"), top.get("needs")
    seed, encoder, power_up = top.get("seed"), top.get("encoder"), top.get("power_up")
    motion, disturb = top.require("motion", "[{rest: 10 us}]"), top.get("disturb")

    def read_name(text: str) -> str:
        if re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9._-]{0,63}", text):
            return text
        msg = f"found {quoted(text)}, expected up to 64 letters, digits and . _ - that start with a letter or digit"
        raise ValueError(msg)

    profile = Profile(
        path,
        name.convert(read_name, "") if name else "",
        about.text() if about else "",
        tuple(item.choice(NEEDS) for item in needs.items()) if needs else (),
        seed.integer(0, (1 << 63) - 1) if seed else None,
        _actions(motion) if motion else (),
        _encoder(encoder) if encoder else Encoder(),
        tuple(_tagged(disturb, _DISTURBANCES, "a", "disturbance")) if disturb else (),
        power_up is not None and power_up.flag(),
    )
    document.finish()
    return profile
