"""Renders the SystemVerilog bench from a contract.

Templates only branch and repeat: every name that reaches HDL has been checked as an identifier when the decoder file was
read, and every value is turned into a sized literal here.
"""

from __future__ import annotations

import hashlib
import re
import traceback
from collections.abc import Mapping
from dataclasses import dataclass
from importlib import resources
from pathlib import Path

import jinja2

from tbkit import __version__
from tbkit.contract import BENCH, DEEDS, Contract, Output, Port, Slice
from tbkit.encoder import LINES
from tbkit.errors import InputError, Problem
from tbkit.stimulus import SIGNALS, UNKNOWN
from tbkit.trace import record_words
from tbkit.yamltree import KEYWORDS

#: Stands behind each line of a template while it is rendered, and tells where that line is from.
_MARK = re.compile("\x00([^\x00]*)\x00")
_WORD = re.compile(r"[A-Za-z_][A-Za-z0-9_$]*")


@dataclass(frozen=True, slots=True)
class Rendered:
    """A text, and for each of its lines the template and the line there that it comes from, such as ``bench.sv.j2:12``."""

    text: str
    origins: tuple[str, ...]

    def origin(self, line: int) -> str:
        """Where a line (the first is 1) comes from; empty if it is not known."""
        return self.origins[line - 1] if 0 < line <= len(self.origins) else ""


def sv_name(name: str) -> str:
    """A name as an identifier of SystemVerilog; a keyword is escaped.

    Raises:
        ValueError: it is no name.
    """
    if not _WORD.fullmatch(name):
        msg = f"{name!r} is no name in SystemVerilog"
        raise ValueError(msg)
    return f"\\{name} " if name in KEYWORDS else name


def _marked(name: str, source: str) -> str:
    """A template whose lines tell where they are from; a line that ends with a tag leaves no line of its own."""
    lines = source.splitlines()
    return "\n".join(
        line if line.rstrip().endswith(("%}", "#}")) else f"{line}\x00{name}:{number}\x00" for number, line in enumerate(lines, 1)
    ) + ("\n" if source.endswith("\n") else "")


def rendered(name: str, context: Mapping[str, object], overrides: Path | None = None) -> Rendered:
    """A template filled in; what it is not given is an error. Templates in the folder ``overrides`` win over those of tbkit.

    Raises:
        InputError: a template of the user's is wrong, with its line.
    """

    def load(wanted: str) -> tuple[str, str, None]:
        own = overrides / wanted if overrides else None
        place = own if own is not None and own.is_file() else resources.files("tbkit.templates").joinpath(wanted)
        return _marked(wanted, place.read_text("utf-8")), str(place), None

    environment = jinja2.Environment(
        loader=jinja2.FunctionLoader(load),
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        autoescape=False,  # noqa: S701  # HDL is rendered, not HTML
    )
    environment.filters["sv_name"] = sv_name
    try:
        text = environment.get_template(name).render(**context)
    except jinja2.TemplateSyntaxError as error:
        raise InputError([Problem(str(error.filename), error.lineno, f"the template cannot be read: {error.message}")]) from error
    except (jinja2.UndefinedError, ValueError, TypeError) as error:
        frames = [frame for frame in traceback.extract_tb(error.__traceback__) if frame.filename.endswith(".j2")]
        if not frames:
            raise
        place = frames[-1]
        raise InputError([Problem(place.filename, place.lineno or 0, f"the template cannot be filled in: {error}")]) from error
    lines, origins = [], []
    for line in text.split("\n"):
        marks = _MARK.findall(line)
        origins.append(marks[-1] if marks else "")
        lines.append(_MARK.sub("", line))
    return Rendered("\n".join(lines), tuple(origins))


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


def render_bench(contract: Contract, checks: Mapping[str, object] | None = None, overrides: Path | None = None) -> Rendered:
    """The bench; the same contract gives the same bytes.

    ``checks``: what a bench that checks by itself is told (:mod:`tbkit.standalone`); None: one that tbkit plays on.
    """
    context = {**_context(contract), "checks": checks}
    return rendered("bench.sv.j2", {"digest": digest_of(context), **context}, overrides)
