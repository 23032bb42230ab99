"""The library for cocotb tests: both lanes agree finding by finding, and wrong uses are told."""

from __future__ import annotations

import json
import re
import shutil
from dataclasses import asdict, replace
from pathlib import Path

import pytest
from harness import change, mutated, play
from live import run_live
from mutants import DECODERS, EXAMPLES, MUTANTS

from tbkit.contract import Contract
from tbkit.contract_file import read_contract
from tbkit.regression import builtin_profiles
from tbkit.simulators import Simulator
from tbkit.verify import plan

HERE = Path(__file__).parent
#: Short, and of every kind: reset in motion, illegal transitions, bounce, an index, inputs.
PROFILES = (
    "start-01",
    "transitions",
    "illegal",
    "reset-in-motion",
    "bounce",
    "index-11",
    "sticky-error",
    "zero",
    "preload",
    "disable",
    "arm",
)
RIGHT = (
    "xor_form",
    "status_word",
    "index_latch",
    "loadable",
    "up_down_toggle",
    "no_clock",
    "set_wins",
    "latched_read",
    "one_shot_index",
)
FAULTY = (
    "direction-of-before-the-reversal",
    "toggle-lost-in-one-state",
    "capture-is-transparent",
    "step-beats-load",
    "clear-beats-error",
)


def agree(contract: Contract, simulator: Simulator, tmp_path: Path, out: Path) -> bool:
    """Whether something was found; the same in both lanes."""
    fresh = contract.reset is None
    chosen = [one for one in builtin_profiles() if one.name in PROFILES and not (fresh and one.power_up)]
    planned = plan(contract, chosen, 1)
    bench = {one.name: one.score for one in play(contract, planned, simulator, out).profiles if one.score}
    assert len(bench) >= 3
    scores = tmp_path / "scores.json"
    variables = {"LIVE_DECODER": str(contract.file), "LIVE_PROFILES": ",".join(bench), "LIVE_SCORES": str(scores)}
    code, printed = run_live(simulator, contract, HERE / "live_tests.py", tmp_path / "live", **variables)
    assert code == 0, printed
    live = json.loads(scores.read_text("utf-8"))
    for name, score in bench.items():
        assert live[name] == json.loads(json.dumps(asdict(score))), name
    return any(score.findings for score in bench.values())


@pytest.mark.simulator("icarus")
@pytest.mark.parametrize("stem", RIGHT)
def test_right(stem: str, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    assert not agree(read_contract(DECODERS / f"{stem}.yaml"), simulator, tmp_path, out)


@pytest.mark.simulator("icarus")
@pytest.mark.parametrize("name", FAULTY)
def test_faulty(name: str, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    mutant = next(one for one in MUTANTS if one.name == name)
    assert agree(mutated(mutant, tmp_path / "rtl"), simulator, tmp_path, out)


@pytest.mark.simulator("verilator")
def test_verilator(simulator: Simulator, tmp_path: Path, out: Path) -> None:
    assert not agree(read_contract(DECODERS / "xor_form.yaml"), simulator, tmp_path, out)


@pytest.mark.simulator("ghdl")
@pytest.mark.parametrize("stem", ["xor_form_vhdl", "step_direction_vhdl", "strobed_bytes_vhdl"])
def test_ghdl(stem: str, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    assert not agree(read_contract(DECODERS / f"{stem}.yaml"), simulator, tmp_path, out)


@pytest.mark.simulator("icarus")
def test_example(simulator: Simulator, tmp_path: Path) -> None:
    """The example test of the coil winder's traverse passes, and fails with a fault in the RTL."""
    contract = read_contract(EXAMPLES / "traverse.yaml")
    code, printed = run_live(simulator, contract, EXAMPLES / "traverse_test.py", tmp_path / "right")
    assert code == 0, printed


@pytest.mark.simulator("icarus")
def test_example_finds_a_fault(simulator: Simulator, tmp_path: Path) -> None:
    contract = read_contract(EXAMPLES / "traverse.yaml")
    faulty = tmp_path / "traverse.sv"
    shutil.copy(EXAMPLES / "traverse.sv", faulty)
    change(faulty, "S11: following = S01;", "S11: following = S00;")
    contract = replace(contract, design=replace(contract.design, sources=(faulty,)))
    code, printed = run_live(simulator, contract, EXAMPLES / "traverse_test.py", tmp_path / "wrong")
    assert code == 1
    assert "AssertionError: the decoder is wrong: " in printed, printed
    assert re.search(r"\n *(step-wrong|direction-wrong) at clock \d+: (step|direction) expected 1, found 0; lines AB ", printed)


@pytest.mark.simulator("icarus")
def test_wrong_uses(simulator: Simulator, tmp_path: Path) -> None:
    """Each misuse raises the error that the test module expects, with its whole text."""
    contract = read_contract(DECODERS / "xor_form.yaml")
    code, printed = run_live(simulator, contract, HERE / "live_misuses.py", tmp_path, LIVE_DECODERS=str(DECODERS))
    assert code == 0, printed
