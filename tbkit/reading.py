"""What the readers of a profile's parts share: numbers, ranges, quantities, and lists of maps with one key each."""

from __future__ import annotations

import re
from collections.abc import Callable
from fractions import Fraction
from typing import TypeVar

from tbkit.units import Quantity
from tbkit.yamltree import Entry, Section, nearest, quoted

T = TypeVar("T")

MOST_TIMES = 1_000_000
#: Stands for a quantity that could not be read.
ONE = Quantity(Fraction(1), "states", "clocks", 1)


def quantity(section: Section, key: str, kind: str, example: str, sign: str = "positive") -> Quantity:
    entry = section.require(key, example)
    return entry.quantity(kind, sign) if entry else ONE


def times(section: Section, default: int | None = None) -> int:
    entry = section.get("times") if default is not None else section.require("times", "10")
    return entry.integer(1, MOST_TIMES) if entry else default or 1


def range_(entry: Entry, lowest: int, highest: int) -> tuple[int, int]:
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


def pair(entry: Entry, kind: str, *, rising: bool = True) -> tuple[Quantity, Quantity]:
    """``2 us`` or ``[0.2 us, 2 us]``; ``rising``: the second must not be less, where the units tell."""
    if not entry.is_list:
        one = entry.quantity(kind)
        return one, one
    items = entry.items()
    if len(items) != 2:
        if items:
            entry.problem(f"found a list of {len(items)}, expected one {kind} or [least, most]")
        return ONE, ONE
    least, most = (item.quantity(kind) for item in items)
    if rising and (least.distance, least.time) == (most.distance, most.time) and least.value > most.value:
        first, second = (item.text() for item in items)
        entry.problem(f"the range [{first}, {second}] runs backwards; write [{second}, {first}]")
    return least, most


def optional(section: Section, key: str, kind: str) -> Quantity | None:
    entry = section.get(key)
    return entry.quantity(kind) if entry else None


def tagged(entry: Entry, readers: dict[str, Callable[[Entry], T]], article: str, what: str) -> list[T]:
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
