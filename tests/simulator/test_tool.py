"""The command line as a user and a CI server meet it: exit codes, messages, files, and simulators that misbehave."""

from __future__ import annotations

import json
import os
import re
import shlex
import signal
import subprocess
import sys
import threading
import time
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from harness import change, copy_decoder, play
from junitparser import Error, Failure, JUnitXml, Skipped

from tbkit import bench
from tbkit.contract_file import read_contract
from tbkit.errors import SimulatorError
from tbkit.regression import builtin_profiles
from tbkit.simulators import Simulator, find
from tbkit.verify import Results, plan

pytestmark = [pytest.mark.simulator("icarus"), pytest.mark.usefixtures("simulator")]

#: Where something can be put into the decoder `xor_form`, and its fault.
PLACE = "  wire forward = a_seen[1] ^ b_seen[2];\n"
FAULT = ("count <= forward ?", "count <= up ?")
#: Never counts as far as 20; counts further.
SHORT, LONG = "start-00", "trapezoids"


def tbkit(folder: Path, *words: str, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "tbkit", "verify", *words],
        cwd=folder,
        env={**os.environ, **environment},
        capture_output=True,
        text=True,
        check=False,
    )


def results_of(folder: Path, *words: str, code: int = 0, **environment: str) -> Any:
    """The JSON of a run with this exit code."""
    done = tbkit(folder, *words, "--json", "results.json", **environment)
    assert done.returncode == code, done.stdout + done.stderr
    return json.loads((folder / "results.json").read_text("utf-8"))


def rows(printed: str) -> dict[str, tuple[int, int, str]]:
    """What a person reads: edges, comparisons and result of each profile."""
    found = re.findall(r"^  (\S+) +(\d+) +(\d+) +(?:\d+ clk)? +(pass|FAIL|EMPTY)\b", printed, re.MULTILINE)
    return {name: (int(edges), int(compared), result.lower()) for name, edges, compared, result in found}


@pytest.fixture
def xor_form(tmp_path: Path) -> Path:
    """A folder with a right decoder of its own in it."""
    copy_decoder("xor_form", tmp_path)
    return tmp_path


@pytest.fixture
def faulty(xor_form: Path) -> Path:
    change(xor_form / "xor_form.v", *FAULT)
    return xor_form


# --- exit codes and messages


def test_right_decoder(xor_form: Path) -> None:
    done = tbkit(xor_form, "xor_form.yaml", "--only", SHORT)
    assert done.returncode == 0
    assert "PASS" in done.stdout
    # Not a terminal: a plain line for each stage, apart from the result.
    assert re.fullmatch(r"building the bench for icarus \S+\nplaying 1 profile on icarus \S+\njudging 1 profile\n", done.stderr)


def test_fault(faulty: Path) -> None:
    done = tbkit(faulty, "xor_form.yaml", "--only", "reversals")
    assert done.returncode == 1
    assert "FAIL" in done.stdout
    assert "count-wrong" in done.stdout


@pytest.mark.parametrize("name", ["icarus", pytest.param("verilator", marks=pytest.mark.simulator("verilator"))])
def test_syntax_error(xor_form: Path, name: str) -> None:
    change(xor_form / "xor_form.v", "end else begin", "end else begin )")
    line = (xor_form / "xor_form.v").read_text("utf-8").split("begin )")[0].count("\n") + 1
    done = tbkit(xor_form, "xor_form.yaml", "--simulator", name)
    assert done.returncode == 3
    assert f"xor_form.v:{line}" in done.stderr
    assert "syntax error" in done.stderr
    assert "Traceback" not in done.stderr


def test_missing_top(xor_form: Path) -> None:
    change(xor_form / "xor_form.yaml", "top: xor_form", "top: nothing_here")
    done = tbkit(xor_form, "xor_form.yaml")
    assert done.returncode == 2
    assert done.stderr == "xor_form.yaml:2: decoder: there is no module 'nothing_here' in the sources; there are xor_form\n"


