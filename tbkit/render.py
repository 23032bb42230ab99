"""Renders the SystemVerilog bench from a contract.

Templates only branch and repeat: every name that reaches HDL has been checked as an identifier when the decoder file was
read, and every value is turned into a sized literal here.
"""

from __future__ import annotations

import hashlib
from importlib import resources

import jinja2

from tbkit import __version__
from tbkit.contract import BENCH, Contract, Port
from tbkit.encoder import LINES
from tbkit.stimulus import SIGNALS, UNKNOWN
from tbkit.trace import fields, record_words


def _environment() -> jinja2.Environment:
    return jinja2.Environment(
        loader=jinja2.FunctionLoader(lambda name: resources.files("tbkit.templates").joinpath(name).read_text("utf-8")),
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        autoescape=False,  # noqa: S701  # HDL is rendered, not HTML
    )


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


def _inputs(contract: Contract) -> list[tuple[Port, str]]:
    """Driven one-bit ports with the signal of the bench that drives them."""
    ports = {
        "a": contract.a,
        "b": contract.b,
        "index": contract.index_line,
        "reset": contract.reset.port if contract.reset else None,
        "clear": contract.clear_error,
    }
    return [(port, f"{'~' if port.active_low else ''}line_{name}") for name, port in ports.items() if port is not None]


def _context(contract: Contract) -> dict[str, object]:
    inputs = _inputs(contract)
    vectors: dict[str, list[tuple[int, str]]] = {}
    ports = [{"name": contract.clock.port, "value": "clock"}]
    for port, value in inputs:
        if port.bit is None:
            ports.append({"name": port.name, "value": value})
        else:
            vectors.setdefault(port.name, []).append((port.bit, value))
    ports += [{"name": name, "value": f"vector_{name}"} for name in vectors]
    ports += [{"name": constant.port, "value": sv_literal(constant.value, constant.width)} for constant in contract.constants]
    names = {
        "count": contract.count.port if contract.count else "",
        "direction": contract.direction.port if contract.direction else "",
        "step": contract.step.name if contract.step else "",
        "error": contract.error.port.name if contract.error else "",
    }
    layout = fields(contract)
    ports += [{"name": names[field.name], "value": f"out_{field.name}"} for field in layout]
    record_bits = 32 * record_words(contract)
    spare = record_bits - sum(field.width for field in layout)
    record = [f"out_{field.name}" for field in reversed(layout)]
    period = contract.clock.period_ps
    return {
        "version": __version__,
        "bench": BENCH,
        "signals": [{"name": name, "bit": bit, "may_be_unknown": name in LINES} for bit, name in enumerate(SIGNALS)],
        "unknown_bit": UNKNOWN.bit_length() - 1,
        "outputs": [{"name": field.name, "range": f"[{field.width - 1}:0] " if field.width > 1 else ""} for field in layout],
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
        },
    }


def render_bench(contract: Contract) -> str:
    """The text of the bench; the same contract gives the same bytes."""
    context = _context(contract)
    digest = hashlib.blake2b(repr(sorted(context.items())).encode(), digest_size=8).hexdigest()
    return _environment().get_template("bench.sv.j2").render(digest=digest, **context)
