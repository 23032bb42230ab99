"""The ports of the top module, read from the RTL, and what of a decoder file does not fit them.

Verilog and SystemVerilog are read by pyslang, VHDL by GHDL's parser where it is there. Where the RTL cannot be read nothing is
said here: the simulator's own message is better.
"""

from __future__ import annotations

import shutil
from dataclasses import dataclass
from pathlib import Path

import pyslang
from pyslang.ast import ArgumentDirection, Compilation, CompilationOptions, InstanceSymbol
from pyslang.parsing import PreprocessorOptions
from pyslang.syntax import SyntaxTree

from tbkit.contract import Contract, Design
from tbkit.contract_check import uses_of_ports
from tbkit.errors import Problem, SimulatorError
from tbkit.vhdlports import BITS, INTEGERS, VECTORS, VhdlPort, VhdlType, read_ports
from tbkit.yamltree import nearest

_INPUTS = ("clock", "reset", "lines", "inputs")


@dataclass(frozen=True, slots=True)
class RtlPort:
    """A port as it is declared.

    Attributes:
        width: None where it cannot be told; of an integer the bits that its range needs.
        bounds: the numbers of the leftmost and the rightmost bit, of a plain vector.
        optional: an input with a value of its own where it is left open.
        parts: of a record, each named ``port.element``.
        literals: of an enumeration.
    """

    name: str
    is_output: bool
    width: int | None
    signed: bool
    place: str
    bounds: tuple[int, int] | None = None
    optional: bool = False
    parts: tuple[RtlPort, ...] = ()
    literals: tuple[str, ...] = ()
    is_integer: bool = False


@dataclass(frozen=True, slots=True)
class Rtl:
    """A top module: where it is, its ports in order, the names of its parameters."""

    top: str
    place: str
    ports: tuple[RtlPort, ...]
    parameters: tuple[str, ...]


def read_rtl(design: Design) -> Rtl | tuple[str, ...] | None:
    """The top module; the names of those there are if it is not among them; None if the RTL cannot be read."""
    return _read_vhdl(design) if design.language == "vhdl" else _read_verilog(design)


def modules(sources: tuple[Path, ...], include_dirs: tuple[Path, ...] = ()) -> tuple[str, ...]:
    """Names of the Verilog modules that no other instantiates."""
    compilation, _ = _compile(Design("", sources, include_dirs))
    return tuple(one.name for one in compilation.getRoot().topInstances)


def _compile(design: Design) -> tuple[Compilation, pyslang.SourceManager]:
    reading, building = PreprocessorOptions(), CompilationOptions()
    reading.additionalIncludePaths = [Path(folder) for folder in design.include_dirs]
    building.paramOverrides = [
        f'{name}="{value}"' if isinstance(value, str) else f"{name}={value}" for name, value in design.parameters
    ]
    if design.top:
        building.topModules = {design.top}
    options = pyslang.Bag([reading, building])
    manager = pyslang.SourceManager()
    compilation = Compilation(options)
    # One unit, as the simulators take it: a macro of one file holds in those after it.
    compilation.addSyntaxTree(SyntaxTree.fromFiles([str(source) for source in design.sources], manager, options))
    return compilation, manager


def _has_errors(compilation: Compilation, manager: pyslang.SourceManager) -> bool:
    """Whether the text cannot be understood: what would be read from the rest of it may be wrong."""
    severity = pyslang.DiagnosticEngine(manager).getSeverity
    grave = (pyslang.DiagnosticSeverity.Error, pyslang.DiagnosticSeverity.Fatal)
    return any(severity(one.code, one.location) in grave for one in compilation.getParseDiagnostics())


def _read_verilog(design: Design) -> Rtl | tuple[str, ...] | None:
    try:
        compilation, manager = _compile(design)
        tops: list[InstanceSymbol] = list(compilation.getRoot().topInstances)
    except RuntimeError:
        return None
    if _has_errors(compilation, manager):
        return None
    names = tuple(one.name for one in compilation.getDefinitions())
    if design.top not in names:
        return names or None
    top = next((one for one in tops if one.name == design.top), None)
    if top is None:
        return None

    def place(symbol: object) -> str:
        location = symbol.location  # type: ignore[attr-defined]  # every symbol has one
        return f"{Path(manager.getFileName(location)).name}:{manager.getLineNumber(location)}"

    ports = []
    for port in top.body.portList:
        kind = port.type
        signed = bool(kind.isIntegral and kind.isSigned)
        vector = kind.canonicalType
        plain = bool(vector.isPackedArray and vector.elementType.bitWidth == 1)
        bounds = (vector.range.left, vector.range.right) if plain else None
        output, optional = port.direction == ArgumentDirection.Out, port.initializer is not None
        ports.append(RtlPort(port.name, output, kind.bitWidth or None, signed, place(port), bounds, optional))
    parameters = tuple(one.name for one in top.body.parameters if not getattr(one, "isLocalParam", False))
    return Rtl(design.top, place(top.definition), tuple(ports), parameters)


def _read_vhdl(design: Design) -> Rtl | None:
    if shutil.which("ghdl") is None:
        return None
    try:
        known = read_ports(design)
    except SimulatorError:
        return None
    ports = [_vhdl_port(one.name, one.type, one) for one in known.values()]
    first = ports[0].place if ports else ""
    return Rtl(design.top, first, tuple(ports), tuple(name for name, _ in design.parameters))


