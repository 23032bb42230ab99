"""Runs a cocotb test module on a decoder itself, without the rendered bench."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

from tbkit.contract import Contract
from tbkit.simulators import Simulator

RUN = """\
import sys
from pathlib import Path
from cocotb_tools.runner import get_runner
from cocotb_tools.check_results import get_results
name, folder, top, module, parameters, standard, *sources = sys.argv[1:]
runner = get_runner(name)
arguments = {"icarus": ["-g2012"], "verilator": ["-CFLAGS", "-std=c++20 -fcoroutines", "-Wno-fatal", "--timing"],
             "ghdl": [f"--std={standard}"]}[name]
parameters = dict(pair.split("=") for pair in parameters.split()) if parameters else {}
scale = {} if name == "ghdl" else {"timescale": ("1ns", "1ps")}
runner.build(sources=sources, hdl_toplevel=top, build_dir=folder, always=True, build_args=arguments, parameters=parameters, **scale)
more = {"test_args": arguments, "parameters": parameters} if name == "ghdl" else {}
runner.test(test_module=module, hdl_toplevel=top, build_dir=folder, test_dir=folder, results_xml=folder + "/results.xml",
            hdl_toplevel_lang="vhdl" if name == "ghdl" else "verilog", **more)
tests, failed = get_results(Path(folder) / "results.xml")
sys.exit(0 if tests and not failed else 1)
"""


def run_live(simulator: Simulator, contract: Contract, module: Path, folder: Path, **variables: str) -> tuple[int, str]:
    """Build and run; returns the exit code and what was printed. Code 0: tests ran and all passed."""
    folder.mkdir(parents=True, exist_ok=True)
    unwanted = ("COCOTB_", "GPI_", "PYGPI_")
    kept = {name: value for name, value in os.environ.items() if not name.startswith(unwanted) and name != "PYTEST_CURRENT_TEST"}
    path = os.pathsep.join([str(module.parent), *sys.path])
    environment = {**kept, **dict(simulator.environment), "PYTHONPATH": path, "COCOTB_LOG_LEVEL": "WARNING", **variables}
    design = contract.design
    parameters = " ".join(f"{name}={value}" for name, value in design.parameters)
    words = [simulator.name, str(folder), design.top, module.stem, parameters, design.standard, *map(str, design.sources)]
    done = subprocess.run(
        [sys.executable, "-c", RUN, *words], env=environment, capture_output=True, text=True, check=False, timeout=500, cwd=folder
    )
    return done.returncode, done.stdout + done.stderr
