"""The rendered folder, run without Python: right decoders pass, faulty ones fail where ``tbkit verify`` says they do."""

from __future__ import annotations

import json
import os
import re
import subprocess
from pathlib import Path

import numpy as np
import pyslang
import pytest
from harness import SOAK, decoder_files, mutated, play, short_part, told
from mutants import EXAMPLES, MUTANTS, Mutant
from pyslang.ast import Compilation
from pyslang.parsing import PreprocessorOptions
from pyslang.syntax import SyntaxTree
from vcd.reader import TokenKind, tokenize

from tbkit.cli import main
from tbkit.contract import BENCH, Contract
from tbkit.contract_file import read_contract
from tbkit.regression import builtin_profiles
from tbkit.simulators import Simulator
from tbkit.standalone import render_folder
from tbkit.stimulus import SIGNALS
from tbkit.verify import Plan, Results, plan

#: The simulator's own words on what X at power-up means are no business of the bench.
NEEDS_ZEROS = "zero_at_power_up"
RIGHT = [
    *(EXAMPLES / f"{name}.yaml" for name in ("spindle", "traverse", "knob")),
    *(file for file in decoder_files("verilog") if file.stem != NEEDS_ZEROS),
]
#: Each time the examples, and some of the others; all with ``TBKIT_SOAK=1``.
CHOSEN = RIGHT if SOAK else [*RIGHT[:3], *RIGHT[3::12]]
FAULTY = [mutant for mutant in MUTANTS if not mutant.vhdl and mutant.stem != NEEDS_ZEROS]
CHOSEN_FAULTY = FAULTY if SOAK else FAULTY[::16]
VHDL, FAULTY_VHDL = decoder_files("vhdl"), [mutant for mutant in MUTANTS if mutant.vhdl]
#: A tick that is not asked for makes it remember the profile before, and which one that is differs.
REMEMBERS = {"moves-between-ticks"}

_LINE = re.compile(
    r"^(pass|fail)  (\S+): (?:\d+ of (\d+) checks, first at clock (\d+)|(\d+) checks|nothing was compared)$", re.MULTILINE
)


def brief(contract: Contract) -> Plan:
    """One short profile."""
    return plan(contract, [profile for profile in builtin_profiles() if profile.name == "transitions"], 1)


def written(contract: Contract, planned: Plan, folder: Path) -> Path:
    for name, text in render_folder(contract, builtin_profiles(), planned.stimuli, folder).items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, "utf-8")
    return folder


def run(command: list[str], folder: Path, simulator: Simulator, limit: float = 500) -> subprocess.CompletedProcess[str]:
    """With as little of an environment as there can be: no Python in it."""
    paths = dict(simulator.environment).get("PATH", os.environ["PATH"])
    environment = {**dict(simulator.environment), "PATH": paths, "HOME": str(folder)}
    return subprocess.run(command, cwd=folder, env=environment, capture_output=True, text=True, check=False, timeout=limit)


def compiled(folder: Path, simulator: Simulator, *, form: str = "2012") -> None:
    listed = "files.f" if form == "2012" else "files_2005.f"
    done = run(["iverilog", f"-g{form}", "-s", BENCH, "-c", listed, "-o", "bench"], folder, simulator)
    assert (done.returncode, done.stdout) == (0, "")
    # What Icarus cannot do with a decoder's own text it says of every use of it.
    assert [line for line in done.stderr.splitlines() if ": sorry: " not in line] == []
    # Of the bench itself not even the pickiest of its warnings.
    picky = run(["iverilog", f"-g{form}", "-Wall", "-s", BENCH, "-c", listed, "-o", "picky"], folder, simulator)
    assert [line for line in picky.stderr.splitlines() if line.startswith(BENCH) and "warning" in line] == []


def first_clocks(results: Results) -> dict[str, int | None]:
    """The same of ``tbkit verify``."""
    return {
        one.name: min((finding.clock for finding in one.findings), default=None)
        for one in results.profiles
        if one.score is not None
    }


def outcome(printed: str) -> dict[str, int | None]:
    """For each profile the first clock at which something was wrong; None if nothing was."""
    return {m[2]: None if m[1] == "pass" else int(m[4]) if m[4] else -1 for m in _LINE.finditer(printed)}