def test_unknown_port(xor_form: Path) -> None:
    change(xor_form / "xor_form.yaml", "port: fault", "port: no_such_port")
    done = tbkit(xor_form, "xor_form.yaml")
    assert done.returncode == 2
    assert "xor_form.yaml:9: error: 'xor_form' (xor_form.v:6) has no port 'no_such_port'; its outputs are" in done.stderr


def test_unknown_parameter(xor_form: Path) -> None:
    """A parameter that the decoder does not have would else be passed over, and another decoder verified than was meant."""
    change(xor_form / "xor_form.yaml", "sources: [xor_form.v]", "sources: [xor_form.v], parameters: {WIDHT: 10}")
    done = tbkit(xor_form, "xor_form.yaml", "--only", SHORT)
    assert done.returncode == 2
    expected = (
        "xor_form.yaml:2: decoder: 'xor_form' (xor_form.v:6) has no parameter 'WIDHT'; it has WIDTH (did you mean 'WIDTH'?)\n"
    )
    assert done.stderr == expected


@pytest.mark.parametrize("name", ["icarus", pytest.param("verilator", marks=pytest.mark.simulator("verilator"))])
def test_simulator_finds_the_misfit(name: str, tmp_path: Path, out: Path) -> None:
    """Where the RTL could not be read beforehand, what the simulator warns of is an error."""
    contract = read_contract(copy_decoder("xor_form", tmp_path))
    assert contract.count is not None
    narrow = replace(contract, count=replace(contract.count, output=replace(contract.count.output, width=9)))
    with pytest.raises(
        SimulatorError, match=r"^the decoder 'xor_form' is not as .*xor_form.yaml says; .*(?s:.)*expects 10 bits.*9"
    ):
        bench.build(narrow, find(name)[0], out)


@pytest.mark.parametrize(("name", "said"), [("icarus", "iverilog"), ("verilator", "PATH"), ("auto", "PATH")])
def test_no_simulator(xor_form: Path, name: str, said: str) -> None:
    done = tbkit(xor_form, "xor_form.yaml", "--simulator", name, PATH="")
    assert done.returncode == 3
    assert said in done.stderr
    assert "Traceback" not in done.stderr


def test_broken_yaml(xor_form: Path) -> None:
    change(xor_form / "xor_form.yaml", "lines: {a: a, b: b}", "lines: {a: a, b: b")
    done = tbkit(xor_form, "xor_form.yaml")
    assert done.returncode == 2
    assert re.search(r"xor_form\.yaml:\d+", done.stderr)
    assert not (xor_form / "tbkit-out").exists(), "nothing is built before the files are right"


def test_both_files_wrong(xor_form: Path) -> None:
    change(xor_form / "xor_form.yaml", "rate: 50 MHz", "rate: 50 apples")
    (xor_form / "own.yaml").write_text("profile: own\nmotion:\n  - rest: 3 oranges\n", "utf-8")
    done = tbkit(xor_form, "xor_form.yaml", "own.yaml")
    assert done.returncode == 2
    assert "apples" in done.stderr
    assert "oranges" in done.stderr


def test_nothing_left_to_run(xor_form: Path) -> None:
    done = tbkit(xor_form, "xor_form.yaml", "--only", "index-00")
    assert done.returncode == 2
    assert "index" in done.stderr


# --- what is printed and written


def test_left_out_is_said(xor_form: Path) -> None:
    done = tbkit(xor_form, "xor_form.yaml", "--only", SHORT, "--only", "index-00")
    assert done.returncode == 0
    assert re.search(r"left out.*index-00", done.stdout)
    (index,) = [one for one in results_of(xor_form, "xor_form.yaml", "--only", SHORT, "--only", "index-00")["profiles"] if
                one["name"] == "index-00"]  # fmt: skip
    assert index["verdict"] == "left-out"
    assert "index" in index["reason"]


