"""Reads a decoder file into a :class:`~tbkit.contract.Contract`."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import TypeVar

from tbkit import units
from tbkit.contract import (
    A_LEADS_B,
    BENCH,
    NO_CLOCK_PS,
    Clock,
    Constant,
    Contract,
    Count,
    Design,
    Direction,
    Error,
    Filter,
    Index,
    Input,
    Latency,
    Output,
    Port,
    Reset,
    Slice,
    Span,
    Start,
    Step,
)
from tbkit.contract_check import check_together
from tbkit.yamltree import Entry, Section, load, one_of, quoted, whole_number

T = TypeVar("T")

FORMAT = 1
LONGEST_CLOCKS = 1_000_000
VERILOG_SUFFIXES, VHDL_SUFFIXES = (".v", ".sv"), (".vhd", ".vhdl")
SHORTEST_PERIOD_PS = 8
MOST_CLOCKS_A_TICK = 1_000_000
#: States AB by their code 2·A + B.
CODES = ("00", "01", "10", "11")
#: How far an illegal transition may move the count.
MOST_MOVE = 4

_KEYS = (
    "tbkit", "decoder", "clock", "reset", "start", "lines", "inputs", "count", "direction", "step", "error", "illegal",
    "index", "latency", "filter", "shortest_state", "timers",
)  # fmt: skip
_ROLES = ("constant", "clear-error", "clear-count", "preload", "enable", "arm", "arm-once", "latch")
_INPUT_KEYS = ("port", "role", "value", "width", "active", "sense", "step_together", "resumes")
# Words the format knows and this version does not act on yet: said so, never passed over.
_LATER_KEYS = ("velocity",)


def _active_low(section: Section) -> bool:
    entry = section.get("active")
    return entry is not None and entry.choice(("high", "low")) == "low"


def _bit(entry: Entry) -> Port:
    """``enc_a`` or ``ab[0]``."""

    def read(text: str) -> Port:
        match = re.fullmatch(r"([^\[\]]+)(?:\[(\d{1,3})\])?", text)
        if match is None:
            msg = f'found {quoted(text)}, expected a port such as enc_a, or one bit of a vector such as "ab[0]"'
            raise ValueError(msg)
        if fault := entry.name_fault(match.group(1)):
            raise ValueError(fault)
        return Port(match.group(1), None if match.group(2) is None else int(match.group(2)))

    return entry.convert(read, Port(""))


def _slice(entry: Entry) -> Slice:
    """``pos``, ``status[3]`` or ``status[23:8]``."""

    def read(text: str) -> Slice:
        match = re.fullmatch(r"([^\[\].]+(?:\.\w+)?)(?:\[(\d{1,4})(?::(\d{1,4}))?\])?", text)
        if match is None:
            msg = f'found {quoted(text)}, expected a port such as pos, or bits of one such as "status[3]" or "status[23:8]"'
            raise ValueError(msg)
        name, high, low = match.groups()
        for part in name.split("."):
            if fault := entry.name_fault(part):
                raise ValueError(fault)
        if high is None:
            return Slice(name)
        if low is not None and int(low) > int(high):
            msg = f"found {quoted(text)}, with the lower bit first; write {quoted(f'{name}[{low}:{high}]')}"
            raise ValueError(msg)
        return Slice(name, int(high), int(low or high))

    return entry.convert(read, Slice(""))


def _one_bit(name: str, entry: Entry | None, *, active_low: bool = False) -> Output:
    """An output of one bit: a port, or a bit of one."""
    part = _slice(entry) if entry else Slice("")
    if entry and part.high != part.low:
        entry.problem(f"found {quoted(entry.text())}, which is more than one bit; expected a port or one bit of it")
    return Output(name, (part,), 1, active_low)


def _number(name: str, entry: Entry | None, width: int) -> Output:
    """An output of several bits: a port, bits of one, or a list of such, the most significant first."""
    if entry is None:
        return Output(name, (Slice(""),), width)
    parts = tuple(_slice(item) for item in entry.items()) if entry.is_list else (_slice(entry),)
    sizes = [part.high - part.low + 1 for part in parts if part.high is not None and part.low is not None]
    if len(parts) > 1 and len(sizes) < len(parts):
        entry.problem('of several ports each needs its bits, as in ["pos_high[7:0]", "pos_low[7:0]"]')
    elif sizes and sum(sizes) != width and entry.sound:
        entry.problem(f"these are {sum(sizes)} bits, and the width is {width}")
    return Output(name, parts, width)


def _line(entry: Entry) -> Port:
    if not entry.is_map:
        return _bit(entry)
    section = entry.section(("port", "active"))
    name = section.require("port", "enc_a")
    port = _bit(name) if name else Port("")
    return Port(port.name, port.bit, _active_low(section))


def _span(entry: Entry) -> Span:
    if not entry.is_list:
        clocks = entry.integer(0, LONGEST_CLOCKS)
        return Span(clocks, clocks)
    items = entry.items()
    if len(items) != 2:
        if items:
            entry.problem(f"found a list of {len(items)}, expected a number of clocks or [least, most]")
        return Span(0, 0)
    least, most = (item.integer(0, LONGEST_CLOCKS) for item in items)
    if least > most and entry.sound:
        entry.problem(f"the range [{least}, {most}] runs backwards; write [{most}, {least}]")
    return Span(least, most)


def _as_path(read: Callable[[str], T]) -> Callable[[str], T]:
    """``read`` for paths: what the file system cannot even look for is told like every other problem."""

    def checked(text: str) -> T:
        # A surrogate or a control character: no file name that could be shown, or written into a list of files.
        if not text.isprintable():
            msg = f"found {quoted(text)}, expected a path of printable characters"
            raise ValueError(msg)
        try:
            return read(text)
        except OSError as error:
            msg = f"{quoted(text)} cannot be looked for: {error.strerror}"
            raise ValueError(msg) from error
        except NotImplementedError as error:
            msg = f"{quoted(text)} cannot be looked for: {error}"
            raise ValueError(msg) from error

    return checked


@dataclass(slots=True)
class _Reader:
    """Reads the sections one by one; each method notes problems and returns something usable."""

    top: Section
    folder: Path
    vhdl: bool = False

    def design(self) -> Design:
        entry = self.top.require("decoder", "{top: my_decoder, sources: [my_decoder.v]}")
        if entry is None:
            return Design("", ())
        section = entry.section(("top", "sources", "standard", "include_dirs", "parameters"))
        top = section.require("top", "my_decoder")
        sources = section.require("sources", "[my_decoder.v]")
        folders = section.get("include_dirs")
        parameters, standard_entry = section.get("parameters"), section.get("standard")
        # A file that two of them name is compiled once.
        files = tuple(dict.fromkeys(path for item in sources.items() for path in self._sources(item))) if sources else ()
        vhdl = [path for path in files if path.suffix in VHDL_SUFFIXES]
        if vhdl:
            entry.names_are_vhdl()
        if sources and vhdl and len(vhdl) < len(files):
            other = next(path for path in files if path not in vhdl)
            sources.problem(f"{vhdl[0].name!r} is VHDL and {other.name!r} is Verilog; a decoder is in one language")
        standard = standard_entry.choice(("93", "08")) if standard_entry else "08"
        if standard_entry and not vhdl:
            standard_entry.problem("`standard` is for VHDL sources; Verilog is read as SystemVerilog 2012")
        return Design(
            self._top(top) if top else "",
            files,
            tuple(self._folder(item) for item in folders.items()) if folders else (),
            tuple(self._parameter(name, value) for name, value in parameters.pairs("a map of parameter names and values"))
            if parameters
            else (),
            standard if vhdl else "",
        )

    @staticmethod
    def _top(entry: Entry) -> str:
        name = entry.identifier()
        if name == BENCH:
            entry.problem(f"the module that tbkit puts around the decoder is called {BENCH!r}; choose another name")
        return name

    def _sources(self, entry: Entry) -> list[Path]:
        def read(text: str) -> list[Path]:
            if any("**" in part and part != "**" for part in Path(text).parts):
                msg = f"found {quoted(text)}, but ** stands for whole folders only, as in rtl/**/*.v"
                raise ValueError(msg)
            one = self.folder / text
            if not any(mark in text for mark in "*?[") or one.is_file():
                if not one.is_file():
                    what = "it is a folder" if one.is_dir() else "there is no such file"
                    msg = f"{str(one)!r}: {what}; name files, by paths from the folder of the decoder file"
                    raise ValueError(msg)
                found = [one]
            else:
                anchor = Path(text).anchor
                matches = (self.folder / anchor).glob(str(Path(text).relative_to(anchor)))
                found = sorted(path for path in matches if path.is_file())
                if not found:
                    msg = f"no file matches {quoted(text)} in {str(self.folder)!r}"
                    raise ValueError(msg)
            for path in found:
                if path.suffix not in VERILOG_SUFFIXES + VHDL_SUFFIXES:
                    msg = f"{path.name!r} does not end in {one_of(VERILOG_SUFFIXES + VHDL_SUFFIXES)}"
                    raise ValueError(msg)
            return [path.resolve() for path in found]

        return entry.convert(_as_path(read), [])

    def _folder(self, entry: Entry) -> Path:
        def read(text: str) -> Path:
            path = self.folder / text
            if not path.is_dir():
                msg = f"{str(path)!r}: there is no such folder; paths start from the folder of the decoder file"
                raise ValueError(msg)
            return path.resolve()

        return entry.convert(_as_path(read), self.folder)

    @staticmethod
    def _parameter(name: str, entry: Entry) -> tuple[str, int | str]:
        if fault := entry.name_fault(name):
            entry.problem(fault)

        def read(text: str) -> int | str:
            value = whole_number(text)
            if value is not None and -(1 << 31) <= value < 1 << 31:
                return value
            # What looks like a number is never passed on as text: the decoder would take its characters for one.
            if not re.match(r"[+-]?\.?\d[\d_.e+-]*$", text, re.IGNORECASE) and re.fullmatch(r"[A-Za-z0-9_ .,+-]{1,200}", text):
                return text
            msg = f"found {quoted(text)}, expected a 32-bit whole number, or text of letters, digits, blanks and _.,+-"
            raise ValueError(msg)

        fallback: int | str = 0
        return name, entry.convert(read, fallback)

    def clock(self) -> Clock:
        entry = self.top.require("clock", "{port: clk, rate: 50 MHz}")
        if entry is None:
            return Clock("", 1000)
        if entry.is_word("none"):
            return Clock("", NO_CLOCK_PS)
        section = entry.section(("port", "rate", "edge", "tick"), or_word="none")
        port, tick = section.require("port", "clk"), section.get("tick")
        rate = section.require("rate", "50 MHz")
        edge = section.get("edge")
        period_ps = 1000
        if rate:
            quantity = rate.quantity("rate")
            period_ps = round(Fraction(units.PS_PER_S) / quantity.value)
            if rate.sound and not 1 <= quantity.value <= units.PS_PER_S // SHORTEST_PERIOD_PS:
                rate.problem(
                    f"found {rate.text()!r}, expected a rate from 1 Hz to {units.PS_PER_S // SHORTEST_PERIOD_PS // 10**9} GHz"
                )
                period_ps = 1000
        ticks, every = self._tick(tick) if tick else (None, 1)
        falling = edge is not None and edge.choice(("rising", "falling")) == "falling"
        return Clock(port.identifier() if port else "", period_ps * every, falling, ticks, every)

    @staticmethod
    def _tick(entry: Entry) -> tuple[Port, int]:
        section = entry.section(("port", "every", "active"))
        port, every = section.require("port", "tick"), section.require("every", "8")
        name = Port(port.identifier() if port else "", None, _active_low(section))
        return name, every.integer(2, MOST_CLOCKS_A_TICK) if every else 2

    def reset(self) -> Reset | None:
        entry = self.top.require("reset", "{port: rst_n, active: low, kind: async, clocks: 4}` or `reset: none")
        if entry is None or entry.is_word("none"):
            return None
        section = entry.section(("port", "active", "kind", "clocks"), or_word="none")
        port = section.require("port", "rst_n")
        active = section.require("active", "low")
        kind = section.require("kind", "async")
        clocks = section.get("clocks")
        return Reset(
            Port(port.identifier() if port else "", None, active is not None and active.choice(("high", "low")) == "low"),
            kind is not None and kind.choice(("sync", "async")) == "async",
            clocks.integer(1, LONGEST_CLOCKS) if clocks else 4,
        )

    def start(self) -> Start:
        entry = self.top.get("start")
        if entry is None:
            return Start()
        section = entry.section(("count", "rest_states", "settle", "power_up"))
        count, states, settle, power_up = (section.get(key) for key in ("count", "rest_states", "settle", "power_up"))
        rest_states: tuple[str, ...] = A_LEADS_B
        if states is not None:
            if states.is_list:
                rest_states = tuple(item.choice(A_LEADS_B) for item in states.items())
            else:
                states.choice(("any",), instead=" or a list of states such as [00, 11]")
        return Start(
            count.integer(-(1 << 63), (1 << 63) - 1) if count else 0,
            rest_states,
            settle.integer(0, LONGEST_CLOCKS) if settle else Start().settle,
            power_up is not None and power_up.choice(("as-is", "zero")) == "zero",
        )

    def lines(self) -> tuple[Port, Port, Port | None]:
        entry = self.top.require("lines", "{a: enc_a, b: enc_b, index: enc_z}")
        if entry is None:
            return Port(""), Port(""), None
        section = entry.section(("a", "b", "index"))
        a, b, index = section.require("a", "enc_a"), section.require("b", "enc_b"), section.get("index")
        return _line(a) if a else Port(""), _line(b) if b else Port(""), _line(index) if index else None

    def inputs(self) -> tuple[tuple[Constant, ...], tuple[Input, ...]]:
        entry = self.top.get("inputs")
        constants: list[Constant] = []
        acting: list[Input] = []
        for name, value in entry.pairs("a map of input names and values") if entry else []:
            section = value.section(_INPUT_KEYS) if value.is_map else None
            role_entry = section.get("role") if section else None
            role = role_entry.choice(_ROLES) if role_entry else "constant"
            port_entry = section.get("port") if section else None
            port = port_entry.identifier() if port_entry else name
            if port_entry is None and (fault := value.name_fault(name)):
                value.problem(f"{fault}; or any word, with {{port: NAME}}")
            if section is None:
                constants.append(Constant(port, value.integer(0, 1, "; a wider input is written {value: 5, width: 3}")))
            elif role_entry and not role_entry.sound:
                continue
            elif role == "constant":
                constants.append(self._constant(section, port))
            else:
                if any(one.role == role for one in acting):
                    value.problem(f"a second {role} input; one is supported")
                acting.append(self._acting(section, port, role))
        return tuple(constants), tuple(acting)

    @staticmethod
    def _constant(section: Section, port: str) -> Constant:
        width_entry, level = section.get("width"), section.require("value", "1")
        width = width_entry.integer(1, 64) if width_entry else 1
        if width_entry and not width_entry.sound:
            width = 64
        for key in ("active", "sense", "step_together", "resumes"):
            if extra := section.get(key):
                extra.problem(f"a constant is driven as it is written; `{key}` belongs to inputs with another role")
        hint = "" if width_entry else "; a wider input needs its `width`"
        return Constant(port, level.integer(0, (1 << width) - 1, hint) if level else 0, width)

    @staticmethod
    def _acting(section: Section, port: str, role: str) -> Input:
        """An input that the tool drives; keys that its role has no use for are problems."""
        sets = ("clear-count", "preload")
        for key, roles in (
            ("value", ("preload",)),
            ("width", ()),
            ("sense", (*sets, "latch")),
            ("step_together", sets),
            ("resumes", ("enable",)),
        ):
            if (extra := section.get(key)) and role not in roles:
                what = (
                    f"`{key}` belongs to {' and '.join([', '.join(roles[:-1]), roles[-1]][len(roles) == 1 :])} inputs"
                    if roles
                    else "the tool drives it"
                )
                extra.problem(f"this has no meaning for an input with the role {role}: {what}")
        value = section.require("value", "1000") if role == "preload" else None
        sense, together, resumes = section.get("sense"), section.get("step_together"), section.get("resumes")
        edge = sense is not None and sense.choice(("level", "edge")) == "edge"
        counts_last = together is not None and together.choice(("lost", "counted")) == "counted"
        if counts_last and together and not edge:
            together.problem("`step_together` needs `sense: edge`; while the level lasts the count does not move")
        return Input(
            Port(port, None, _active_low(section)),
            role,
            value.integer(-(1 << 63), (1 << 63) - 1) if value else 0,
            edge,
            counts_last,
            resumes is None or resumes.choice(("in-step", "anyhow")) == "in-step",
        )

    def count(self) -> Count | None:
        entry = self.top.get("count")
        if entry is None:
            return None
        section = entry.section(
            ("port", "width", "signed", "resolution", "at", "forward", "overflow", "modulo", "lowest", "highest")
        )
        port, width_entry = section.require("port", "position"), section.require("width", "16")
        signed_entry = section.require("signed", "true")
        resolution = section.get("resolution")
        forward, at, overflow_entry = section.get("forward"), section.get("at"), section.get("overflow")
        modulo, lowest, highest = section.get("modulo"), section.get("lowest"), section.get("highest")
        width = width_entry.integer(2, 64) if width_entry else 64
        if width_entry and not width_entry.sound:
            width = 64
        signed = signed_entry is not None and signed_entry.flag()
        low, high = (-(1 << (width - 1)), (1 << (width - 1)) - 1) if signed else (0, (1 << width) - 1)
        overflow = overflow_entry.choice(("wrap", "hold", "modulo")) if overflow_entry else "wrap"
        states_per_count = 4 // int(resolution.choice(("x4", "x2", "x1"))[1]) if resolution else 1
        if at and states_per_count == 1:
            at.problem("`at` belongs to resolution x1 or x2; an x4 count moves at every state boundary")
        if overflow == "modulo":
            if modulo is None:
                entry.problem("the key 'modulo' is missing; write for example `modulo: 4000` (counts 0 to 3999)")
            else:
                low, high = 0, modulo.integer(2, min(high + 1, 1 << 62)) - 1
        elif modulo is not None:
            modulo.problem("`modulo` belongs to `overflow: modulo`; add that, or take this away")
        for limit in (lowest, highest):
            if limit is not None and overflow != "hold":
                limit.problem("`lowest` and `highest` belong to `overflow: hold`; add that, or take them away")
        if overflow == "hold":
            low, high = lowest.integer(low, high) if lowest else low, highest.integer(low, high) if highest else high
            if low >= high and entry.sound:
                entry.problem(f"the range from {low} to {high} holds no two counts; `highest` must be above `lowest`")
        return Count(
            _number("count", port, width),
            signed,
            states_per_count,
            at.choice(A_LEADS_B) if at else "00",
            forward is None or forward.choice(("a-leads-b", "b-leads-a")) == "a-leads-b",
            overflow,
            low,
            high,
        )

    def direction(self) -> Direction | None:
        entry = self.top.get("direction")
        if entry is None:
            return None
        section = entry.section(("port", "forward", "valid"))
        port, forward = section.require("port", "dir"), section.require("forward", "1")
        valid = section.require("valid", "with-count")
        literal = forward is not None and self.vhdl and not forward.is_list and bool(re.fullmatch(r"[A-Za-z]\w*", forward.text()))
        output = _one_bit("direction", port)
        return Direction(
            replace(output, literal=forward.text()) if forward and literal else output,
            forward.level() if forward and not literal else 1,
            valid is not None and valid.choice(("always", "with-count", "with-step")) != "always",
        )

    def step(self) -> Step | None:
        entry = self.top.get("step")
        if entry is None:
            return None
        section = entry.section(("port", "up", "down", "kind", "active"))
        kind = section.require("kind", "pulse")
        low = _active_low(section)
        names = ("up", "down") if section.get("up") or section.get("down") else ("step",)
        if names == ("up", "down") and (port := section.get("port")):
            port.problem("`port` is for steps both ways on one output; `up` and `down` are for one output each way")
        outputs = [
            _one_bit(name, section.require("port" if name == "step" else name, example), active_low=low)
            for name, example in zip(names, ("step",) if len(names) == 1 else ("count_up", "count_down"), strict=True)
        ]
        return Step(kind.choice(("pulse", "toggle", "level")) if kind else "pulse", tuple(outputs))

    def error(self) -> Error | None:
        entry = self.top.get("error")
        if entry is None:
            return None
        section = entry.section(("port", "kind", "active", "wins", "width", "overflow"))
        port, kind_entry = section.require("port", "err"), section.require("kind", "pulse")
        kind = kind_entry.choice(("pulse", "sticky", "counter")) if kind_entry else "pulse"
        wins, width, overflow, active = (section.get(key) for key in ("wins", "width", "overflow", "active"))
        for key, given, owner in (("wins", wins, "sticky"), ("width", width, "counter"), ("overflow", overflow, "counter")):
            if given and kind != owner:
                given.problem(f"`{key}` belongs to `kind: {owner}`; this one is {kind}")
        if kind != "counter":
            output = _one_bit("error", port, active_low=_active_low(section))
            return Error(output, kind, wins.choice(("set", "clear", "either")) if wins else "either")
        if active:
            active.problem("`active` belongs to an output of one bit; a counter is a number")
        bits = section.require("width", "8")
        output = _number("error", port, bits.integer(1, 32) if bits else 1)
        return Error(output, kind, holds=overflow is not None and overflow.choice(("wrap", "hold")) == "hold")

    def illegal(self) -> tuple[int, ...] | None:
        """The count's move on each illegal transition, by the state 2·A + B before it; None: anything."""
        entry = self.top.get("illegal")
        count = entry.section(("count",)).require("count", "hold") if entry else None
        if count is None:
            return (0, 0, 0, 0)
        if not count.is_map:
            word = count.choice(("hold", "any"), instead=' or moves such as {"00": 1, "11": 1, "01": -1, "10": -1}')
            return None if word == "any" else (0, 0, 0, 0)
        section = count.section(CODES)
        moves = [section.require(f"{state}", "1") for state in CODES]
        return tuple(move.integer(-MOST_MOVE, MOST_MOVE) if move else 0 for move in moves)

    def index(self, count: Count | None) -> Index | None:
        entry = self.top.get("index")
        if entry is None:
            return None
        section = entry.section(("action", "value", "port", "active", "when", "sense", "step_together"))
        action_entry, when, sense = section.require("action", "zero"), section.get("when"), section.get("sense")
        action = action_entry.choice(("zero", "load", "latch", "pulse")) if action_entry else "zero"
        gate = when.section(("a", "b")) if when else None
        a, b = (gate.get("a"), gate.get("b")) if gate else (None, None)
        return Index(
            a.level() if a else None,
            b.level() if b else None,
            sense is not None and sense.choice(("level", "edge")) == "edge",
            *self._index_action(section, action, count),
        )

    @staticmethod
    def _index_action(section: Section, action: str, count: Count | None) -> tuple[str, int, bool, Output | None]:
        value, port, active = section.get("value"), section.get("port"), section.get("active")
        together, sense = section.get("step_together"), section.get("sense")
        owners = (("value", value, ("load",)), ("port", port, ("latch", "pulse")), ("active", active, ("pulse",)))
        for key, given, actions in owners:
            if given and action not in actions:
                given.problem(f"`{key}` belongs to the action {' or '.join(actions)}; this one is {action}")
        for entry in (together, sense):
            if entry and action not in ("zero", "load"):
                entry.problem("this belongs to the actions zero and load; latch and pulse act once, as the index becomes active")
        if together and not (sense and sense.is_word("edge")):
            together.problem("`step_together` needs `sense: edge`; while the level lasts the count does not move")
        counts_last = together is not None and together.choice(("lost", "counted")) == "counted"
        number = value.integer(-(1 << 63), (1 << 63) - 1) if value else 0
        if action == "load" and value is None:
            section.require("value", "100")
        if action in ("zero", "load"):
            return "set", number, counts_last, None
        port = section.require("port", "captured" if action == "latch" else "home")
        if action == "pulse":
            return action, 0, False, _one_bit("index", port, active_low=_active_low(section))
        return action, 0, False, _number("index", port, count.width if count else 64)

    def latency(self) -> Latency:
        entry = self.top.require("latency", "{count: 3}")
        if entry is None:
            none = Span(0, 0)
            return Latency(none, none, none, none, none, none)
        section = entry.section(("count", "direction", "step", "error", "index", "clear", "inputs"))
        given = {key: _span(value) for key in section.keys if (value := section.get(key))}
        for key in given:
            value = section.get(key)
            anything = self.top.get("count") or self.top.get("step")
            if value and anything and key != "clear" and self.top.get(key) is None:
                value.problem(f"the decoder file has no `{key}`, so nothing has this latency; add that, or take this away")
        needed = "count" if self.top.get("count") or not self.top.get("step") else "step"
        if needed not in given and entry.sound:
            entry.problem(f"the key {needed!r} is missing; write for example `{needed}: 3`")
        main = given.get("count", given.get("step", Span(0, 0)))
        direction, step, error, index = (given.get(key, main) for key in ("direction", "step", "error", "index"))
        one = Span(1, 1)
        return Latency(main, direction, step, error, index, given.get("clear", one), given.get("inputs", one))

    def filter(self) -> Filter:
        entry = self.top.get("filter")
        if entry is None or entry.is_word("none"):
            return Filter()
        section = entry.section(("rejects", "passes", "bursts"), or_word="none")
        rejects_entry, passes_entry = section.require("rejects", "2"), section.require("passes", "3")
        bursts = section.get("bursts")
        rejects = rejects_entry.integer(0, LONGEST_CLOCKS) if rejects_entry else 0
        passes = passes_entry.integer(1, LONGEST_CLOCKS) if passes_entry else 1
        if entry.sound and passes <= rejects:
            entry.problem(
                f"a pulse of {passes} clocks cannot always pass while {rejects} never do; `passes` must be above `rejects`"
            )
        return Filter(rejects, passes, bursts is not None and bursts.choice(("rejected", "open")) == "open")


