"""What the simulator tests share: a decoder's results, and a copy of a decoder with a fault in it."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import pytest
from mutants import DECODERS, EXAMPLES, Mutant

from tbkit.contract import Contract
from tbkit.contract_file import read_contract
from tbkit.errors import SimulatorError, UnfitError
from tbkit.profile import Profile
from tbkit.regression import builtin_profiles
from tbkit.simulators import Simulator, find
from tbkit.stimulus import compile_stimulus
from tbkit.verify import Plan, ProfileResult, Results, plan, verify

#: Names of simulators that must be here: without them tests fail instead of being skipped.
REQUIRE = "TBKIT_REQUIRE"
#: With ``TBKIT_SOAK=1`` nothing is left out for the time it takes.
SOAK = os.environ.get("TBKIT_SOAK") == "1"
#: A profile with more edges than this is long.
LONG_EDGES = 5000


def need(name: str) -> Simulator:
    """The simulator of this name; without it the test is skipped, or fails where it is required."""
    try:
        return find(name, "vhdl" if name == "ghdl" else "verilog")[0]
    except SimulatorError as error:
        if name in os.environ.get(REQUIRE, "").split(","):
            pytest.fail(f"{REQUIRE} asks for {name}: {error}", pytrace=False)
        pytest.skip(str(error))


def decoder_files(language: str) -> list[Path]:
    """Right decoders under the tests; those in VHDL have that in their names."""
    return sorted(path for path in DECODERS.glob("*.yaml") if path.stem.endswith("_vhdl") == (language == "vhdl"))


def play(contract: Contract, planned: Plan, simulator: Simulator, out: Path) -> Results:
    return verify(contract, planned, simulator, out, lambda *_: None)


def whole(contract: Contract, seed: int = 1) -> Plan:
    """The whole built-in regression."""
    return plan(contract, builtin_profiles(), seed)


def short_part(contract: Contract) -> Plan:
    """The built-in regression without its long profiles: what this finds, the whole finds too."""
    return Plan(tuple(stimulus for stimulus in whole(contract).stimuli if stimulus.edges <= LONG_EDGES), ())


def random_part(contract: Contract, seeds: range) -> Plan:
    """The profiles that another seed changes, once for each seed, found out by compiling them for two seeds.

    Long ones take part with the first two seeds only.
    """
    chosen: list[Profile] = []
    long: list[Profile] = []
    for profile in builtin_profiles():
        try:
            one, other = (compile_stimulus(profile, contract, seed, 1_000_000) for seed in (1, 2))
        except UnfitError:
            continue
        words, others = one.words(), other.words()
        if len(words) != len(others) or (words != others).any():
            (long if one.edges > LONG_EDGES else chosen).append(profile)
    stimuli = [
        stimulus for seed in seeds for stimulus in plan(contract, chosen + long if seed < seeds.start + 2 else chosen, seed).stimuli
    ]
    return Plan(tuple(stimuli), ())


def told(results: Results) -> str:
    """Every finding, for the message of a test that fails."""
    lines = [f"on {results.simulator}: {results.verdict}", str(results.failure or "")]
    for profile in results.profiles:
        lines += [f"{profile.name}, seed {profile.seed}: {finding}" for finding in profile.findings[:3]]
        lines += [f"{profile.name}, seed {profile.seed}: {profile.reason}"] if profile.verdict in ("empty", "not-run") else []
    return "\n".join(lines)


def kinds_found(profiles: tuple[ProfileResult, ...]) -> set[str]:
    return {kind for profile in profiles if profile.score for kind in profile.score.totals}


def copy_decoder(stem: str, folder: Path) -> Path:
    """Copy a decoder's files; returns its decoder file. The example gets eight bits, so that its roll-over takes no time."""
    source = EXAMPLES if stem == "spindle" else DECODERS
    folder.mkdir(parents=True, exist_ok=True)
    for path in source.glob(f"{stem}*"):
        if path.is_dir():
            shutil.copytree(path, folder / path.name)
        else:
            shutil.copy(path, folder)
    decoder = folder / f"{stem}.yaml"
    if stem == "spindle":
        text = decoder.read_text("utf-8")
        assert text.count("WIDTH: 16") == text.count("width: 16") == 1
        decoder.write_text(text.replace("WIDTH: 16", "WIDTH: 8").replace("width: 16", "width: 8"), "utf-8")
    return decoder


def change(path: Path, old: str, new: str) -> None:
    """Replace text that must stand there once."""
    text = path.read_text("utf-8")
    assert text.count(old) == 1, f"{old!r} stands {text.count(old)} times in {path}"
    path.write_text(text.replace(old, new), "utf-8")


def mutated(mutant: Mutant, folder: Path) -> Contract:
    """A copy of the mutant's decoder with the fault in it."""
    decoder = copy_decoder(mutant.stem, folder)
    change(folder / mutant.file, mutant.old, mutant.new)
    return read_contract(decoder)