def test_written_is_what_is_printed(faulty: Path) -> None:
    words = ["xor_form.yaml", "--json", "results.json", "--junit", "results.xml"]
    for profile in ("reversals", "transitions", "start-00", "start-11", "illegal", "index-00"):
        words += ["--only", profile]
    done = tbkit(faulty, *words)
    assert done.returncode == 1
    written = json.loads((faulty / "results.json").read_text("utf-8"))
    assert (written["verdict"], written["decoder"], written["seed"]) == ("fail", "xor_form.yaml", 1)
    assert re.fullmatch(r"icarus \S+", written["simulator"])
    assert f"on {written['simulator']}," in done.stdout

    printed = rows(done.stdout)
    ran = [one for one in written["profiles"] if one["verdict"] != "left-out"]
    assert printed == {one["name"]: (one["edges"], one["comparisons"], one["verdict"]) for one in ran}
    assert len(printed) == 5
    assert "fail" in {one["verdict"] for one in ran}
    for profile in ran:
        assert bool(profile["findings"]) == (profile["verdict"] == "fail")
        for finding in profile["findings"]:
            assert {"kind", "time_ps", "expected", "found"} <= finding.keys()
            assert finding["kind"] in done.stdout
            assert profile["totals"][finding["kind"]] >= 1

    (suite,) = list(JUnitXml.fromfile(str(faulty / "results.xml")))
    words_of = {Failure: "fail", Error: "not-run", Skipped: "left-out"}
    cases = {case.name: words_of[type(case.result[0])] if case.result else "pass" for case in suite}
    assert cases == {one["name"]: one["verdict"] for one in written["profiles"]}
    assert (suite.tests, suite.failures, suite.errors, suite.skipped) == (
        len(cases),
        list(cases.values()).count("fail"),
        0,
        list(cases.values()).count("left-out"),
    )


@pytest.mark.simulator("verilator")
def test_two_simulators_are_two_results(xor_form: Path, out: Path) -> None:
    written = results_of(xor_form, "xor_form.yaml", "--only", SHORT, "--simulator", "all", "--out", str(out))
    assert [one["simulator"].split()[0] for one in written] == ["icarus", "verilator"]
    icarus, verilator = (one["profiles"] for one in written)
    assert icarus == verilator


def test_repeat_command_shows_the_same_finding(faulty: Path) -> None:
    done = tbkit(faulty, "xor_form.yaml", "--seed", "5", "--only", "walk", "--only", "reversals")
    block = re.search(r"first +in (\S+) at .*\n.*lines AB.*\n.*expected.*\n +again +(tbkit .*)\n", done.stdout)
    assert block is not None, done.stdout
    command = shlex.split(block.group(2))
    assert command[:2] == ["tbkit", "verify"]
    again = tbkit(faulty, *command[2:])
    assert again.returncode == 1
    # The same time, states, expected and found.
    assert block.group(0) in again.stdout
    assert set(rows(again.stdout)) == {block.group(1)}


def test_repeat_command_keeps_the_seed(faulty: Path) -> None:
    walks = [results_of(faulty, "xor_form.yaml", "--only", "walk", "--seed", seed, code=1)["profiles"] for seed in "56"]
    assert walks[0] != walks[1]


def test_own_profile(xor_form: Path) -> None:
    (xor_form / "own.yaml").write_text(
        "profile: my-spindle\nencoder: {lines: 100}\nmotion:\n  - move: {by: 2 rev, speed: 3000 rpm}\n  - rest: 10 us\n", "utf-8"
    )
    written = results_of(xor_form, "xor_form.yaml", "own.yaml", "--only", "my-spindle")
    (profile,) = written["profiles"]
    assert (profile["name"], profile["verdict"], profile["edges"]) == ("my-spindle", "pass", 800)
    names = [one["name"] for one in results_of(xor_form, "xor_form.yaml", "own.yaml")["profiles"]]
    assert "my-spindle" in names
    assert set(names) > {SHORT, LONG}


# --- builds


def _builds(out: Path) -> set[str]:
    return {path.name for path in (out / "build").glob("icarus-*")}


