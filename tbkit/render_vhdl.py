"""Renders the VHDL bench from a contract and the ports of its entity.

As for the SystemVerilog bench the template only branches and repeats. What it is given here are names that were checked as
identifiers when the decoder file was read, types as GHDL knows them, and literals.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from tbkit.contract import Contract, Output, Slice
from tbkit.errors import InputError, Problem
from tbkit.render import Rendered, basics, digest_of, driven, rendered
from tbkit.trace import record_words
from tbkit.units import PS_PER_S
from tbkit.vhdlports import BITS, INTEGERS, VECTORS, VhdlPort, VhdlType


def vhdl_time(time_ps: int) -> str:
    """A time as VHDL literals, none of which is too large for a 32-bit integer."""
    seconds, rest = divmod(time_ps, PS_PER_S)
    us, ps = divmod(rest, 10**6)
    return f"({seconds} sec + {us} us + {ps} ps)"


def vhdl_generic(value: int | str) -> str:
    if isinstance(value, int) or value in ("true", "false"):
        return str(value)
    return f'"{value}"'


class _Ports:
    """Looks ports up; what does not fit is a problem of the decoder file."""

    def __init__(self, contract: Contract, known: dict[str, VhdlPort]) -> None:
        self.contract, self.known = contract, known
        self.used: dict[str, VhdlPort] = {}
        self.problems: list[Problem] = []

    def problem(self, text: str) -> None:
        self.problems.append(Problem(str(self.contract.file), 1, text))

    def get(self, name: str) -> VhdlPort | None:
        port = self.known.get(name.lower())
        if port is None:
            self.problem(f"the entity {self.contract.design.top!r} has no port {name!r}; it has {', '.join(self.known)}")
            return None
        if port.type.mark in VECTORS and None in (port.type.left, port.type.right):
            self.problem(f"the width of the port {name!r} cannot be told from its declaration; give generics as whole numbers")
            return None
        self.used[port.name] = port
        return port


def _driven_value(kind: VhdlType, value: str) -> str:
    """A std_logic signal as a value of a one-bit type."""
    return {"bit": f"to_bit({value})", "boolean": f"{value} = '1'"}.get(kind.mark, value)


def _inputs(contract: Contract, ports: _Ports) -> list[dict[str, str]]:
    found: list[dict[str, str]] = []
    signals = [(port, signal.replace("~", "not ")) for port, signal in driven(contract)]
    for port, signal in signals:
        known = ports.get(port.name)
        if known is None:
            continue
        target = f"port_{known.name}"
        if port.bit is None:
            found.append({"target": target, "value": _driven_value(known.type, signal)})
        else:
            value = f"to_bit({signal})" if known.type.mark == "bit_vector" else signal
            found.append({"target": f"{target}({port.bit})", "value": value})
    for constant in contract.constants:
        known = ports.get(constant.port)
        if known is not None:
            found.append({"target": f"port_{known.name}", "value": _constant(known.type, constant.value)})
    if contract.clock.port and (known := ports.get(contract.clock.port)) is not None:
        found.append({"target": f"port_{known.name}", "value": _driven_value(known.type, "clock")})
    return found


def _constant(kind: VhdlType, value: int) -> str:
    if kind.mark in INTEGERS:
        return str(value)
    if kind.mark == "boolean":
        return "true" if value else "false"
    if kind.mark in VECTORS and kind.left is not None and kind.right is not None:
        return f'"{value:0{abs(kind.left - kind.right) + 1}b}"'
    return f"'{value & 1}'"


def _output(contract: Contract, output: Output, ports: _Ports) -> str:
    """The bits of an output as a std_logic_vector."""
    return " & ".join(_bits(contract, output, one, ports) for one in output.slices)


def _bits(contract: Contract, output: Output, one: Slice, ports: _Ports) -> str:
    name, _, element = one.port.partition(".")
    known = ports.get(name)
    if known is None:
        return '""'
    kind, value = known.type, f"port_{known.name}"
    if element:
        inner = kind.elements.get(element.lower())
        if inner is None:
            ports.problem(f"the port {name!r} has no element {element!r}; it has {', '.join(kind.elements) or 'none'}")
            return '""'
        kind, value = inner, f"{value}.{element}"
    if output.literal:
        if output.literal.lower() not in kind.literals:
            ports.problem(f"{output.literal!r} is no value of {one.port!r}; it has {', '.join(kind.literals) or 'none'}")
        return f"(0 => bit_of({value} = {kind.mark.rpartition('.')[0]}.{output.literal}))"
    if kind.mark in INTEGERS:
        signed = output.name in ("count", "index") and contract.count is not None and contract.count.signed
        return f"std_logic_vector(to_{'signed' if signed else 'unsigned'}({value}, {output.width}))"
    if kind.mark in VECTORS:
        value = f"to_stdlogicvector({value})" if kind.mark == "bit_vector" else f"std_logic_vector({value})"
        if one.high is not None:
            # Bits count from the right, whichever way the port does.
            low, high = one.low or 0, one.high
            if kind.to or kind.right != 0:
                ports.problem(f"bits of {one.port!r} need a range such as 7 downto 0; it is {kind.text}")
            return f"std_logic_vector(port_{value.partition('port_')[2].rstrip(')')}({high} downto {low}))"
        return value
    if kind.mark in BITS:
        as_bit = {"bit": f"to_stdulogic({value})", "boolean": f"bit_of({value})"}.get(kind.mark, value)
        return f"(0 => {as_bit})"
    ports.problem(f"the port {one.port!r} is of a type that is not understood: {kind.mark}")
    return '""'


def _own_marks(kind: VhdlType) -> list[str]:
    """The user's own types in a type, with their packages."""
    inner = [mark for element in kind.elements.values() for mark in _own_marks(element)]
    return [kind.mark, *inner] if "." in kind.mark else inner