def read_contract(path: Path) -> Contract:
    """Read and check a decoder file.

    Raises:
        InputError: with every problem found, each at its line.
    """
    document = load(path, "decoder file")
    top = document.root.section(_KEYS, _LATER_KEYS)
    version = top.require("tbkit", str(FORMAT))
    if version:
        version.choice((str(FORMAT),), instead=", the format that this version of tbkit reads")
    reader = _Reader(top, path.parent)
    # First, since its language says what can be a name.
    design = reader.design()
    reader.vhdl = design.language == "vhdl"
    constants, inputs = reader.inputs()
    a, b, index_line = reader.lines()
    shortest, timers = top.get("shortest_state"), top.get("timers")
    count = reader.count()
    contract = Contract(
        path,
        design,
        reader.clock(),
        a,
        b,
        reader.latency(),
        index_line,
        reader.reset(),
        reader.start(),
        constants,
        inputs,
        count,
        reader.direction(),
        reader.step(),
        reader.error(),
        reader.illegal(),
        reader.index(count),
        reader.filter(),
        shortest.integer(1, LONGEST_CLOCKS) if shortest else 1,
        timers is not None and timers.flag(),
        {key: entry.line for key in top.keys if (entry := top.get(key))},
    )
    check_together(contract, top)
    document.finish()
    return contract