def test_what_rebuilds(tmp_path: Path) -> None:
    copy_decoder("packed_lines", tmp_path)
    copy_decoder("xor_form", tmp_path)
    out = tmp_path / "tbkit-out"

    def build(name: str) -> set[str]:
        assert tbkit(tmp_path, name, "--only", SHORT).returncode in (0, 1)
        return _builds(out)

    first = build("packed_lines.yaml")
    assert len(first) == 1
    stamp = (out / "build" / next(iter(first)) / "sim.vvp").stat().st_mtime_ns
    assert build("packed_lines.yaml") == first
    assert (out / "build" / next(iter(first)) / "sim.vvp").stat().st_mtime_ns == stamp, "unchanged, and built again"
    change(tmp_path / "packed_lines" / "settings.vh", "STAGES 2", "STAGES 3")
    second = build("packed_lines.yaml")
    assert len(second) == 2
    change(tmp_path / "packed_lines" / "packed_lines.v", "8'd0;\n      dir", "8'd1;\n      dir")
    assert len(build("packed_lines.yaml")) == 3

    assert len(build("xor_form.yaml")) == 4
    change(tmp_path / "xor_form.yaml", "[xor_form.v]", "[xor_form.v], parameters: {WIDTH: 9}")
    change(tmp_path / "xor_form.yaml", "width: 10", "width: 9")
    assert len(build("xor_form.yaml")) == 5
    # What the bench does not depend on changes nothing.
    change(tmp_path / "xor_form.yaml", "settle: 4", "settle: 5")
    assert len(build("xor_form.yaml")) == 5


def test_stale_environment_changes_nothing(xor_form: Path) -> None:
    words = ("xor_form.yaml", "--only", SHORT, "--only", "walk")
    clean = results_of(xor_form, *words)
    stale = results_of(
        xor_form,
        *words,
        "--out",
        "other-out",
        COCOTB_RANDOM_SEED="99",
        COCOTB_TEST_FILTER="nothing",
        COCOTB_TESTCASE="nothing",
        COCOTB_TEST_MODULES="no_such_module",
        COCOTB_TOPLEVEL="no_such_top",
        COCOTB_RESULTS_FILE=str(xor_form / "elsewhere.xml"),
        PYTEST_CURRENT_TEST="test_x (call)",
        MODULE="no_such_module",
        TOPLEVEL="no_such_top",
        WAVES="1",
        GUI="1",
    )
    assert stale == clean
    assert not (xor_form / "elsewhere.xml").exists()
    assert not [path for path in (xor_form / "other-out").rglob("*") if path.suffix in (".fst", ".vcd")]


def test_writes_only_where_it_was_told(xor_form: Path) -> None:
    before = {path.name for path in xor_form.iterdir()}
    assert tbkit(xor_form, "xor_form.yaml", "--only", SHORT, "--out", "elsewhere").returncode == 0
    assert {path.name for path in xor_form.iterdir()} == before | {"elsewhere"}


def test_two_at_once_in_one_folder(xor_form: Path) -> None:
    """Two runs of one decoder, as two terminals or a CI matrix start them."""

    def start(name: str) -> subprocess.Popen[str]:
        return subprocess.Popen(
            [sys.executable, "-m", "tbkit", "verify", "xor_form.yaml", "--json", name],
            cwd=xor_form,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
        )

    first = start("first.json")
    while first.poll() is None and not list((xor_form / "tbkit-out").glob("run/*/*/jobs.json")):
        time.sleep(0.02)
    second = start("second.json")
    said = [process.communicate()[0] for process in (first, second)]
    assert [first.returncode, second.returncode] == [0, 0], "\n".join(said)
    one, other = (json.loads((xor_form / name).read_text("utf-8")) for name in ("first.json", "second.json"))
    assert one == other


# --- simulators that misbehave


def _misbehaving(folder: Path, verilog: str) -> None:
    change(folder / "xor_form.v", PLACE, PLACE + f"  {verilog}\n")


def _play(folder: Path, simulator: Simulator) -> Results:
    """The short profile and then the long one, in one process."""
    contract = read_contract(folder / "xor_form.yaml")
    planned = plan(contract, [profile for profile in builtin_profiles() if profile.name in (SHORT, LONG)], 1)
    assert [stimulus.name for stimulus in planned.stimuli] == [SHORT, LONG]
    return play(contract, planned, simulator, folder / "tbkit-out")


def _kept(results: Results) -> None:
    assert [(profile.name, profile.verdict) for profile in results.profiles] == [(SHORT, "pass"), (LONG, "not-run")]
    assert results.verdict == "error"
    assert results.failure is not None