def render_vhdl(
    contract: Contract, known: dict[str, VhdlPort], checks: Mapping[str, object] | None = None, overrides: Path | None = None
) -> Rendered:
    """The bench; the same contract and ports give the same bytes.

    ``checks``: what a bench that checks by itself is told (:mod:`tbkit.standalone`); None: one that tbkit plays on.

    Raises:
        InputError: ports of the decoder file do not fit the entity.
    """
    ports = _Ports(contract, known)
    clock = contract.clock
    inputs = _inputs(contract, ports)
    if clock.tick and (tick := ports.get(clock.tick.name)) is not None:
        value = "not tick" if clock.tick.active_low else "tick"
        inputs.append({"target": f"port_{tick.name}", "value": _driven_value(tick.type, value)})
    outputs = [
        {"name": output.name, "width": output.width, "value": _output(contract, output, ports)} for output in contract.outputs
    ]
    if ports.problems:
        raise InputError(ports.problems)
    record_bits = 32 * record_words(contract)
    spare = record_bits - sum(output.width for output in contract.outputs)
    record = [f"out_{output.name}" for output in reversed(contract.outputs)]
    period_ps = clock.edge_ps
    context: dict[str, object] = {
        **basics(),
        "checks": checks and {**checks, "period": vhdl_time(clock.period_ps)},
        "inputs": inputs,
        "ports": [{"name": port.name, "type": port.type.text} for port in ports.used.values()],
        "outputs": outputs,
        "record": [f'"{"0" * spare}"', *record] if spare else record,
        "record_bits": record_bits,
        "record_words": record_words(contract),
        # Operators on a user's own types are found where they are declared.
        "packages": sorted({mark.rpartition(".")[0] for port in ports.used.values() for mark in _own_marks(port.type)}),
        "top": contract.design.top,
        "parameters": [{"name": name, "value": vhdl_generic(value)} for name, value in contract.design.parameters],
        "clock": {
            "idle": int(clock.falling),
            "active": int(not clock.falling),
            "period": vhdl_time(period_ps),
            "high": vhdl_time(period_ps // 2),
            "low": vhdl_time(period_ps - period_ps // 2),
            "pause": vhdl_time(2 * period_ps),
            "runs": bool(clock.port),
            "every": clock.every,
        },
    }
    return rendered("bench.vhd.j2", {"digest": digest_of(context), **context}, overrides)
