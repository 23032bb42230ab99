"""The rendered VHDL bench beside the live lane on GHDL: same decoder, same edges, same scores, in one run.

``make bench``, which lets it find the simulator tests' modules. Why tbkit renders a bench for VHDL too: the live lane drives
edge by edge from Python. Building is not timed for the bench, and is for the live lane, where it takes a second.
"""

from __future__ import annotations

import json
import tempfile
import time
from dataclasses import asdict
from pathlib import Path

from bench import EDGES, PROFILE
from live import run_live
from mutants import DECODERS

from tbkit import bench
from tbkit.contract_file import read_contract
from tbkit.errors import SimulatorError
from tbkit.profile_file import read_profile
from tbkit.simulators import find
from tbkit.verify import plan, verify

HERE = Path(__file__).parent
CLOCKS_PER_EDGE = (6, 16, 100)


def main() -> None:
    contract = read_contract(DECODERS / "xor_form_vhdl.yaml")
    try:
        simulator = find("ghdl", "vhdl")[0]
    except SimulatorError as error:
        print(f"ghdl: left out, {error}")
        return
    print(f"{'simulator':32} {'clocks/edge':>11} {'edges':>8} {'bench edges/s':>14} {'live edges/s':>14} {'ratio':>7}")
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        bench.build(contract, simulator, folder)
        for clocks in CLOCKS_PER_EDGE:
            path = folder / "bench-0.yaml"
            path.write_text(PROFILE.format(part=0, times=EDGES // 1000, speed=1 / clocks), "utf-8")
            begin = time.perf_counter()
            results = verify(contract, plan(contract, [read_profile(path)], 1), simulator, folder, lambda *_: None)
            ours = time.perf_counter() - begin
            (played,) = results.profiles
            assert results.verdict == "pass", results
            assert played.score is not None
            scores = folder / "scores.json"
            variables = {"LIVE_DECODER": str(contract.file), "LIVE_FILE": str(path), "LIVE_SCORES": str(scores)}
            begin = time.perf_counter()
            code, printed = run_live(simulator, contract, HERE.parent / "simulator" / "live_tests.py", folder / "live", **variables)
            live = time.perf_counter() - begin
            assert code == 0, printed
            assert json.loads(scores.read_text("utf-8")) == {"bench-0": json.loads(json.dumps(asdict(played.score)))}
            edges = played.edges
            print(
                f"{simulator!s:32} {clocks:>11} {edges:>8} {edges / ours:>14,.0f} {edges / live:>14,.0f} {live / ours:>6.1f}x",
                flush=True,
            )


if __name__ == "__main__":
    main()
