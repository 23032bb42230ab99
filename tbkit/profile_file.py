"""Reads a profile file into a :class:`~tbkit.profile.Profile`."""

from __future__ import annotations

import csv
import re
from collections.abc import Callable
from fractions import Fraction
from pathlib import Path

from tbkit import encoder_file
from tbkit.contract import A_LEADS_B, DEEDS
from tbkit.disturb_file import disturbances
from tbkit.profile import (
    Action,
    Clicks,
    Dither,
    Drive,
    Encoder,
    Home,
    Illegal,
    Move,
    Profile,
    Repeat,
    Rest,
    Return,
    Reverse,
    Sine,
    Table,
    Walk,
)
from tbkit.reading import MOST_TIMES, ONE, optional, pair, quantity, range_, tagged, times
from tbkit.units import Quantity, parse
from tbkit.yamltree import Entry, Section, load, quoted

NEEDS = (
    "count", "direction", "step", "error", "sticky-error", "index", "reset", "no-reset", "filter", *DEEDS.values(),
)  # fmt: skip


def _rest(entry: Entry) -> Action:
    return Rest(entry.quantity("time", "not negative"))


def _curve(section: Section) -> tuple[Quantity, Quantity | None, Quantity | None]:
    """Speed, acceleration and jerk."""
    speed, jerk = quantity(section, "speed", "speed", "3000 rpm"), section.get("jerk")
    if jerk and not section.get("accel"):
        jerk.problem("`jerk` needs `accel`; add for example `accel: 4000 rev/s2`")
    return speed, optional(section, "accel", "acceleration"), optional(section, "jerk", "jerk")


def _move(entry: Entry) -> Action:
    section = entry.section(("by", "speed", "accel", "decel", "jerk", "start_speed", "end_speed"))
    by = quantity(section, "by", "distance", "2 rev", "not zero")
    if (decel := section.get("decel")) and section.get("jerk"):
        decel.problem("`decel` belongs to a move without `jerk`; with it both ramps have the same bounds")
    for key in ("decel", "start_speed", "end_speed"):
        if (given := section.get(key)) and not section.get("accel"):
            given.problem(f"`{key}` needs `accel`; without it the whole move has one speed")
    ends = optional(section, "start_speed", "speed"), optional(section, "end_speed", "speed")
    return Move(by, *_curve(section), *ends, optional(section, "decel", "acceleration"))


def _return(entry: Entry) -> Action:
    return Return(*_curve(entry.section(("speed", "accel", "jerk"))))


def _sine(entry: Entry) -> Action:
    section = entry.section(("amplitude", "rate", "cycles"))
    rate, cycles = section.require("rate", "[1 Hz, 50 Hz]"), section.require("cycles", "10")
    first, last = pair(rate, "rate", rising=False) if rate else (ONE, ONE)
    amplitude = quantity(section, "amplitude", "distance", "10 deg")
    return Sine(amplitude, first, last, cycles.integer(1, MOST_TIMES) if cycles else 1)


def _table(entry: Entry) -> Action:
    """A CSV file of two columns whose first line names them with their units, such as ``time_ms,angle_deg``."""
    name = entry.section(("file",)).require("file", "run.csv")
    if name is None:
        return Rest(ONE)

    def read(text: str) -> tuple[tuple[Quantity, Quantity], ...]:
        path = Path(entry.file).parent / text
        try:
            rows = list(csv.reader(path.read_text("utf-8").splitlines()))
        except (OSError, UnicodeDecodeError, csv.Error) as error:
            msg = f"{quoted(text)} cannot be read as a table: {error}"
            raise ValueError(msg) from error
        return _points(rows, text)

    none: tuple[tuple[Quantity, Quantity], ...] = ()
    points = name.convert(read, none)
    return Table(points) if points else Rest(ONE)


