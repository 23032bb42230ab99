"""Faults of one change are found by the built-in regression, which is not told what to look for."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

import pytest
from harness import SOAK, kinds_found, mutated, play, short_part, told, whole
from mutants import MUTANTS, TWINS, UNSEEN, Mutant

from tbkit.findings import KINDS
from tbkit.simulators import Simulator, find

#: With ``TBKIT_SOAK=1`` all of these, else every third.
ON_VERILATOR = [mutant for mutant in MUTANTS if mutant.verilator]


def _check(mutant: Mutant, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    contract = mutated(mutant, tmp_path)
    results = play(contract, short_part(contract), simulator, out)
    assert results.failure is None, told(results)
    assert results.verdict == "fail"
    assert kinds_found(results.profiles) & set(mutant.kinds), told(results)


@pytest.mark.simulator("icarus")
@pytest.mark.parametrize("mutant", [mutant for mutant in MUTANTS if not mutant.vhdl], ids=lambda mutant: mutant.name)
def test_icarus(mutant: Mutant, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    _check(mutant, simulator, tmp_path, out)


@pytest.mark.simulator("verilator")
@pytest.mark.parametrize("mutant", ON_VERILATOR if SOAK else ON_VERILATOR[::3], ids=lambda mutant: mutant.name)
def test_verilator(mutant: Mutant, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    _check(mutant, simulator, tmp_path, out)


@pytest.mark.simulator("ghdl")
@pytest.mark.parametrize("mutant", [mutant for mutant in MUTANTS if mutant.vhdl], ids=lambda mutant: mutant.name)
def test_ghdl(mutant: Mutant, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    _check(mutant, simulator, tmp_path, out)


@pytest.mark.simulator("ghdl")
@pytest.mark.parametrize(("verilog", "vhdl"), TWINS)
def test_same_findings_in_two_languages(verilog: str, vhdl: str, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    """The same fault in the same decoder gives the same findings, whatever the language."""
    by_name = {mutant.name: mutant for mutant in MUTANTS}
    scores = []
    for name, on in ((verilog, find("icarus")[0]), (verilog, find("verilator")[0]), (vhdl, simulator)):
        contract = mutated(by_name[name], tmp_path / name / on.name)
        results = play(contract, short_part(contract), on, out)
        scores.append([(profile.name, profile.score) for profile in results.profiles])
    assert scores[0] == scores[1] == scores[2]
    assert any(score is not None and score.findings for _, score in scores[0])


@pytest.mark.xfail(reason="no built-in profile looks there", strict=True)
@pytest.mark.simulator("icarus")
@pytest.mark.parametrize("mutant", UNSEEN, ids=lambda mutant: mutant.name)
def test_not_yet_found(mutant: Mutant, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    contract = mutated(mutant, tmp_path)
    results = play(contract, whole(contract), simulator, out)
    if results.failure is not None or results.verdict not in ("pass", "fail"):
        # Not a fault that was overlooked but one that never ran.
        pytest.exit(told(results))
    assert results.verdict == "fail"


def test_table_is_sound() -> None:
    names = Counter(mutant.name for mutant in (*MUTANTS, *UNSEEN))
    assert max(names.values()) == 1
    assert all(mutant.kinds and set(mutant.kinds) <= KINDS.keys() for mutant in (*MUTANTS, *UNSEEN))
    # Few of them lean on what one simulator alone can see.
    assert not any(mutant.verilator and mutant.four_state for mutant in MUTANTS)
    assert all(kind in {k for m in MUTANTS for k in m.kinds} for kind in KINDS)
