"""Which port of a decoder has which role, by name, direction and width, or as it is told."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

from tbkit.contract import Constant, Output, Port, Slice
from tbkit.errors import InputError, Problem
from tbkit.rtl import Rtl, RtlPort
from tbkit.yamltree import nearest

_NAMES = {
    "clock": r"^(i_|in_)?(clk|clock|ck|mclk|sysclk|sys_clk|aclk)(_i|_in)?$",
    "reset": r"^(i_|in_)?(sys_?|a)?n?(rst|reset|res|por)(_?n|_?b|_i|_in|_ni|_sync|_async)?$",
    "a": r"(^|_|enc|quad|^q|ch|phase)a(_n|_ni|_i|_in|_raw)?$",
    "b": r"(^|_|enc|quad|^q|ch|phase)b(_n|_ni|_i|_in|_raw)?$",
    "index": r"(^|_|enc|quad|^q|ch)(z|i|idx|index|mark|ref|home)(_n|_ni|_i|_in|_raw)?$",
    "count": r"count|pos|position|cnt|angle|slot|lid",
    "direction": r"dir|^up$|fwd|forward|^cw$|^way$",
    "step": r"step|pulse|tick|^ce$|move",
    "error": r"err|fault|illegal|lost|bad|inval",
    "up": r"^(count_?|step_?)?(up|inc|fwd|forward)(_n|_o|_out|_pulse|_step)?$",
    "down": r"^(count_?|step_?)?(down|dn|dec|back|rev|backward)(_n|_o|_out|_pulse|_step)?$",
    "latch": r"latch|capture|freeze|hold",
}
_PAIRS = r"^(i_|in_|enc_?|quad_?)?(ab|ba|lines|enc|quad|phases?)(_i|_in)?$"


@dataclass(frozen=True, slots=True)
class Roles:
    """Ports by their roles; lines, index and outputs may be bits of a vector.

    Attributes:
        clock: empty for a decoder without one.
        latch: an input that is held so that the count can be read.
    """

    clock: str
    lines: tuple[Port, Port]
    reset: RtlPort | None = None
    index: Port | None = None
    count: Output | None = None
    signed: bool = False
    direction: Output | None = None
    steps: tuple[Output, ...] = ()
    error: Output | None = None
    latch: Port | None = None
    constants: tuple[Constant, ...] = ()
    literals: tuple[str, ...] = ()


def _matches(role: str, name: str) -> bool:
    return re.search(_NAMES[role], name.lower()) is not None


def find_roles(rtl: Rtl, file: Path, given: Mapping[str, str]) -> Roles:
    """Ports by name, direction and width.

    Raises:
        InputError: the clock, the lines or every output that counts cannot be told.
    """
    inputs = [port for port in rtl.ports if not port.is_output]
    outputs = [part for port in rtl.ports if port.is_output for part in port.parts or (port,)]
    by_name = {port.name: port for port in (*inputs, *outputs)}
    problems = []
    for role, text in given.items():
        if role not in _NAMES:
            problems.append(
                Problem("--role", 0, f"there is no role {role!r}; there are {', '.join(_NAMES)}{nearest(role, _NAMES)}")
            )
        elif (role, text) != ("clock", "none"):
            ports = f"its ports are {', '.join(by_name)}"
            problems += [
                Problem("--role", 0, f"{rtl.top!r} has no port {name!r}; {ports}{nearest(name, by_name)}")
                for name in (part.partition("[")[0] for part in text.split(","))
                if name not in by_name
            ]
    if problems:
        raise InputError(problems)
    taken = {part.partition("[")[0] for text in given.values() for part in text.split(",")}

    def named(role: str, among: list[RtlPort]) -> str:
        """The port with a role, as it is given or as its name tells; empty if there is none."""
        free = (p for p in among if p.width == 1 and p.name not in taken and _matches(role, p.name))
        return given.get(role) or next((p.name for p in free), "")

    clock, reset = (named(role, inputs) for role in ("clock", "reset"))
    rest = [port for port in inputs if port.name not in (clock, reset)]
    index, a, b = (named(role, rest) for role in ("index", "a", "b"))
    latch = named("latch", [port for port in rest if port.name not in (index, a, b)])
    pair = next((p for p in rest if p.width == 2 and re.search(_PAIRS, p.name.lower())), None)  # two lines
    lines: tuple[Port, Port] | None = None
    if a and b:
        lines = (_line(a), _line(b))
    elif pair:
        a_first = "ab" in pair.name.lower()
        lines = (Port(pair.name, int(a_first)), Port(pair.name, int(not a_first)))
    wide = [p for p in outputs if (p.width or 0) >= 4 and p.name not in taken]  # narrower is a state or flags
    faults = next((p.name for p in wide if _matches("error", p.name)), "")
    wide = [p for p in wide if p.name != faults]
    widest = max(wide, key=lambda p: p.width or 0, default=None)
    best = next((p for p in wide if _matches("count", p.name)), widest)
    count = given.get("count", best.name if best else "")
    bits = {role: named(role, outputs) for role in ("step", "error", "up", "down")}
    both_ways = bool(bits["up"] and bits["down"])
    step = "" if both_ways and "step" not in given else bits["step"]
    flags = [p for p in outputs if not both_ways or p.name not in (bits["up"], bits["down"])]
    states = next((p.name for p in flags if p.literals and _matches("direction", p.name)), "")
    direction = named("direction", flags) or states
    for what, found, example in (
        ("the clock", clock, "clock=PORT` (or `clock=none`)"),
        ("A and which B", lines, "a=PORT --role b=PORT`"),
        ("a count or a step", count or step or both_ways, "count=PORT`"),
    ):
        if not found:
            ports = ", ".join(port.name for port in rtl.ports)
            text = f"which port is {what} cannot be told from the names {ports}; say it with `--role {example}"
            problems.append(Problem(str(file), 1, text))
    if lines is None or problems:
        raise InputError(problems)
    used = {name.partition("[")[0] for name in (clock, reset, index, latch)} | {line.name for line in lines}
    constants = tuple(
        Constant(p.name, int(re.search(r"en|ce$|tick|strobe", p.name.lower()) is not None and not is_low(p.name)), p.width or 1)
        for p in inputs
        if p.name not in used
    )
    known = by_name.get(direction)
    literals = known.literals if known else ()
    told = _output("direction", direction, by_name)
    return Roles(
        "" if clock == "none" else clock,
        lines,
        by_name.get(reset),
        replace(_line(index), active_low=is_low(index.partition("[")[0])) if index else None,
        _output("count", count, by_name),
        bool(by_name[count].signed) if count in by_name else False,
        replace(told, literal=literals[0]) if told and literals else told,
        tuple(
            output
            for name, port in (
                ("step", step),
                ("up", both_ways and not step and bits["up"]),
                ("down", both_ways and not step and bits["down"]),
            )
            if (output := _output(name, port or "", by_name))
        ),
        _output("error", bits["error"] or faults, by_name),
        _line(latch) if latch else None,
        constants,
        literals,
    )


def _output(name: str, text: str, ports: Mapping[str, RtlPort]) -> Output | None:
    """Ports or bits of them such as ``word[11:8],low[7:0]``, the most significant first; None for no text."""
    slices, width = [], 0
    parts = text.split(",") if text else []
    for part in parts:
        port, _, bits = part.rstrip("]").partition("[")
        if not bits and len(parts) > 1:
            bits = f"{(ports[port].width or 1) - 1}:0"
        high, _, low = bits.partition(":")
        slices.append(Slice(port, int(high), int(low or high)) if bits else Slice(port))
        width += int(high) - int(low or high) + 1 if bits else ports[port].width or 1
    return Output(name, tuple(slices), width) if slices else None


def _line(text: str) -> Port:
    """``enc_a`` or ``ab[1]``."""
    name, _, bit = text.rstrip("]").partition("[")
    # The end of `enc_b` names the line; only an n tells that it is low.
    return Port(name, int(bit) if bit.isdecimal() else None, re.search(r"_ni?$", name.lower()) is not None)


def is_low(name: str) -> bool:
    return re.search(r"(_n|_b|_ni|n_i)$|^n[a-z]|[a-z]n$", name.lower()) is not None and not name.lower().endswith("en")