def played(contract: Contract, folder: Path, simulator: Simulator, names: list[str]) -> tuple[int, str]:
    """All profiles; those that begin at power-up, without a reset, one by one."""
    done = run(["vvp", "-n", "bench", "+tbkit_folder=vectors"], folder, simulator)
    printed, code = done.stdout, done.returncode
    if contract.reset is None:
        for name in [name for name in names if name not in outcome(printed)]:
            done = run(["vvp", "-n", "bench", "+tbkit_folder=vectors", f"+profile={name}"], folder, simulator)
            printed, code = printed + done.stdout, code or done.returncode
    return code, printed


@pytest.mark.simulator("icarus")
@pytest.mark.parametrize("file", CHOSEN, ids=lambda file: file.stem)
def test_right_decoders_pass(file: Path, simulator: Simulator, tmp_path: Path) -> None:
    contract = read_contract(file)
    planned = short_part(contract)
    folder = written(contract, planned, tmp_path)
    names = [stimulus.name for stimulus in planned.stimuli]
    for form in (
        ("2005", "2012") if contract.design.sources[0].suffix == ".v" and contract.design.language == "verilog" else ("2012",)
    ):
        compiled(folder, simulator, form=form)
        code, printed = played(contract, folder, simulator, names)
        assert outcome(printed) == dict.fromkeys(names), printed
        assert code == 0
        assert re.search(r"^PASS \d+ profiles, \d+ checks$", printed, re.MULTILINE)


