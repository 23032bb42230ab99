"""A folder that runs in any simulator without Python: a bench that checks itself, stimulus and expectation of every profile.

Pure: it makes texts by file names; the command line writes them.
"""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path

import numpy as np

from tbkit import __version__
from tbkit.contract import BENCH, Contract, Output
from tbkit.errors import UnfitError
from tbkit.lineoracle import expect
from tbkit.profile import Profile
from tbkit.render import Rendered, render_bench, rendered
from tbkit.render_vhdl import render_vhdl
from tbkit.rows import OPS, STREAMS, Row, direction_offset, rows
from tbkit.shaftoracle import rests
from tbkit.stimulus import SIGNALS, Stimulus
from tbkit.vhdlports import read_ports

#: The bench keeps what outputs were for so many clocks.
MEMORY = 60
#: Counts are held in so many bits: two more than the widest, so that a step beyond an end is one.
BITS_67 = (1 << 67) - 1
PS_PER_US = 10**6
VECTORS = "vectors"
#: Before the names of the files that lead lines of a bench back to its templates.
ORIGINS = "template-lines-of-"
MANIFEST = "manifest.json"


def digest(path: Path) -> str:
    """Of a file's bytes."""
    return hashlib.blake2b(path.read_bytes(), digest_size=8).hexdigest()


def render_folder(
    contract: Contract, profiles: Sequence[Profile], stimuli: Sequence[Stimulus], home: Path, overrides: Path | None = None
) -> dict[str, str]:
    """Every file of the folder ``home``, by its name; the same input gives the same texts.

    ``stimuli`` are those of the ``profiles`` that fit; ``overrides`` is a folder with templates of the user's own.

    Raises:
        InputError: a template of the user's is wrong.
        UnfitError: latencies are too long for the bench's memory.
    """
    _check_memory(contract)
    files: dict[str, str] = {}
    made = {profile.name: profile for profile in profiles}
    most = 0
    for stimulus in stimuli:
        expected = _rows(contract, stimulus)
        most = max(most, len(expected))
        profile = made[stimulus.name]
        head = f"{_head(contract)}, profile {stimulus.name} {digest(profile.file)}, seed {stimulus.seed}"
        name = f"{VECTORS}/{stimulus.name}.{stimulus.seed}"
        files[f"{name}.stimulus"] = _stimulus(head, stimulus)
        files[f"{name}.expected"] = "\n".join([f"{head}: stream op from to value step flags", *(row.text for row in expected), ""])
    files |= _benches(contract, lambda fatal: _checks(contract, stimuli, most, fatal=fatal), home, overrides)
    told = {
        "version": __version__,
        "file": contract.file.name,
        "digest": digest(contract.file),
        "bench": BENCH,
        "top": contract.design.top,
        "vhdl": contract.design.language == "vhdl",
        "standard": contract.design.standard,
        "zeroed": contract.start.zeroed,
        "seeds": sorted({stimulus.seed for stimulus in stimuli}),
    }
    files["README.txt"] = rendered("readme.txt.j2", told, overrides).text
    return files


def _benches(contract: Contract, checks: Callable[[bool], dict[str, object]], home: Path, overrides: Path | None) -> dict[str, str]:
    """The bench in each form, with its list of files; ``checks`` is told whether the form knows ``$fatal``.

    Raises:
        SimulatorError: GHDL, which reads the ports of VHDL, does not understand the sources.
        InputError: ports of the decoder file do not fit them.
    """
    sources = [relative(path, home) for path in contract.design.sources]
    if contract.design.language == "vhdl":
        bench = render_vhdl(contract, read_ports(contract.design), checks(True), overrides)
        listed = "\n".join([*sources, f"{BENCH}.vhd", ""])
        return {f"{BENCH}.vhd": bench.text, f"{ORIGINS}{BENCH}.vhd.txt": _origins(contract, bench), "files.f": listed}
    folders = [f"+incdir+{relative(path, home)}" for path in contract.design.include_dirs]
    found: dict[str, str] = {}
    for suffix, listed, fatal in ((".sv", "files.f", True), (".v", "files_2005.f", False)):
        bench = render_bench(contract, checks(fatal), overrides)
        found[f"{BENCH}{suffix}"] = bench.text
        found[f"{ORIGINS}{BENCH}{suffix}.txt"] = _origins(contract, bench)
        # The bench first: it tells the time scale, which a decoder without one takes on.
        found[listed] = "\n".join([f"// {_head(contract)}", *folders, f"{BENCH}{suffix}", *sources, ""])
    return found


def _origins(contract: Contract, bench: Rendered) -> str:
    """Which line of which template each line comes from."""
    lines = [f"{number} {origin}" for number, origin in enumerate(bench.origins, 1) if origin]
    return "\n".join([f"{_head(contract)}: line of the bench, line of the template", *lines, ""])


def _head(contract: Contract) -> str:
    """What every file begins with."""
    return f"tbkit {__version__}, decoder file {contract.file.name} {digest(contract.file)}"


