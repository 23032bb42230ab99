"""Right decoders of very different build pass: the tool raises no false alarm.

``TBKIT_SOAK=1`` plays fifty seeds of every decoder on every simulator; else Verilator takes every second one.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from harness import SOAK, decoder_files, play, random_part, told, whole
from mutants import DECODERS, EXAMPLES

from tbkit.contract_file import read_contract
from tbkit.errors import SimulatorError
from tbkit.simulators import Simulator, find
from tbkit.verify import Plan

#: One past the last seed that is played, on Icarus and on Verilator; a third of the decoders play them all each time.
END, END_OF_MOST, END_ON_VERILATOR = (51, 51, 51) if SOAK else (21, 6, 4)
FILES = [*decoder_files("verilog"), *(EXAMPLES / f"{name}.yaml" for name in ("spindle", "traverse", "knob"))]
decoders = pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)


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
    end = END if FILES.index(file) % 3 == 0 else END_OF_MOST
    planned = random_part(contract, range(2, end))
    # Two kinds of glitches and the bounce fit every decoder.
    assert len(planned.stimuli) >= 3 * (end - 2)
    results = play(contract, planned, simulator, out)
    assert results.verdict == "pass", told(results)


@pytest.mark.parametrize("file", FILES if SOAK else FILES[::3], ids=lambda file: file.stem)
@pytest.mark.simulator("verilator")
def test_verilator_agrees(file: Path, simulator: Simulator, out: Path) -> None:
    """Passes with the whole regression and some more seeds, and compares just as much as Icarus does."""
    contract = read_contract(file)
    planned = Plan((*whole(contract).stimuli, *random_part(contract, range(2, END_ON_VERILATOR)).stimuli), ())
    results = play(contract, planned, simulator, out)
    assert results.verdict == "pass", told(results)
    try:
        icarus = find("icarus")[0]
    except SimulatorError:
        return
    other = play(contract, planned, icarus, out)
    assert [(p.name, p.seed, p.score) for p in results.profiles] == [(p.name, p.seed, p.score) for p in other.profiles]


VHDL = decoder_files("vhdl")


@pytest.mark.simulator("ghdl")
@pytest.mark.parametrize("file", VHDL, ids=lambda file: file.stem)
def test_ghdl(file: Path, simulator: Simulator, out: Path) -> None:
    contract = read_contract(file)
    planned = Plan((*whole(contract).stimuli, *random_part(contract, range(2, END_OF_MOST)).stimuli), ())
    results = play(contract, planned, simulator, out)
    assert results.verdict == "pass", told(results)


@pytest.mark.simulator("ghdl")
@pytest.mark.parametrize("stem", ["xor_form", "homing_x1", "step_direction"])
def test_twins_in_two_languages(stem: str, simulator: Simulator, out: Path) -> None:
    """A decoder written twice, once in each language, gives the same scores."""
    scores = []
    for name, on in ((stem, find("icarus")[0]), (f"{stem}_vhdl", simulator)):
        contract = read_contract(DECODERS / f"{name}.yaml")
        results = play(contract, whole(contract), on, out)
        scores.append([(profile.name, profile.edges, profile.score) for profile in results.profiles if profile.score])
    assert len(scores[0]) > 20
    assert scores[0] == scores[1]


def test_every_seed_plays_something_else() -> None:
    contract = read_contract(EXAMPLES / "spindle.yaml")
    names = {stimulus.name for stimulus in random_part(contract, range(1, 2)).stimuli}
    assert {"walk", "bounce", "glitches-passed", "glitches-rejected", "index-noise"} <= names
    assert "transitions" not in names