def _points(rows: list[list[str]], name: str) -> tuple[tuple[Quantity, Quantity], ...]:
    units = [column.strip().rpartition("_")[2] for column in rows[0]] if rows else []
    if len(units) != 2 or len(rows) < 3:
        msg = f"{name}: expected a line such as time_ms,angle_deg and two lines of numbers or more"
        raise ValueError(msg)
    points: list[tuple[Quantity, Quantity]] = []
    for number, row in enumerate(rows[1:], start=2):
        try:
            time, place = row
            point = parse(f"{time.strip()} {units[0]}", "time"), parse(f"{place.strip()} {units[1]}", "distance")
        except ValueError as error:
            msg = f"{name}:{number}: {error}" if len(row) == 2 else f"{name}:{number}: found {len(row)} columns, expected 2"
            raise ValueError(msg) from error
        if points and point[0].value <= points[-1][0].value:
            msg = f"{name}:{number}: the time {time.strip()} is not after the one before"
            raise ValueError(msg)
        points.append(point)
    return tuple(points)


def _clicks(entry: Entry) -> Action:
    section = entry.section(("by", "time", "every", "times"))
    by = quantity(section, "by", "distance", "4 states", "not zero")
    time, every = quantity(section, "time", "time", "20 ms"), quantity(section, "every", "time", "150 ms")
    return Clicks(by, time, every, times(section))


def _home(entry: Entry) -> Action:
    section = entry.section(("going", "fast", "slow", "accel", "back_off"))
    going = section.require("going", "backward")
    return Home(
        going is not None and going.choice(("forward", "backward")) == "forward",
        quantity(section, "fast", "speed", "300 rpm"),
        quantity(section, "slow", "speed", "10 rpm"),
        quantity(section, "accel", "acceleration", "100 rev/s2"),
        quantity(section, "back_off", "distance", "8 states"),
    )


def _reverse(entry: Entry) -> Action:
    section = entry.section(("in", "going", "run", "speed", "times"))
    state, going, run = section.require("in", "11"), section.require("going", "forward"), section.get("run")
    return Reverse(
        state.choice(A_LEADS_B) if state else "00",
        going is None or going.choice(("forward", "backward")) == "forward",
        run.quantity("distance") if run else Quantity(Fraction(3), "states", "", 0),
        quantity(section, "speed", "speed", "1 states/dwell"),
        times(section, 1),
    )


def _dither(entry: Entry) -> Action:
    section = entry.section(("over", "every", "times"))
    over = section.get("over")
    return Dither(
        over.quantity("distance", "not zero") if over else Quantity(Fraction(1), "states", "", 0),
        quantity(section, "every", "time", "2 us"),
        times(section),
    )


def _illegal(entry: Entry) -> Action:
    section = entry.section(("every", "times"))
    return Illegal(quantity(section, "every", "time", "2 settle"), times(section, 1))


def _walk(entry: Entry) -> Action:
    section = entry.section(("travel", "speed", "run", "accel"))
    speed, run = section.require("speed", "[0.1 states/dwell, 1 states/dwell]"), section.get("run")
    slow, fast = pair(speed, "speed") if speed else (ONE, ONE)
    shortest, longest = range_(run, 1, MOST_TIMES) if run else (1, 8)
    return Walk(
        quantity(section, "travel", "distance", "2000 states"),
        slow,
        fast,
        shortest,
        longest,
        optional(section, "accel", "acceleration"),
    )


def _drive(signal: str) -> Callable[[Entry], Action]:
    def read(entry: Entry) -> Action:
        section = entry.section(("for", "moving"))
        moving = section.get("moving")
        return Drive(
            signal,
            quantity(section, "for", "time", "4 clocks"),
            moving.quantity("speed", "not zero") if moving else None,
        )

    return read


def _repeat(entry: Entry) -> Action:
    section = entry.section(("times", "do"))
    do = section.require("do", "[{rest: 10 us}]")
    return Repeat(times(section), _actions(do) if do else ())


_ACTIONS: dict[str, Callable[[Entry], Action]] = {
    "rest": _rest,
    "move": _move,
    "return": _return,
    "sine": _sine,
    "table": _table,
    "clicks": _clicks,
    "home": _home,
    "reverse": _reverse,
    "dither": _dither,
    "illegal": _illegal,
    "walk": _walk,
    **{signal: _drive(signal) for signal in ("reset", *DEEDS)},
    "repeat": _repeat,
}


def _actions(entry: Entry) -> tuple[Action, ...]:
    return tuple(tagged(entry, _ACTIONS, "an", "action"))


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
        encoder_file.encoder(encoder) if encoder else Encoder(),
        disturbances(disturb) if disturb else (),
        power_up is not None and power_up.flag(),
    )
    document.finish()
    return profile