def _vhdl_port(name: str, kind: VhdlType, port: VhdlPort) -> RtlPort:
    sides = None if kind.left is None or kind.right is None else (kind.left, kind.right)
    bounds = sides if kind.mark in VECTORS else None
    signed, width = kind.mark == "signed", 1 if kind.mark in BITS else None
    if bounds:
        width = abs(bounds[0] - bounds[1]) + 1
    elif kind.mark in INTEGERS and sides:
        signed = min(sides) < 0
        width = max(max(sides).bit_length(), (-min(sides) - 1).bit_length() if signed else 1) + signed
    parts = tuple(_vhdl_port(f"{name}.{element}", inner, port) for element, inner in kind.elements.items())
    place = f"{Path(port.file).name}:{port.line}"
    is_output = port.mode in ("out", "buffer")
    return RtlPort(name, is_output, width, signed, place, bounds, port.optional, parts, kind.literals, kind.mark in INTEGERS)


def check_against_rtl(contract: Contract) -> list[Problem]:
    """What of a decoder file does not fit the RTL; nothing where the RTL cannot be read."""
    rtl = read_rtl(contract.design)
    if rtl is None:
        return []
    if not isinstance(rtl, Rtl):
        text = f"there is no module {contract.design.top!r} in the sources; there are {', '.join(rtl)}"
        return [_problem(contract, "decoder", text + nearest(contract.design.top, rtl))]
    found = [_misfit(contract, rtl, *use) for use in _uses(contract)]
    # Two bits of one port may have the same thing wrong.
    problems = list(dict.fromkeys(problem for problem in found if problem is not None))
    for name, _ in contract.design.parameters:
        if name not in rtl.parameters:
            text = f"{rtl.top!r} ({rtl.place}) has no parameter {name!r}; it has {', '.join(rtl.parameters) or 'none'}"
            problems.append(_problem(contract, "decoder", text + nearest(name, rtl.parameters)))
    if not problems:
        used = {_fold(contract, name) for _, name, *_ in _uses(contract)}
        for port in rtl.ports:
            if not port.is_output and not port.optional and _fold(contract, port.name) not in used:
                text = f"the input {port.name!r} ({port.place}) is not named; hold it at a value: `inputs: {{{port.name}: 0}}`"
                problems.append(_problem(contract, "inputs", text))
    return problems


def _problem(contract: Contract, key: str, text: str) -> Problem:
    return Problem(str(contract.file), contract.places.get(key, 1), f"{key}: {text}")


def _fold(contract: Contract, name: str) -> str:
    return name.lower() if contract.design.language == "vhdl" else name


def _uses(contract: Contract) -> list[tuple[str, str, int | None, int | None]]:
    """(key, port, highest bit or None for the whole port, width that the whole port must have or None)."""
    widths = {constant.port: constant.width for constant in contract.constants}
    for output in contract.outputs:
        if len(output.slices) == 1 and not output.literal:
            widths[output.slices[0].port] = output.width
    return [(key, one.port, one.high, widths.get(one.port, 1)) for key, one in uses_of_ports(contract)]


def _misfit(contract: Contract, rtl: Rtl, key: str, name: str, high: int | None, width: int | None) -> Problem | None:
    base = name.partition(".")[0]
    ports = {_fold(contract, port.name): port for port in rtl.ports}
    port = ports.get(_fold(contract, base))
    if port is None:
        names = [one.name for one in rtl.ports if one.is_output == (key not in _INPUTS)]
        kind = "input" if key in _INPUTS else "output"
        text = f"{rtl.top!r} ({rtl.place}) has no port {base!r}; its {kind}s are {', '.join(names) or 'none'}"
        return _problem(contract, key, text + nearest(base, names))
    if port.is_output == (key in _INPUTS):
        kinds = ("an output", "an input") if port.is_output else ("an input", "an output")
        return _problem(contract, key, f"the port {base!r} ({port.place}) is {kinds[0]}, and {kinds[1]} is needed here")
    if port.width is None or port.is_integer or "." in name:
        return None
    if high is not None:
        text = _bit_misfit(port, high, driven=key in _INPUTS and contract.design.language != "vhdl")
        return _problem(contract, key, text) if text else None
    if width is not None and width != port.width:
        return _problem(contract, key, f"the port {base!r} ({port.place}) has {port.width} bits, and {width} are declared here")
    return None


def _bit_misfit(port: RtlPort, bit: int, *, driven: bool) -> str:
    """What is wrong with a bit of a port; ``driven``: by the bench, which numbers the bits of a vector from 0 at its right."""
    left, right = port.bounds or ((port.width or 1) - 1, 0)
    shown = f"the port {port.name!r} ({port.place}) "
    if driven and port.bounds and (right != 0 or left < 0):
        return (
            f"{shown}is declared [{left}:{right}], and single bits are driven of vectors declared [N:0] only; declare it"
            f" [{abs(left - right)}:0], or put a module around the decoder that does"
        )
    if min(left, right) <= bit <= max(left, right):
        return ""
    if port.bounds and right != 0:
        return f"{shown}is declared [{left}:{right}], and bit {bit} is none of them"
    return f"{shown}has {port.width} bits, and bit {bit} is none of them"
