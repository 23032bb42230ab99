"""Right decoders of very different build pass: the tool raises no false alarm."""

from __future__ import annotations

from pathlib import Path

import pytest
from harness import decoder_files, play, random_part, told, whole
from mutants import EXAMPLES

from tbkit.contract_file import read_contract
from tbkit.errors import SimulatorError
from tbkit.simulators import Simulator, find
from tbkit.verify import Plan

#: Right decoders that are called wrong, with the reason; to be emptied by making the tool better, not the list longer.
FALSE_ALARMS = {
    "dead_time": "two pulses the filter may pass, on A and B at once, can move the position by four",
    "majority": "pulses of one clock with one clock between them pass a majority vote, also with `bursts: open`",
    "ticked_filter": "a filter sampled by a tick does not see what happens between the ticks, also with `bursts: open`",
    "slow_reset": "the profiles reset for 6 clocks where the decoder file says that it takes 20",
}


def _named(path: Path) -> object:
    reason = FALSE_ALARMS.get(path.stem)
    marks = [pytest.mark.xfail(reason=reason)] if reason else []
    return pytest.param(path, id=path.stem, marks=marks)


decoders = pytest.mark.parametrize("file", [_named(path) for path in decoder_files()])


@decoders
@pytest.mark.simulator("icarus")
def test_icarus(file: Path, simulator: Simulator, out: Path) -> None:
    contract = read_contract(file)
    results = play(contract, whole(contract), simulator, out)
    assert results.verdict == "pass", told(results)


@decoders
@pytest.mark.simulator("icarus")
def test_more_seeds(file: Path, simulator: Simulator, out: Path) -> None:
    contract = read_contract(file)
    planned = random_part(contract, range(2, 21))
    # A walk and two kinds of glitches fit every decoder.
    assert len(planned.stimuli) >= 3 * 19
    results = play(contract, planned, simulator, out)
    assert results.verdict == "pass", told(results)


@decoders
@pytest.mark.simulator("verilator")
def test_verilator_agrees(file: Path, simulator: Simulator, out: Path) -> None:
    """Passes with the whole regression and some more seeds, and compares just as much as Icarus does."""
    contract = read_contract(file)
    planned = Plan((*whole(contract).stimuli, *random_part(contract, range(2, 5)).stimuli), ())
    results = play(contract, planned, simulator, out)
    assert results.verdict == "pass", told(results)
    try:
        icarus = find("icarus")[0]
    except SimulatorError:
        return
    other = play(contract, planned, icarus, out)
    assert [(p.name, p.seed, p.score) for p in results.profiles] == [(p.name, p.seed, p.score) for p in other.profiles]


@pytest.mark.simulator("icarus")
def test_example(simulator: Simulator, out: Path) -> None:
    contract = read_contract(EXAMPLES / "spindle.yaml")
    results = play(contract, whole(contract), simulator, out)
    assert results.verdict == "pass", told(results)


def test_every_seed_plays_something_else() -> None:
    contract = read_contract(EXAMPLES / "spindle.yaml")
    names = {stimulus.name for stimulus in random_part(contract, range(1, 2)).stimuli}
    assert {"walk", "bounce", "glitches-passed", "glitches-rejected", "index-noise"} <= names
    assert "transitions" not in names
