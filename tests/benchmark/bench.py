"""Verified edges per second: tbkit's whole path beside a plain cocotb bench, same decoder, same edges, in one run.

``make bench``. The plain bench looks at every output on every clock. Builds are made beforehand and not timed; stimulus,
simulation, start of the simulator and scoreboard are.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from tbkit import bench
from tbkit.contract_file import read_contract
from tbkit.errors import SimulatorError
from tbkit.lineoracle import sample
from tbkit.profile_file import read_profile
from tbkit.simulators import Simulator, find
from tbkit.verify import plan, verify

HERE = Path(__file__).parent
CLOCKS_PER_EDGE = (6, 16, 100)
EDGES = 24_000

PROFILE = """\
profile: bench-{part}
motion:
  - repeat:
      times: {times}
      do:
        - move: {{by: 500 states, speed: {speed} states/clocks}}
        - move: {{by: -500 states, speed: {speed} states/clocks}}
"""

PLAIN = """\
import sys
from pathlib import Path
from cocotb_tools.runner import get_runner
name, folder, source, job, build = sys.argv[1:]
runner = get_runner(name)
if build == "build":
    extra = ["-g2012"] if name == "icarus" else ["-CFLAGS", "-std=c++20 -fcoroutines", "-Wno-fatal", "-O3"]
    runner.build(sources=[source], hdl_toplevel="spindle", build_dir=folder, always=True, build_args=extra,
                 timescale=("1ns", "1ps"))
else:
    runner.test(test_module="plain_bench", hdl_toplevel="spindle", hdl_toplevel_lang="verilog", build_dir=folder,
                test_dir=folder, results_xml=folder + "/results.xml", extra_env={"PLAIN_JOB": job})
    from cocotb_tools.check_results import get_results
    assert get_results(Path(folder) / "results.xml") == (1, 0)
"""


def _plain(simulator: Simulator, folder: Path, levels: np.ndarray, period_ps: int) -> float:
    """Seconds for the plain bench."""
    job = folder / "job.json"
    job.write_text(json.dumps({"period_ps": period_ps, "levels": levels.tolist()}), "utf-8")
    environment = {**os.environ, **dict(simulator.environment), "PYTHONPATH": str(HERE), "COCOTB_LOG_LEVEL": "WARNING"}
    arguments = [simulator.name, str(folder / "sim"), str(HERE.parents[1] / "example_dut" / "spindle.v"), str(job)]
    seconds = 0.0
    for task in ("build", "test"):
        begin = time.perf_counter()
        done = subprocess.run(
            [sys.executable, "-c", PLAIN, *arguments, task], env=environment, capture_output=True, text=True, check=False
        )
        seconds = time.perf_counter() - begin
        if done.returncode:
            sys.exit(f"the plain bench failed:\n{done.stdout[-2000:]}{done.stderr[-2000:]}")
    return seconds


def main() -> None:
    contract = read_contract(HERE.parents[1] / "example_dut" / "spindle.yaml")
    print(f"{'simulator':32} {'clocks/edge':>11} {'edges':>8} {'tbkit edges/s':>14} {'plain edges/s':>14} {'ratio':>7}")
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        for choice in ("icarus", "verilator"):
            try:
                simulator = find(choice)[0]
            except SimulatorError as error:
                print(f"{choice}: left out, {error}")
                continue
            bench.build(contract, simulator, folder)
            for clocks in CLOCKS_PER_EDGE:
                _compare(contract, simulator, folder, clocks)


def _compare(contract, simulator, folder, clocks) -> None:  # see main
    parts = []
    for part in range(4):
        path = folder / f"bench-{part}.yaml"
        path.write_text(PROFILE.format(part=part, times=EDGES // 4000, speed=1 / clocks), "utf-8")
        parts.append(read_profile(path))
    begin = time.perf_counter()
    planned = plan(contract, parts, seed=1)
    results = verify(contract, planned, simulator, folder, lambda *_: None)
    ours = time.perf_counter() - begin
    assert results.verdict == "pass", results
    edges = sum(profile.edges for profile in results.profiles)
    # The same motion for the plain bench: the levels of every clock from the begin of the motion on, part after part.
    levels = []
    for stimulus in planned.stimuli:
        span = np.arange(stimulus.begin_ps // stimulus.period_ps, stimulus.periods)
        a, b = (sample(stimulus.lines[line], stimulus.period_ps).level(span) for line in ("a", "b"))
        levels.append(2 * a + b)
    place = folder / f"plain-{simulator.name}-{clocks}"
    place.mkdir()
    plain = _plain(simulator, place, np.concatenate(levels), contract.clock.period_ps)
    print(
        f"{simulator!s:32} {clocks:>11} {edges:>8} {edges / ours:>14,.0f} {edges / plain:>14,.0f} {plain / ours:>6.1f}x",
        flush=True,
    )


if __name__ == "__main__":
    main()