@pytest.mark.simulator("icarus")
@pytest.mark.parametrize("mutant", CHOSEN_FAULTY, ids=lambda mutant: mutant.name)
def test_faulty_decoders_fail_at_the_same_clock(mutant: Mutant, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    contract = mutated(mutant, tmp_path / "rtl")
    planned = short_part(contract)
    results = play(contract, planned, simulator, out)
    expected = {
        one.name: min((finding.clock for finding in one.findings), default=None)
        for one in results.profiles
        if one.score is not None
    }
    folder = written(contract, planned, tmp_path / "folder")
    compiled(folder, simulator)
    code, printed = played(contract, folder, simulator, list(expected))
    found = outcome(printed)
    if mutant.name in REMEMBERS:
        found, expected = ({name: clock is None for name, clock in one.items()} for one in (found, expected))
    assert found == expected, told(results)
    assert code == 1
    assert re.search(r"^FAIL \d+ of \d+ profiles, \d+ checks$", printed, re.MULTILINE)


def analysed(contract: Contract, folder: Path, simulator: Simulator) -> None:
    standard = f"--std={contract.design.standard}"
    sources = (folder / "files.f").read_text("utf-8").split()
    for words in (["-a", standard, *sources], ["-e", standard, BENCH]):
        done = run(["ghdl", *words], folder, simulator)
        assert (done.returncode, done.stdout, done.stderr) == (0, "", "")


def run_ghdl(contract: Contract, folder: Path, simulator: Simulator, names: list[str]) -> tuple[int, str]:
    words = ["ghdl", "-r", f"--std={contract.design.standard}", BENCH]
    done = run(words, folder, simulator)
    printed, code = done.stdout, done.returncode
    if contract.reset is None:
        for name in [name for name in names if name not in outcome(printed)]:
            done = run([*words, f"-gPROFILE={name}"], folder, simulator)
            printed, code = printed + done.stdout, code or done.returncode
    return code, printed


@pytest.mark.simulator("ghdl")
@pytest.mark.parametrize("file", VHDL if SOAK else VHDL[::2], ids=lambda file: file.stem)
def test_right_vhdl_decoders_pass(file: Path, simulator: Simulator, tmp_path: Path) -> None:
    contract = read_contract(file)
    planned = short_part(contract)
    folder = written(contract, planned, tmp_path)
    names = [stimulus.name for stimulus in planned.stimuli]
    analysed(contract, folder, simulator)
    code, printed = run_ghdl(contract, folder, simulator, names)
    assert outcome(printed) == dict.fromkeys(names), printed
    assert code == 0
    assert re.search(r"^PASS \d+ profiles, \d+ checks$", printed, re.MULTILINE)


@pytest.mark.simulator("ghdl")
@pytest.mark.parametrize("mutant", FAULTY_VHDL if SOAK else FAULTY_VHDL[::3], ids=lambda mutant: mutant.name)
def test_faulty_vhdl_decoders_fail_at_the_same_clock(mutant: Mutant, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    contract = mutated(mutant, tmp_path / "rtl")
    planned = short_part(contract)
    results = play(contract, planned, simulator, out)
    expected = first_clocks(results)
    folder = written(contract, planned, tmp_path / "folder")
    analysed(contract, folder, simulator)
    code, printed = run_ghdl(contract, folder, simulator, list(expected))
    assert outcome(printed) == expected, told(results)
    assert code == 1
    assert re.search(r"^FAIL \d+ of \d+ profiles, \d+ checks$", printed, re.MULTILINE)


def diagnostics(files: list[Path], folders: tuple[Path, ...]) -> str:
    """What pyslang has to say about a full elaboration, with the warnings that it gives unasked."""
    manager, reading = pyslang.SourceManager(), PreprocessorOptions()
    reading.additionalIncludePaths = list(folders)
    options = pyslang.Bag([reading])
    compilation = Compilation(options)
    compilation.addSyntaxTree(SyntaxTree.fromFiles([str(file) for file in files], manager, options))
    engine, client = pyslang.DiagnosticEngine(manager), pyslang.TextDiagnosticClient()
    engine.setWarningOptions(["default"])
    engine.addClient(client)
    for one in compilation.getAllDiagnostics():
        engine.issue(one)
    return client.getString()


@pytest.mark.parametrize("file", RIGHT, ids=lambda file: file.stem)
def test_pyslang_has_nothing_to_say(file: Path, tmp_path: Path) -> None:
    contract = read_contract(file)
    planned = brief(contract)
    folder = written(contract, planned, tmp_path)
    folders = contract.design.include_dirs
    own = diagnostics(list(contract.design.sources), folders)
    assert diagnostics([folder / f"{BENCH}.sv", *contract.design.sources], folders).replace(own, "") == ""


@pytest.mark.simulator("verilator")
@pytest.mark.parametrize("name", ["spindle", "faulty_reversal"] if SOAK else ["faulty_reversal"])
def test_verilator(name: str, simulator: Simulator, tmp_path: Path, out: Path) -> None:
    contract = read_contract(EXAMPLES / f"{name}.yaml")
    planned = short_part(contract)
    folder = written(contract, planned, tmp_path)
    root = dict(simulator.environment).get("VERILATOR_ROOT")
    program = ["perl", str(Path(root) / "bin" / "verilator")] if root else ["verilator"]
    common = [*program, "--timing", "--assert", "--no-sched-zero-delay", "--top-module", BENCH, "-f", "files.f"]
    lint = run([*common, "--lint-only"], folder, simulator)
    assert f"{BENCH}.sv" not in lint.stderr
    assert name != "spindle" or (lint.returncode, lint.stderr) == (0, "")
    # The flags for the compiler are those that an old gcc and a wheel without precompiled headers need.
    flags = ["-CFLAGS", "-std=c++20 -fcoroutines", "-MAKEFLAGS", "CFG_CXXFLAGS_PCH_I=-include CFG_GCH_IF_CLANG="]
    done = run([*common, "--binary", "-Wno-fatal", *flags], folder, simulator)
    assert done.returncode == 0, done.stderr
    ran = run([f"obj_dir/V{BENCH}", "+tbkit_folder=vectors"], folder, simulator)
    results = play(contract, planned, simulator, out)
    expected = {
        one.name: min((finding.clock for finding in one.findings), default=None)
        for one in results.profiles
        if one.score is not None
    }
    assert outcome(ran.stdout) == expected, ran.stdout
    assert (ran.returncode != 0) == (results.verdict == "fail")


@pytest.mark.simulator("verilator")
@pytest.mark.parametrize("file", RIGHT if SOAK else RIGHT[::6], ids=lambda file: file.stem)
def test_verilator_does_not_warn_of_the_bench(file: Path, simulator: Simulator, tmp_path: Path) -> None:
    contract = read_contract(file)
    folder = written(contract, brief(contract), tmp_path)
    root = dict(simulator.environment).get("VERILATOR_ROOT")
    program = ["perl", str(Path(root) / "bin" / "verilator")] if root else ["verilator"]
    words = ["--lint-only", "--timing", "--assert", "--no-sched-zero-delay", "-Wno-fatal", "--top-module", BENCH, "-f", "files.f"]
    lint = run([*program, *words], folder, simulator)
    assert lint.returncode == 0
    # Warnings begin with their place: none is in the bench.
    assert not re.search(rf"^%\S+: {BENCH}", lint.stderr, re.MULTILINE), lint.stderr


@pytest.mark.simulator("icarus")
def test_nothing_compared_fails(simulator: Simulator, tmp_path: Path) -> None:
    """Expectations without a row, and a profile that there is not."""
    contract = read_contract(EXAMPLES / "spindle.yaml")
    planned = brief(contract)
    folder = written(contract, planned, tmp_path)
    compiled(folder, simulator)
    name = planned.stimuli[0].name
    (file,) = (folder / "vectors").glob("*.expected")
    file.write_text(file.read_text("utf-8").splitlines()[0] + "\n", "utf-8")
    done = run(["vvp", "-n", "bench", "+tbkit_folder=vectors"], folder, simulator)
    assert done.returncode == 1
    assert f"fail  {name}: nothing was compared\nFAIL 1 of 1 profiles, 0 checks\n" in done.stdout
    done = run(["vvp", "-n", "bench", "+tbkit_folder=vectors", "+profile=none"], folder, simulator)
    assert done.returncode == 1
    assert "FAIL no profile was run\n" in done.stdout


PROFILE = """\
profile: mine
seed: 77
motion:
  - walk: {travel: 100 states, speed: [0.1 states/dwell, 0.5 states/dwell]}
"""


@pytest.mark.simulator("icarus")
def test_profiles_with_a_seed_of_their_own(
    simulator: Simulator, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("mine.yaml").write_text(PROFILE, "utf-8")
    words = ["render", str(EXAMPLES / "spindle.yaml"), "mine.yaml", "--only", "mine", "--only", "walk", "--seed", "5", "-o", "out"]
    assert main(words) == 0, capsys.readouterr().err
    assert sorted(path.name for path in Path("out/vectors").glob("*.stimulus")) == ["mine.77.stimulus", "walk.5.stimulus"]
    compiled(tmp_path / "out", simulator)
    done = run(["vvp", "-n", "bench", "+tbkit_folder=vectors"], tmp_path / "out", simulator)
    assert outcome(done.stdout) == {"walk": None, "mine": None}
    done = run(["vvp", "-n", "bench", "+tbkit_folder=vectors", "+profile=mine", "+seed=6"], tmp_path / "out", simulator)
    assert "FAIL cannot open vectors/mine.6.expected\n" in done.stdout
    assert done.returncode == 1


@pytest.mark.simulator("icarus")
def test_waves_on_request(simulator: Simulator, tmp_path: Path) -> None:
    """Read back by pyvcd's reader, A and B change when the stimulus says, and the count comes to its last value."""
    contract = read_contract(EXAMPLES / "spindle.yaml")
    planned = Plan(tuple(one for one in short_part(contract).stimuli if one.name in ("reversals", "transitions")), ())
    folder = written(contract, planned, tmp_path)
    compiled(folder, simulator)
    done = run(["vvp", "-n", "bench", "+tbkit_folder=vectors", "+profile=reversals", "+vcd=waves.vcd"], folder, simulator)
    assert done.returncode == 0
    assert outcome(done.stdout) == {"reversals": None}
    names: dict[str, str] = {}
    changes: dict[str, list[tuple[int, object]]] = {}
    time, depth = 0, 0
    with (folder / "waves.vcd").open("rb") as file:
        for token in tokenize(file):
            if token.kind is TokenKind.SCOPE:
                depth += 1
            elif token.kind is TokenKind.UPSCOPE:
                depth -= 1
            elif token.kind is TokenKind.VAR and depth == 1:
                names[token.var.reference] = token.var.id_code
            elif token.kind is TokenKind.CHANGE_TIME:
                time = token.time_change
            elif token.kind in (TokenKind.CHANGE_SCALAR, TokenKind.CHANGE_VECTOR):
                change = token.scalar_change if token.kind is TokenKind.CHANGE_SCALAR else token.vector_change
                changes.setdefault(change.id_code, []).append((time, change.value))
    (stimulus,) = [one for one in planned.stimuli if one.name == "reversals"]
    begin = next(time for time, value in changes[names["running"]] if value == "1")
    for line in ("a", "b"):
        seen = [time - begin for time, _ in changes[names[f"line_{line}"]] if time > begin]
        assert seen == stimulus.lines[line].toggles_ps.tolist()
    assert len(changes[names["out_count"]]) > 100


def test_vectors_are_the_stimulus(tmp_path: Path) -> None:
    """Read back by NumPy's own reader, every line is driven as the stimulus says."""
    contract = read_contract(EXAMPLES / "traverse.yaml")
    planned = short_part(contract)
    folder = written(contract, planned, tmp_path)
    for stimulus in planned.stimuli:
        path = folder / "vectors" / f"{stimulus.name}.{stimulus.seed}.stimulus"
        table = np.loadtxt(path, skiprows=1, converters={2: lambda text: int(text, 16)}, dtype=np.int64)
        times, levels = np.cumsum(table[:, 0] * 10**6 + table[:, 1]), table[:, 2]
        assert times[-1] == stimulus.periods * stimulus.period_ps
        for bit, name in enumerate(SIGNALS):
            line = {**stimulus.lines, **stimulus.drives}[name]
            values = levels >> bit & 1
            assert values[0] == line.first
            changed = np.flatnonzero(np.diff(values)) + 1
            np.testing.assert_array_equal(times[changed], line.toggles_ps)


def test_the_same_input_gives_the_same_bytes_and_a_check_tells_changes(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    for name in ("spindle.v", "spindle.yaml"):
        (tmp_path / name).write_bytes((EXAMPLES / name).read_bytes())
    words = ["render", "spindle.yaml", "--only", "reversals", "--only", "walk", "-o"]
    assert main([*words, "one"]) == 0
    assert main([*words, "two"]) == 0
    capsys.readouterr()
    one, two = ({path.relative_to(home): path.read_bytes() for path in home.rglob("*.*")} for home in (Path("one"), Path("two")))
    assert one == two
    assert len(one) == 12
    assert main(["render", "--check", "one"]) == 0
    assert capsys.readouterr().out == "one is up to date: 12 files\n"
    (tmp_path / "spindle.yaml").write_text((EXAMPLES / "spindle.yaml").read_text("utf-8").replace("count: 6", "count: [5, 6]"))
    (tmp_path / "one" / "vectors" / "more.1.stimulus").write_text("")
    (tmp_path / "one" / "files.f").unlink()
    assert main(["render", "--check", "one"]) == 2
    told_of = capsys.readouterr().err.splitlines()
    again = "; render it again: tbkit render one/../spindle.yaml -o one"
    assert f"one/files.f: is missing{again}" in told_of
    assert f"one/vectors/more.1.stimulus: would not be rendered any more{again}" in told_of
    assert f"one/vectors/walk.1.expected: is not what would be rendered now{again}" in told_of
    # Every file tells what it comes from, and none of them when.
    for path in Path("two").rglob("*.*"):
        text = path.read_text("utf-8")
        assert "tbkit 0.1.0" in text.splitlines()[0] or json.loads(text)["tbkit"] == "0.1.0"
        assert not re.search(r"20\d\d-\d\d|\d\d:\d\d:\d\d", text)
    assert json.loads(Path("two/manifest.json").read_text("utf-8"))["request"]["only"] == ["reversals", "walk"]


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (
            ["render"],
            (
                "render: name the decoder file and the folder to write: tbkit render DECODER -o DIR; or a folder to check:"
                " --check DIR\n"
            ),
        ),
        (["render", "--check", "nowhere"], "nowhere/manifest.json: this is no folder that tbkit has rendered\n"),
    ],
)
def test_refusals(
    words: list[str], message: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    assert main(words) == 2
    assert capsys.readouterr().err == message
