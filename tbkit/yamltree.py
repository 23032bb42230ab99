"""YAML read as plain text with line numbers, so that every problem can name its place.

The file is composed, not constructed: every scalar stays the text that was written (``01`` is a line state, ``on`` a key)
and is converted by the reader that knows what it should be. Problems are collected; nothing is raised before the end.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import Any, NoReturn, TypeVar

import yaml

from tbkit import units
from tbkit.errors import InputError, Problem

T = TypeVar("T")

LARGEST_FILE_BYTES = 1 << 20
DEEPEST_NESTING = 24

# Verilog-2005 and SystemVerilog keywords that could pass for a port or module name.
_HDL_IDENTIFIER = re.compile(r"[A-Za-z_][A-Za-z0-9_$]{0,254}")
_HDL_KEYWORDS = frozenset(
    """accept_on alias always always_comb always_ff always_latch and assert assign assume automatic before begin bind bins
    binsof bit break buf bufif0 bufif1 byte case casex casez cell chandle checker class clocking cmos config const
    constraint context continue cover covergroup coverpoint cross deassign default defparam design disable dist do edge
    else end endcase endchecker endclass endclocking endconfig endfunction endgenerate endgroup endinterface endmodule
    endpackage endprimitive endprogram endproperty endspecify endsequence endtable endtask enum event eventually expect
    export extends extern final first_match for force foreach forever fork forkjoin function generate genvar global
    highz0 highz1 if iff ifnone ignore_bins illegal_bins implements implies import incdir include initial inout input
    inside instance int integer interconnect interface intersect join join_any join_none large let liblist library local
    localparam logic longint macromodule matches medium modport module nand negedge nettype new nexttime nmos nor
    noshowcancelled not notif0 notif1 null or output package packed parameter pmos posedge primitive priority program
    property protected pull0 pull1 pulldown pullup pulsestyle_ondetect pulsestyle_onevent pure rand randc randcase
    randsequence rcmos real realtime ref reg reject_on release repeat restrict return rnmos rpmos rtran rtranif0 rtranif1
    s_always s_eventually s_nexttime s_until s_until_with scalared sequence shortint shortreal showcancelled signed small
    soft solve specify specparam static string strong strong0 strong1 struct super supply0 supply1 sync_accept_on
    sync_reject_on table tagged task this throughout time timeprecision timeunit tran tranif0 tranif1 tri tri0 tri1
    triand trior trireg type typedef union unique unique0 unsigned until until_with untyped use uwire var vectored
    virtual void wait wait_order wand weak weak0 weak1 while wildcard wire with within wor xnor xor""".split()
)


def is_identifier(text: str) -> bool:
    """Whether ``text`` can be a plain identifier in every flavour of Verilog."""
    return _HDL_IDENTIFIER.fullmatch(text) is not None and text not in _HDL_KEYWORDS


def nearest(word: str, allowed: Iterable[str]) -> str:
    """`` (did you mean 'x'?)``, or nothing when no allowed word is close."""
    close = difflib.get_close_matches(word, list(allowed), n=1, cutoff=0.6)
    return f" (did you mean {close[0]!r}?)" if close else ""


@dataclass(slots=True)
class _Log:
    file: str
    problems: list[Problem] = field(default_factory=list)


class Entry:
    """One value of the file, with the way that leads to it (``count.width``) and its line."""

    def __init__(self, log: _Log, node: yaml.Node, path: str) -> None:
        self._log = log
        self._node = node
        self.path = path
        self.line: int = node.start_mark.line + 1

    def problem(self, text: str) -> None:
        """Note a problem at this place."""
        where = f"{self.path}: " if self.path else ""
        self._log.problems.append(Problem(self._log.file, self.line, where + text))

    @property
    def file(self) -> str:
        return self._log.file

    @property
    def is_map(self) -> bool:
        return isinstance(self._node, yaml.MappingNode)

    @property
    def is_list(self) -> bool:
        return isinstance(self._node, yaml.SequenceNode)

    def text(self) -> str:
        """The scalar as it was written; ``""`` with a problem noted if it is no scalar."""
        if isinstance(self._node, yaml.ScalarNode):
            value = str(self._node.value)
            if value:
                return value
            self.problem("found nothing, expected a value")
        else:
            self.problem(f"found a {'map' if self.is_map else 'list'}, expected one value")
        return ""

    def convert(self, reader: Callable[[str], T], fallback: T) -> T:
        """``reader(text)``; a ValueError of the reader becomes a problem and ``fallback`` is returned."""
        text = self.text()
        if not text:
            return fallback
        try:
            return reader(text)
        except ValueError as error:
            self.problem(str(error))
            return fallback

    def integer(self, lowest: int, highest: int) -> int:
        def read(text: str) -> int:
            if re.fullmatch(r"[+-]?(\d[\d_]{0,24}|0x[0-9A-Fa-f]{1,16})", text):
                value = int(text, 16) if "x" in text else int(text)
                if lowest <= value <= highest:
                    return value
            msg = f"found {text!r}, expected a whole number from {lowest} to {highest}"
            raise ValueError(msg)

        return self.convert(read, lowest)

    def choice(self, allowed: Sequence[str]) -> str:
        def read(text: str) -> str:
            if text in allowed:
                return text
            msg = f"found {text!r}, expected {one_of(allowed)}{nearest(text, allowed)}"
            raise ValueError(msg)

        return self.convert(read, allowed[0])

    def flag(self) -> bool:
        return self.choice(("false", "true")) == "true"

    def level(self) -> int:
        return int(self.choice(("0", "1")))

    def identifier(self) -> str:
        def read(text: str) -> str:
            if not _HDL_IDENTIFIER.fullmatch(text):
                msg = f"found {text!r}, expected an HDL name: a letter or _, then letters, digits, _ or $"
                raise ValueError(msg)
            if text in _HDL_KEYWORDS:
                msg = f"found {text!r}, which is a SystemVerilog keyword; expected an HDL name"
                raise ValueError(msg)
            return text

        return self.convert(read, "")

    def quantity(self, kind: str, sign: str = "positive") -> units.Quantity:
        """A quantity of ``kind`` whose ``sign`` is ``positive``, ``not negative`` or ``not zero``."""

        def read(text: str) -> units.Quantity:
            quantity = units.parse(text, kind)
            fits = {"positive": quantity.value > 0, "not negative": quantity.value >= 0, "not zero": quantity.value != 0}
            if not fits[sign]:
                msg = f"found {text!r}, expected a {kind} that is {sign}"
                raise ValueError(msg)
            return quantity

        return self.convert(read, units.Quantity(Fraction(1), "states", "clocks", 1))

    def items(self) -> list[Entry]:
        """The members of a list."""
        if not isinstance(self._node, yaml.SequenceNode):
            self.problem(f"found {self._shape()}, expected a list")
            return []
        if not self._node.value:
            self.problem("found an empty list, expected at least one item")
        return [Entry(self._log, node, f"{self.path}[{n}]") for n, node in enumerate(self._node.value)]

    def pairs(self, what: str) -> list[tuple[str, Entry]]:
        """The keys and values of a map whose keys are the user's own names; ``what`` says what it should be."""
        if not isinstance(self._node, yaml.MappingNode):
            self.problem(f"found {self._shape()}, expected {what}")
            return []
        found: dict[str, Entry] = {}
        for key_node, node in self._node.value:
            if not isinstance(key_node, yaml.ScalarNode):
                Entry(self._log, key_node, self.path).problem("a key must be a plain word")
                continue
            key = str(key_node.value)
            entry = Entry(self._log, node, f"{self.path}.{key}" if self.path else key)
            entry.line = key_node.start_mark.line + 1
            if key in found:
                entry.problem(f"the key stands twice; it first stands in line {found[key].line}")
            else:
                found[key] = entry
        return list(found.items())

    def section(self, allowed: Sequence[str]) -> Section:
        """A map whose keys must be among ``allowed``."""
        return Section(self, allowed)

    def _shape(self) -> str:
        if isinstance(self._node, yaml.ScalarNode):
            return repr(str(self._node.value))
        return "a map" if self.is_map else "a list"