def test_finish_in_the_decoder(xor_form: Path) -> None:
    _misbehaving(xor_form, 'always @(posedge clk) if (count == 20) begin $display("had enough"); $finish; end')
    done = tbkit(xor_form, "xor_form.yaml", "--only", SHORT, "--only", LONG, "--json", "results.json", "--junit", "results.xml")
    assert done.returncode == 3
    assert re.search(rf"{LONG} .*NOT RUN", done.stdout)
    assert "had enough" in done.stdout, "the simulator's log is shown"
    written = json.loads((xor_form / "results.json").read_text("utf-8"))
    assert [(one["name"], one["verdict"]) for one in written["profiles"]] == [(SHORT, "pass"), (LONG, "not-run")]
    assert written["verdict"] == "error"
    assert "had enough" in written["failure"]
    (suite,) = list(JUnitXml.fromfile(str(xor_form / "results.xml")))
    assert suite.errors == 1


def test_fault_beats_failure(faulty: Path) -> None:
    """What was found before the simulator died is told, and decides the exit code."""
    _misbehaving(faulty, "always @(posedge clk) if (count == 20) $finish;")
    written = results_of(faulty, "xor_form.yaml", "--only", SHORT, "--only", LONG, code=1)
    assert [one["verdict"] for one in written["profiles"]] == ["fail", "not-run"]


def test_endless_loop(xor_form: Path, simulator: Simulator, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(bench, "RUN_SECONDS", 8)
    monkeypatch.setattr(bench, "SLOWEST_CLOCKS_PER_SECOND", 10**9)
    _misbehaving(xor_form, "always @(count) if (count == 20) forever #0;")
    results = _play(xor_form, simulator)
    _kept(results)
    assert "still running after 8 s" in str(results.failure)


def test_much_output(xor_form: Path, simulator: Simulator) -> None:
    _misbehaving(xor_form, 'always @(posedge clk) begin $display("%0d %0512d", count, count); if (count == 20) $finish; end')
    results = _play(xor_form, simulator)
    _kept(results)
    (log,) = (xor_form / "tbkit-out" / "run").glob("*/*/log.txt")
    assert log.stat().st_size > 50_000
    assert len(str(results.failure).splitlines()) <= bench.LOG_LINES_SHOWN + 3


def test_output_alone_is_no_failure(xor_form: Path, simulator: Simulator) -> None:
    _misbehaving(xor_form, 'always @(posedge clk) $display("%0d %0512d", count, count);')
    results = _play(xor_form, simulator)
    assert (results.verdict, results.failure) == ("pass", None)
    # What a run leaves behind is kept only when the simulator failed.
    assert not list((xor_form / "tbkit-out" / "run").iterdir())


@pytest.mark.skipif(not Path("/proc/self/cmdline").exists(), reason="looks for the simulator's process in /proc")
def test_killed(xor_form: Path, simulator: Simulator) -> None:
    """The simulator is killed, as a system short of memory does it, after the first profile."""
    _misbehaving(xor_form, "always @(count) if (count == 20) forever #0;")
    killed: list[int] = []
    give_up = time.monotonic() + 50

    def kill() -> None:
        while not killed and time.monotonic() < give_up:
            time.sleep(0.05)
            if list((xor_form / "tbkit-out" / "run").glob("*/*/*.done")):
                killed.extend(_processes("vvp", str(xor_form)))
        for process in killed:
            os.kill(process, signal.SIGKILL)

    killer = threading.Thread(target=kill)
    killer.start()
    results = _play(xor_form, simulator)
    killer.join()
    assert len(killed) == 1
    _kept(results)
    assert "exit code" in str(results.failure)


def _processes(*words: str) -> list[int]:
    """Processes with all these words in their command line."""
    found = []
    for folder in Path("/proc").iterdir():
        if folder.name.isdecimal():
            try:
                command = (folder / "cmdline").read_bytes().decode(errors="replace")
            except OSError:
                continue
            if command.split("\0")[0].endswith(words[0]) and all(word in command for word in words[1:]):
                found.append(int(folder.name))
    return found