def manifest(files: Mapping[str, str], request: Mapping[str, object]) -> str:
    """What was rendered from what: ``request`` is enough to render it again."""
    digests = {name: hashlib.blake2b(text.encode(), digest_size=8).hexdigest() for name, text in sorted(files.items())}
    return json.dumps({"tbkit": __version__, "request": request, "files": digests}, indent=1) + "\n"


def relative(path: Path, home: Path) -> str:
    """A path as it is written in the folder ``home``."""
    return Path(os.path.relpath(path, home.resolve())).as_posix()


def _check_memory(contract: Contract) -> None:
    latency = contract.latency
    if contract.index and contract.index.action == "latch":
        spans = [latency.index.max, latency.count.max]
    else:
        offset = direction_offset(contract)
        spans = [abs(offset)] if offset is not None else [latency.direction.max - latency.direction.min]
    if contract.direction or contract.index:
        longest = max(spans)
        if longest > MEMORY:
            msg = f"outputs that belong together are {longest} clocks apart; the rendered bench keeps {MEMORY}"
            raise UnfitError(msg)


def _rows(contract: Contract, stimulus: Stimulus) -> list[Row]:
    expectation = expect(contract, stimulus)
    events = expectation.events
    doubtful = (events.period[events.illegal | events.open] * stimulus.period_ps).astype(np.int64)
    return rows(contract, expectation, rests(contract, stimulus, doubtful))


def _stimulus(head: str, stimulus: Stimulus) -> str:
    words = stimulus.words()
    waits, levels = (words >> np.uint64(16)).tolist(), (words & np.uint64(0xFFFF)).tolist()
    lines = [f"{wait // PS_PER_US} {wait % PS_PER_US} {level:04x}" for wait, level in zip(waits, levels, strict=True)]
    return "\n".join([f"{head}: wait in us and ps, levels of {' '.join(SIGNALS)} from bit 0", *lines, ""])


def _pulse(output: Output, kind: str, *, holds: bool = False) -> dict[str, object]:
    return {
        "name": output.name,
        "range": f"[{output.width - 1}:0] " if output.width > 1 else "",
        "kind": kind,
        "up": "1'b0" if output.active_low else "1'b1",
        "down": "1'b1" if output.active_low else "1'b0",
        "width": output.width,
        "up_level": int(not output.active_low),
        "down_level": int(output.active_low),
        "has_free": output.name in ("step", "up", "down"),
        "holds": holds,
        "most": (1 << output.width) - 1,
    }


def _level(output: Output) -> dict[str, object]:
    return {
        "name": output.name,
        "value": f"{'~' if output.active_low else ''}out_{output.name}",
        "vhdl": f"{'not ' if output.active_low else ''}out_{output.name}(0)",
    }


def _checks(contract: Contract, stimuli: Sequence[Stimulus], most: int, *, fatal: bool) -> dict[str, object]:
    count, direction, error, index = contract.count, contract.direction, contract.error, contract.index
    pulses = [_pulse(output, contract.step.kind) for output in contract.step.outputs] if contract.step else []
    if error and not error.sticky:
        pulses.append(_pulse(error.output, error.kind, holds=error.holds))
    if index and index.action == "pulse" and index.output:
        pulses.append(_pulse(index.output, "pulse"))
    levels = [_level(direction.output)] if direction and not direction.with_count else []
    levels += [_level(error.output)] if error and error.sticky else []
    offset = direction_offset(contract)
    captures = index is not None and index.action == "latch"
    looks = ["direction"] if direction and direction.with_count else []
    looks += [str(pulse["name"]) for pulse in pulses] + (["count"] if count else []) + (["index"] if captures else [])
    # Without a reset, a profile that begins at power-up is the only one of its run.
    return {
        "rows": most + 1,
        "streams": STREAMS,
        "ops": list(OPS.items()),
        "direction_offset": offset,
        "direction_apart": bool(direction and direction.with_count and offset is None),
        "forward": direction.forward_level if direction else 1,
        "pulses": pulses,
        "levels": levels,
        "looks": looks,
        "captures": captures,
        "count": None
        if count is None
        else {
            "width": count.width,
            "signed": count.signed,
            "lowest_bits": f"{count.lowest & BITS_67:067b}",
            "highest_bits": f"{count.highest & BITS_67:067b}",
            "lowest": _signed_literal(count.lowest),
            "highest": _signed_literal(count.highest),
            "overflow": count.overflow,
            "extend": f"{{{67 - count.width}{{bits[{count.width - 1}]}}}}" if count.signed else f"{67 - count.width}'d0",
        },
        "period": contract.clock.period_ps,
        "profiles": [
            {"name": one.name, "number": n, "seed": one.seed, "alone": one.power_up and contract.reset is None}
            for n, one in enumerate(stimuli, 1)
        ],
        "fatal": fatal,
        # Names of files and the like: a type of its own came with SystemVerilog.
        "text": "string" if fatal else "reg [8*1024-1:0]",
    }


def _signed_literal(value: int) -> str:
    return f"-67'sd{-value}" if value < 0 else f"67'sd{value}"
