"""Runs as a process of its own and calls cocotb's runner: builds a bench, or plays jobs on one.

``python -m tbkit.launch REQUEST.json``. Being apart keeps the runner's habits (environment variables that win over
arguments, SystemExit, a pytest mode) away from the tool, and lets a simulator that hangs be killed with all it started.
"""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import cocotb_tools.config
import find_libpython
from cocotb_tools.runner import get_runner

# Coroutines carry the bench's delays; gcc has them behind a flag of their own.
_CPP_FLAGS = "-std=c++20 -fcoroutines"
# What Python touches; everything else stays open to optimisation.
_PUBLIC = ("go", "done", "job")


def build_icarus(request: dict[str, Any]) -> None:
    get_runner("icarus").build(
        sources=request["sources"],
        hdl_toplevel=request["top"],
        includes=request["include_dirs"],
        build_args=["-g2012"],
        build_dir=request["build_folder"],
        always=True,
        timescale=("1ns", "1ps"),
    )


def build_verilator(request: dict[str, Any]) -> None:
    """Verilate, compile, link. Its run-time library is the same for every bench, so its objects are kept and put back."""
    folder, kept = Path(request["build_folder"]), Path(request["runtime_folder"])
    libraries = cocotb_tools.config.libs_dir
    control = folder / "public.vlt"
    lines = [f'public_flat_rw -module "{request["top"]}" -var "{name}"' for name in _PUBLIC]
    control.write_text("\n".join(["`verilator_config", *lines, ""]), "utf-8")
    root = os.environ.get("VERILATOR_ROOT")
    program = ["perl", str(Path(root) / "bin" / "verilator")] if root else ["verilator"]
    _call(
        [
            *program, "-cc", "--exe", "--vpi", "--timing", "-O3", "-Wno-fatal", "-Wno-ZERODLY", "--quiet-stats",
            "-Mdir", str(folder), "--prefix", "Vtop", "--top-module", request["top"], "-o", request["top"],
            "--timescale", "1ns/1ps",
            "-CFLAGS", _CPP_FLAGS,
            "-LDFLAGS", f"-Wl,-rpath,{libraries} -L{libraries} -lcocotbvpi_verilator",
            *(f"-I{path}" for path in request["include_dirs"]),
            str(cocotb_tools.config.share_dir / "lib" / "verilator" / "verilator.cpp"),
            str(control),
            *request["sources"],
        ]
    )  # fmt: skip
    if kept.is_dir():
        for path in kept.iterdir():
            shutil.copy(path, folder)
    _call(["make", "-s", "-j", str(os.cpu_count() or 1), "-C", str(folder), "-f", "Vtop.mk", "PYTHON3=python3"])
    _keep(folder, kept)
    for path in [*folder.glob("V*"), *folder.glob("verilat*")]:
        path.unlink()  # only the program is needed to run


def _keep(folder: Path, kept: Path) -> None:
    """Put the run-time library's objects aside for the next build."""
    if not kept.is_dir():
        fresh = kept.with_name(f"{kept.name}.{os.getpid()}")
        fresh.mkdir(parents=True)
        for pattern in ("verilat*.o", "verilat*.d"):
            for path in folder.glob(pattern):
                shutil.copy(path, fresh)
        try:
            fresh.rename(kept)
        except OSError:
            shutil.rmtree(fresh)  # another build was first


def build_ghdl(request: dict[str, Any]) -> None:
    _analyse_vhdl(request, Path(request["build_folder"]))
    _call(["ghdl", "-e", f"--std={request['standard']}", f"--workdir={request['build_folder']}", request["top"]])


def _analyse_vhdl(request: dict[str, Any], folder: Path) -> None:
    _call(["ghdl", "-a", f"--std={request['standard']}", f"--workdir={folder}", *request["sources"]])


def _call(command: list[str]) -> None:
    done = subprocess.run(command, check=False)  # noqa: S603  # words made above, no shell
    if done.returncode:
        sys.exit(done.returncode)


def play(request: dict[str, Any]) -> None:
    if find_libpython.find_libpython() is None:
        sys.exit("Python's shared library was not found, and cocotb needs it; on Debian and Ubuntu: apt-get install python3-dev")
    folder = Path(request["job_folder"])
    ghdl = request["simulator"] == "ghdl"
    if ghdl:
        # It compiles in memory as it starts, and looks for the files where they were when it analysed them.
        _analyse_vhdl(request, folder)
    runner = get_runner(request["simulator"])
    runner.hdl_library = "work"
    runner.test(
        test_module="tbkit.insim.player",
        hdl_toplevel=request["top"],
        hdl_toplevel_lang="vhdl" if ghdl else "verilog",
        hdl_toplevel_library="work" if ghdl else "top",
        test_args=[f"--std={request['standard']}", f"--workdir={folder}"] if ghdl else [],
        build_dir=request["build_folder"],
        test_dir=folder,
        results_xml=str(folder / "results.xml"),
        # What numeric_std says of X would fill the log.
        plusargs=["--ieee-asserts=disable"] if ghdl else [f"+tbkit_folder={folder}"],
        extra_env={
            "TBKIT_FOLDER": str(folder),
            "TBKIT_ZEROED": str(int(request["zeroed"])),
            "COCOTB_LOG_LEVEL": "WARNING",
            "COCOTB_REWRITE_ASSERTION_FILES": "",
        },
        seed=1,
    )


def main() -> None:
    request = json.loads(Path(sys.argv[1]).read_text("utf-8"))
    match request["task"], request["simulator"]:
        case "build", "icarus":
            build_icarus(request)
        case "build", "verilator":
            build_verilator(request)
        case "build", "ghdl":
            build_ghdl(request)
        case _:
            play(request)


if __name__ == "__main__":
    main()
