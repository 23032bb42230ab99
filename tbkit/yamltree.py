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
LONGEST_TEXT = 1000

# Verilog-2005 and SystemVerilog keywords that could pass for a port or module name.
_HDL_IDENTIFIER = re.compile(r"[A-Za-z_][A-Za-z0-9_$]{0,254}")
KEYWORDS = frozenset(
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


def _name_fault(text: str, *, vhdl: bool) -> str:
    """Why ``text`` cannot be a plain name in the HDL; ``""`` if it can. What is a keyword in VHDL, GHDL will say."""
    if text in KEYWORDS and not vhdl:
        return f"found {text!r}, which is a SystemVerilog keyword; expected an HDL name"
    if not _HDL_IDENTIFIER.fullmatch(text):
        return f"found {quoted(text)}, expected an HDL name: a letter or _, then letters, digits, _ or $"
    return ""


def quoted(text: str) -> str:
    """``text`` for a message: in quotes, on one line, and not endless."""
    return repr(text if len(text) <= 60 else f"{text[:57]}...")


def nearest(word: str, allowed: Iterable[str]) -> str:
    """`` (did you mean 'x'?)``, or nothing when no allowed word is close."""
    words = {known.casefold(): known for known in allowed}
    close = difflib.get_close_matches(word.casefold(), list(words), n=1, cutoff=0.6)
    return f" (did you mean {words[close[0]]!r}?)" if close else ""


@dataclass(slots=True)
class _Log:
    file: str
    problems: list[Problem] = field(default_factory=list)
    unsound: list[str] = field(default_factory=list)
    vhdl: bool = False


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
        self._log.unsound.append(self.path)

    @property
    def sound(self) -> bool:
        """Whether no problem was noted here or further inside.

        What does not hold is read as something else that does, so nothing may be concluded from it.
        """
        return not any(re.match(rf"{re.escape(self.path)}($|[.\[])", path) for path in self._log.unsound)

    @property
    def file(self) -> str:
        """The file it stands in, as it was named."""
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
            if 0 < len(value) <= LONGEST_TEXT:
                return value
            self.problem(
                f"found a text of {len(value)} characters; at most {LONGEST_TEXT} are read"
                if value
                else "found nothing, expected a value"
            )
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

    def integer(self, lowest: int, highest: int, hint: str = "") -> int:
        """A whole number, decimal or 0x…; ``hint`` ends the message if it is none."""

        def read(text: str) -> int:
            value = whole_number(text)
            if value is not None and lowest <= value <= highest:
                return value
            msg = f"found {quoted(text)}, expected a whole number from {lowest} to {highest}{hint}"
            raise ValueError(msg)

        return self.convert(read, lowest)

    def choice(self, allowed: Sequence[str], instead: str = "") -> str:
        """One of ``allowed``; ``instead`` says what else than a word may stand here."""

        def read(text: str) -> str:
            if text in allowed:
                return text
            msg = f"found {quoted(text)}, expected {one_of(allowed)}{instead}{nearest(text, allowed)}"
            raise ValueError(msg)

        return self.convert(read, allowed[0])

    def flag(self) -> bool:
        return self.choice(("false", "true")) == "true"

    def level(self) -> int:
        return int(self.choice(("0", "1")))

    def name_fault(self, text: str) -> str:
        """Why ``text`` cannot be the name of a module or port; empty if it can."""
        return _name_fault(text, vhdl=self._log.vhdl)

    def names_are_vhdl(self) -> None:
        """From here on names in this file are those of VHDL."""
        self._log.vhdl = True

    def identifier(self) -> str:
        def read(text: str) -> str:
            if fault := self.name_fault(text):
                raise ValueError(fault)
            return text

        return self.convert(read, "")

    def quantity(self, kind: str, sign: str = "positive") -> units.Quantity:
        """A quantity of ``kind`` whose ``sign`` is ``positive``, ``not negative``, ``not zero`` or ``any``."""

        def read(text: str) -> units.Quantity:
            quantity = units.parse(text, kind)
            value = quantity.value
            fits = {"positive": value > 0, "not negative": value >= 0, "not zero": value != 0, "any": True}
            if not fits[sign]:
                msg = f"found {quoted(text)}, expected {units.a_kind(kind)} that is {sign}"
                raise ValueError(msg)
            return quantity

        return self.convert(read, units.Quantity(Fraction(1), "states", "clocks", 1))

    def items(self, what: str = "") -> list[Entry]:
        """The members of a list; ``what`` says what it should be where members are no single words."""
        if not isinstance(self._node, yaml.SequenceNode):
            word = self._node.value if isinstance(self._node, yaml.ScalarNode) else ""
            hint = f"; write [{word}]" if not what and re.fullmatch(r"[\w./*-]{1,40}", word) else ""
            self.problem(f"found {self._shape()}, expected {what or 'a list'}{hint}")
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
            key = str(key_node.value) if isinstance(key_node, yaml.ScalarNode) else ""
            # Keys are shown as they are in messages, so they are held to what can be shown.
            if not 0 < len(key) <= 100 or not key.isprintable():
                Entry(self._log, key_node, self.path).problem("a key must be a plain word of at most 100 characters")
                continue
            entry = Entry(self._log, node, f"{self.path}.{key}" if self.path else key)
            entry.line = key_node.start_mark.line + 1
            if key in found:
                entry.problem(f"the key stands twice; it first stands in line {found[key].line}")
            else:
                found[key] = entry
        return list(found.items())

    def is_word(self, word: str) -> bool:
        """Whether just ``word`` stands here."""
        return isinstance(self._node, yaml.ScalarNode) and self._node.value == word

    def section(self, allowed: Sequence[str], later: Sequence[str] = (), or_word: str = "") -> Section:
        """A map whose keys must be among ``allowed``; those of ``later`` are refused as not supported yet.

        ``or_word`` is what could stand instead of a map.
        """
        return Section(self, allowed, later, or_word)

    def _shape(self) -> str:
        if isinstance(self._node, yaml.ScalarNode):
            return quoted(str(self._node.value)) if self._node.value else "nothing"
        return "a map" if self.is_map else "a list"


class Section:
    """A map with known keys; unknown ones are noted with the nearest right word."""

    def __init__(self, entry: Entry, allowed: Sequence[str], later: Sequence[str], or_word: str) -> None:
        self.entry = entry
        self._found: dict[str, Entry] = {}
        self.keys: list[str] = []
        instead = f"{or_word} or " if or_word else ""
        for key, value in entry.pairs(f"{instead}a map with the key{'s' * (len(allowed) > 1)} {', '.join(allowed)}"):
            if key in allowed:
                self._found[key] = value
                self.keys.append(key)
            elif key in later:
                value.problem("this key is not supported by this version of tbkit")
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


def whole_number(text: str) -> int | None:
    """The value of ``12``, ``-1_000`` or ``0xff``; None if it is no whole number."""
    if len(text) <= 40 and re.fullmatch(r"[+-]?(\d+(_\d+)*|0x[0-9A-Fa-f]+)", text):
        return int(text, 16) if "x" in text else int(text)
    return None


#: What usually lies behind the end of a complaint of the YAML library.
_YAML_HINTS = {
    "'\\t' that cannot start any token": "indent with blanks, not with tabs",
    "but got '['": 'a text with brackets stands in quotes: "ab[0]"',
    "mapping values are not allowed here": "one `key: value` a line, with a blank after the colon",
}


class _Refused(yaml.MarkedYAMLError):
    """Sound YAML that is not accepted here."""


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
            self._refuse(f"nested deeper than {DEEPEST_NESTING} levels, the most that is read", event)
        node: yaml.Node | None = super().compose_node(parent, index)
        self.depth -= 1
        return node

    @staticmethod
    def _refuse(text: str, event: Any) -> NoReturn:
        raise _Refused(None, None, text, event.start_mark)


def _yaml_fault(error: yaml.YAMLError, text: str) -> tuple[int, str]:
    """Line and text of what the YAML library complains about."""
    if isinstance(error, yaml.reader.ReaderError):
        return text.count("\n", 0, error.position) + 1, f"the character U+{ord(text[error.position]):04X} cannot stand in YAML"
    if not isinstance(error, yaml.MarkedYAMLError):
        return 1, f"not valid YAML: {error}"
    mark, begun = error.problem_mark or error.context_mark, error.context_mark
    line = mark.line + 1 if mark else 1
    if isinstance(error, _Refused):
        return line, str(error.problem)
    said = ": ".join(part for part in (error.context, error.problem) if part)
    said = said.replace("'<stream end>'", "the end of the file").replace("'<scalar>'", "a text")
    if begun and mark and begun.line < mark.line:
        said += f"; it began in line {begun.line + 1}"
    said += next((f" ({hint})" for sign, hint in _YAML_HINTS.items() if said.endswith(sign)), "")
    return line, f"not valid YAML: {said}"


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
        with path.open("rb") as stream:
            data = stream.read(LARGEST_FILE_BYTES + 1)
    except OSError as error:
        raise fail(1, f"the {what} cannot be read: {error.strerror}") from error
    if len(data) > LARGEST_FILE_BYTES:
        raise fail(1, f"the {what} has more than {LARGEST_FILE_BYTES} bytes, the most that is read")
    try:
        text = data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise fail(line, f"the {what} is not UTF-8 text: found the byte 0x{data[error.start]:02x}; save it as UTF-8") from error
    loader = None
    try:
        loader = _Loader(text)
        node = loader.get_single_node()
    except yaml.YAMLError as error:
        raise fail(*_yaml_fault(error, text)) from error
    except (ValueError, OverflowError) as error:
        # The library's own conversions fail so, such as the one of "\UFFFFFFFF".
        line = loader.line + 1 if loader else 1
        raise fail(line, "not valid YAML: an escape or a version that is out of range") from error
    if node is None:
        raise fail(1, f"the {what} is empty")
    log = _Log(shown)
    return Document(Entry(log, node, ""), log)
