"""The ports of a VHDL entity, as GHDL's parser tells them (``ghdl --file-to-xml``)."""

from __future__ import annotations

import subprocess
import xml.etree.ElementTree as ET  # what GHDL writes
from collections.abc import Callable
from dataclasses import dataclass, field

from tbkit.contract import Design
from tbkit.errors import SimulatorError

BITS = ("std_logic", "std_ulogic", "bit", "boolean")
VECTORS = ("std_logic_vector", "std_ulogic_vector", "signed", "unsigned", "bit_vector")
INTEGERS = ("integer", "natural", "positive")


@dataclass(frozen=True, slots=True)
class VhdlType:
    """The type of a port or of a record's element.

    Attributes:
        mark: its name in lower case, with its library and package where it is the user's own.
        left, right: bounds of a vector or an integer, None where they cannot be told; ``to``: they rise.
        elements: of a record, by name.
        literals: of an enumeration.
    """

    mark: str
    left: int | None = None
    right: int | None = None
    to: bool = False
    elements: dict[str, VhdlType] = field(default_factory=dict)
    literals: tuple[str, ...] = ()

    @property
    def text(self) -> str:
        """The type as it is written in a declaration."""
        if self.mark not in VECTORS:
            return self.mark
        return f"{self.mark}({self.left} {'to' if self.to else 'downto'} {self.right})"


@dataclass(frozen=True, slots=True)
class VhdlPort:
    """A port; ``optional``: it has a value of its own where it is left open."""

    name: str
    mode: str
    type: VhdlType
    file: str
    line: int
    optional: bool = False


def standard_option(design: Design) -> str:
    return f"--std={design.standard}"


def read_ports(design: Design) -> dict[str, VhdlPort]:
    """The ports of the top entity, by their names in lower case.

    Raises:
        SimulatorError: GHDL does not understand the sources, or there is no such entity.
    """
    command = ["ghdl", "--file-to-xml", standard_option(design), *map(str, design.sources)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)  # noqa: S603  # fixed words and files
    try:
        root = ET.fromstring(done.stdout)  # noqa: S314  # GHDL's own
    except ET.ParseError as error:
        shown = "\n".join(f"  {line}" for line in done.stderr.splitlines()[:20])
        msg = f"ghdl does not understand the decoder {design.top!r}:\n{shown}"
        raise SimulatorError(msg) from error
    return _Reader(root, design).ports()


class _Reader:
    def __init__(self, root: ET.Element, design: Design) -> None:
        self.design = design
        self.by_id = {node.get("id", ""): node for node in root.iter() if node.get("id")}
        entities = [node for node in root.iter("library_unit") if node.get("kind") == "entity_declaration"]
        named = [node for node in entities if node.get("identifier") == design.top.lower()]
        if not named:
            known = ", ".join(sorted(node.get("identifier", "") for node in entities)) or "none"
            msg = f"there is no entity {design.top!r} in the sources; there are: {known}"
            raise SimulatorError(msg)
        self.entity = named[-1]
        self.generics = self._generics()

    def _generics(self) -> dict[str, int]:
        found: dict[str, int] = {}
        for node in self.entity.findall("generic_chain/el"):
            default = node.find("default_value")
            value = None if default is None else self._value(default, found)
            if value is not None:
                found[node.get("identifier", "")] = value
        given = {name.lower(): value for name, value in self.design.parameters}
        return {**found, **{name: value for name, value in given.items() if isinstance(value, int)}}

    def ports(self) -> dict[str, VhdlPort]:
        found: dict[str, VhdlPort] = {}
        subtype: ET.Element | None = None
        for node in self.entity.findall("port_chain/el"):
            # Of `a, b : in std_logic` only the first carries the type.
            own = node.find("subtype_indication")
            if own is not None:
                subtype = self.by_id.get(own.get("ref", ""), own)
            name = node.get("identifier", "")
            if subtype is not None:
                kind = self._type(subtype)
                optional = node.find("default_value") is not None
                found[name] = VhdlPort(name, node.get("mode", ""), kind, node.get("file", ""), int(node.get("line", "0")), optional)
        return found

    def _type(self, node: ET.Element) -> VhdlType:
        mark_node = node if node.get("kind") == "simple_name" else node.find("subtype_type_mark")
        if mark_node is None:
            return VhdlType("unknown")
        mark = mark_node.get("identifier", "unknown")
        if node.get("kind") == "selected_name" or mark not in (*BITS, *VECTORS, *INTEGERS):
            return self._own_type(mark_node)
        bounds = node.find("range_constraint" if mark in INTEGERS else "index_constraint_list/el/range_constraint")
        if mark not in BITS and bounds is not None:
            left, right = (
                None if side is None else self._value(side, self.generics)
                for side in (bounds.find("left_limit_expr"), bounds.find("right_limit_expr"))
            )
            return VhdlType(mark, left, right, to=bounds.get("direction") == "to")
        return VhdlType(mark)

    def _own_type(self, mark_node: ET.Element) -> VhdlType:
        """A type that the user has declared in a package: a record or an enumeration."""
        ref = mark_node.find("named_entity")
        declared = None if ref is None else self.by_id.get(ref.get("ref", ""))
        if declared is None:
            return VhdlType("unknown")
        definition = declared.find("type_definition")
        if definition is None:
            subtype = declared.find("subtype_indication")
            return VhdlType("unknown") if subtype is None else self._type(subtype)
        parent = declared.find("parent")
        package = None if parent is None else self.by_id.get(parent.get("ref", ""))
        name = declared.get("identifier", "")
        mark = f"work.{package.get('identifier')}.{name}" if package is not None else name
        literals = tuple(node.get("identifier", "") for node in definition.findall("enumeration_literal_list/el"))
        elements = {
            node.get("identifier", ""): self._type(subtype)
            for node in definition.findall("elements_declaration_list/el")
            if (subtype := node.find("subtype_indication")) is not None
        }
        return VhdlType(mark, elements=elements, literals=literals)

    def _value(self, node: ET.Element, names: dict[str, int]) -> int | None:
        """The value of a bound, as far as it is made of numbers, generics and plain arithmetic."""
        kind = node.get("kind", "")
        if kind == "integer_literal":
            return int(node.get("value", "0"))
        if kind == "simple_name":
            return names.get(node.get("identifier", ""))
        if kind == "parenthesis_expression":
            inner = node.find("expression")
            return None if inner is None else self._value(inner, names)
        operators: dict[str, Callable[[int, int], int]] = {
            "addition_operator": lambda a, b: a + b,
            "substraction_operator": lambda a, b: a - b,
            "multiplication_operator": lambda a, b: a * b,
            "division_operator": lambda a, b: a // b if b else 0,
            "exponentiation_operator": lambda a, b: a**b if 0 <= b < 64 else 0,  # wider is no bound
        }
        left, right = node.find("left"), node.find("right")
        if kind not in operators or left is None or right is None:
            return None
        a, b = self._value(left, names), self._value(right, names)
        return None if a is None or b is None else operators[kind](a, b)