class Section:
    """A map with known keys; unknown ones are noted with the nearest right word."""

    def __init__(self, entry: Entry, allowed: Sequence[str]) -> None:
        self.entry = entry
        self._found: dict[str, Entry] = {}
        self.keys: list[str] = []
        for key, value in entry.pairs(f"a map with the keys {', '.join(allowed)}"):
            if key in allowed:
                self._found[key] = value
                self.keys.append(key)
            else:
                value.problem(f"unknown key; allowed here: {', '.join(allowed)}{nearest(key, allowed)}")

    def get(self, key: str) -> Entry | None:
        return self._found.get(key)

    def require(self, key: str, example: str) -> Entry | None:
        """The value of ``key``; a problem that shows ``example`` if it is missing."""
        if key not in self._found:
            # A value that is no map at all has said so already.
            if self.entry.is_map:
                self.entry.problem(f"the key {key!r} is missing; write for example `{key}: {example}`")
            return None
        return self._found[key]


def one_of(words: Sequence[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} or {words[-1]}"


class _Loader(yaml.SafeLoader):
    """The safe loader without aliases, with bounded nesting."""

    depth = 0

    def compose_node(self, parent: yaml.Node | None, index: int) -> yaml.Node | None:
        event = self.peek_event()  # type: ignore[no-untyped-call]  # the stubs leave it out
        if isinstance(event, yaml.AliasEvent):
            self._refuse("aliases (*name) are not accepted; write the value out", event)
        if getattr(event, "anchor", None):
            self._refuse("anchors (&name) are not accepted; write the value out", event)
        self.depth += 1
        if self.depth > DEEPEST_NESTING:
            self._refuse(f"nested deeper than {DEEPEST_NESTING} levels", event)
        node: yaml.Node | None = super().compose_node(parent, index)
        self.depth -= 1
        return node

    @staticmethod
    def _refuse(text: str, event: Any) -> NoReturn:
        raise yaml.composer.ComposerError(None, None, text, event.start_mark)


@dataclass(frozen=True, slots=True)
class Document:
    """A whole file: its root entry, and what was found wrong so far."""

    root: Entry
    _log: _Log

    def finish(self) -> None:
        """Raise what was collected.

        Raises:
            InputError: there were problems.
        """
        if self._log.problems:
            raise InputError(self._log.problems)


def load(path: Path, what: str) -> Document:
    """Read ``path`` as one YAML document; ``what`` ("decoder file") is used in messages.

    Raises:
        InputError: the file cannot be read or is not YAML.
    """
    shown = str(path)

    def fail(line: int, text: str) -> InputError:
        return InputError([Problem(shown, line, text)])

    try:
        size = path.stat().st_size
        if size > LARGEST_FILE_BYTES:
            raise fail(1, f"the {what} has {size} bytes; at most {LARGEST_FILE_BYTES} are read")
        text = path.read_bytes().decode("utf-8")
    except OSError as error:
        raise fail(1, f"the {what} cannot be read: {error.strerror}") from error
    except UnicodeDecodeError as error:
        raise fail(1, f"the {what} is not UTF-8 text (byte {error.start})") from error
    try:
        loader = _Loader(text)
        node = loader.get_single_node()
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        raise fail(mark.line + 1 if mark else 1, f"not valid YAML: {error.problem or error.context}") from error
    except yaml.YAMLError as error:
        raise fail(1, f"not valid YAML: {error}".splitlines()[0]) from error
    if node is None:
        raise fail(1, f"the {what} is empty")
    log = _Log(shown)
    return Document(Entry(log, node, ""), log)
