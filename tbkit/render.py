"""Renders the SystemVerilog bench from a contract.

Templates only branch and repeat: every name that reaches HDL has been checked as an identifier when the decoder file was
read, and every value is turned into a sized literal here.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from importlib import resources

import jinja2

from tbkit import __version__
from tbkit.contract import BENCH, DEEDS, Contract, Output, Port, Slice
from tbkit.encoder import LINES
from tbkit.stimulus import SIGNALS, UNKNOWN
from tbkit.trace import record_words


def template(name: str) -> jinja2.Template:
    """A template of this package; what it is not given is an error."""
    environment = jinja2.Environment(
        loader=jinja2.FunctionLoader(lambda name: resources.files("tbkit.templates").joinpath(name).read_text("utf-8")),
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        autoescape=False,  # noqa: S701  # HDL is rendered, not HTML
    )
    return environment.get_template(name)


def digest_of(context: dict[str, object]) -> str:
    return hashlib.blake2b(repr(sorted(context.items())).encode(), digest_size=8).hexdigest()


def basics() -> dict[str, object]:
    """What benches in any language are told."""
    return {
        "version": __version__,
        "bench": BENCH,
        "signals": [{"name": name, "bit": bit, "may_be_unknown": name in LINES} for bit, name in enumerate(SIGNALS)],
        "unknown_bit": UNKNOWN.bit_length() - 1,
    }


def sv_literal(value: int, width: int) -> str:
    """A sized hexadecimal literal.

    Raises:
        ValueError: the value does not fit.
    """
    if not 0 <= value < 1 << width:
        msg = f"{value} does not fit in {width} bits"
        raise ValueError(msg)
    return f"{width}'h{value:x}"


def sv_parameter(value: int | str) -> str:
    """A parameter value: a signed 32-bit decimal, or a string without anything that needs escaping."""
    return f'"{value}"' if isinstance(value, str) else str(value)


def driven(contract: Contract) -> list[tuple[Port, str]]:
    """Driven one-bit ports with the signal of the bench that drives them, ``~`` before it where it is inverted."""
    ports = {
        "a": contract.a,
        "b": contract.b,
        "index": contract.index_line,
        "reset": contract.reset.port if contract.reset else None,
    }
    # An enable is driven by its opposite.
    opposite = {"disable", "disarm"}
    for signal, role in DEEDS.items():
        one = contract.input(role)
        ports[signal] = one.port if one else None
    latch = contract.input("latch")
    ports["latch"] = latch.port if latch else None
    return [
        (port, f"{'~' if port.active_low != (name in opposite) else ''}line_{name}")
        for name, port in ports.items()
        if port is not None
    ]


def _outputs(outputs: tuple[Output, ...]) -> tuple[dict[str, str], list[str]]:
    """Ports that are one output as they stand, with its name; and ports of which outputs are bits."""
    slices = [(one, output.name) for output in outputs for one in output.slices]
    whole = {one.port: name for one, name in slices if one.high is None}
    return whole, list(dict.fromkeys(one.port for one, _ in slices if one.high is not None))


def _bits(one: Slice) -> str:
    return f"decoder.{one.port}[{one.high}:{one.low}]" if one.high != one.low else f"decoder.{one.port}[{one.high}]"


def _context(contract: Contract) -> dict[str, object]:
    inputs = driven(contract)
    vectors: dict[str, list[tuple[int, str]]] = {}
    ports = [{"name": contract.clock.port, "value": "clock"}] if contract.clock.port else []
    for port, value in inputs:
        if port.bit is None:
            ports.append({"name": port.name, "value": value})
        else:
            vectors.setdefault(port.name, []).append((port.bit, value))
    ports += [{"name": name, "value": f"vector_{name}"} for name in vectors]
    ports += [{"name": constant.port, "value": sv_literal(constant.value, constant.width)} for constant in contract.constants]
    outputs = contract.outputs
    whole, shared = _outputs(outputs)
    ports += [{"name": port, "value": f"out_{name}"} for port, name in whole.items()]
    # Bits are taken from inside: how wide such a port is, the decoder file need not say.
    ports += [{"name": port, "value": ""} for port in shared]
    record_bits = 32 * record_words(contract)
    spare = record_bits - sum(output.width for output in outputs)
    record = [f"out_{output.name}" for output in reversed(outputs)]
    clock = contract.clock
    period = clock.edge_ps
    if clock.tick:
        ports.append({"name": clock.tick.name, "value": "~tick" if clock.tick.active_low else "tick"})
    return {
        **basics(),
        "outputs": [
            {
                "name": output.name,
                "range": f"[{output.width - 1}:0] " if output.width > 1 else "",
                "bits": "" if output.slices[0].port in whole else ", ".join(_bits(one) for one in output.slices),
            }
            for output in outputs
        ],
        "record": [sv_literal(0, spare), *record] if spare else record,
        "record_bits": record_bits,
        "vectors": [
            {
                "name": name,
                "high": max(bit for bit, _ in bits),
                "bits": [{"number": bit, "value": value} for bit, value in sorted(bits)],
            }
            for name, bits in vectors.items()
        ],
        "top": contract.design.top,
        "parameters": [{"name": name, "value": sv_parameter(value)} for name, value in contract.design.parameters],
        "ports": ports,
        "clock": {
            "idle": int(contract.clock.falling),
            "active": int(not contract.clock.falling),
            "period": period,
            "high": period // 2,
            "low": period - period // 2,
            "pause": 2 * period,
            "runs": bool(clock.port),
            "every": clock.every,
        },
    }


def render_bench(contract: Contract, checks: Mapping[str, object] | None = None) -> str:
    """The text of the bench; the same contract gives the same bytes.

    ``checks``: what a bench that checks by itself is told (:mod:`tbkit.standalone`); None: one that tbkit plays on.
    """
    context = {**_context(contract), "checks": checks}
    return template("bench.sv.j2").render(digest=digest_of(context), **context)
