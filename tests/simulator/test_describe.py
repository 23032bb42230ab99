"""``tbkit describe``: the file it writes for a right decoder passes the built-in regression."""

from __future__ import annotations

import re
import shutil
from collections import Counter
from collections.abc import Callable
from pathlib import Path

import pytest
from harness import SOAK, decoder_files, play, told, whole
from mutants import DECODERS, EXAMPLES

from tbkit.cli import main
from tbkit.contract_file import read_contract
from tbkit.simulators import Simulator

#: What the names of some ports do not tell.
ROLES = {
    "lid_position": ["a=phase_1", "b=phase_2"],
    "lookup_table": ["clock=strobe", "reset=init", "count=place", "direction=way", "error=alarm"],
    "no_clock": ["clock=none"],
    "packed_lines": ["a=zba_n[0]", "b=zba_n[1]", "index=zba_n[2]"],
    "strobed_bytes_vhdl": ["count=high_byte,low_byte", "a=quad[1]", "b=quad[0]", "latch=take"],
    "status_vhdl": ["direction=moved"],
    "status_word": [
        "a=ba[0]", "b=ba[1]", "count=word[11:8],low[7:0]", "direction=word[30]", "step=word[29]", "error=word[31]",
    ],
    "up_down_pulse": ["up=up_n", "down=down_n"],
}  # fmt: skip
VHDL = decoder_files("vhdl")
FILES = [*decoder_files("verilog"), *(EXAMPLES / f"{name}.yaml" for name in ("spindle", "traverse", "knob")), *VHDL]

EVERY = [file.stem for file in FILES]
#: Those that are described each time; ``TBKIT_SOAK=1`` does it for all.
FEW = [
    "ticked_filter", "packed_lines", "up_down_pulse", "no_clock", "status_vhdl", "strobed_bytes_vhdl", "stretched_step",
]  # fmt: skip


def on_its_simulator(stem: str) -> object:
    vhdl = stem in {file.stem for file in VHDL}
    return pytest.param(stem, marks=pytest.mark.simulator("ghdl" if vhdl else "icarus"))


def described(stem: str, tmp_path: Path) -> Path:
    """The decoder file that is written for a decoder, whose own file serves for its sources and top module only."""
    own = read_contract((DECODERS if (DECODERS / f"{stem}.yaml").exists() else EXAMPLES) / f"{stem}.yaml")
    file = tmp_path / f"{stem}.yaml"
    roles = [word for role in ROLES.get(stem, ()) for word in ("--role", role)]
    assert main(["describe", *map(str, own.design.sources), "--top", own.design.top, *roles, "-o", str(file)]) == 0
    return file


@pytest.mark.parametrize("stem", [on_its_simulator(stem) for stem in (EVERY if SOAK else FEW)])
def test_described_decoders_pass(
    stem: str, simulator: Simulator, tmp_path: Path, out: Path, record_property: Callable[[str, object], None]
) -> None:
    file = described(stem, tmp_path)
    text = file.read_text("utf-8")
    kinds = Counter(re.findall(r"^[a-z_]+: .*  # (measured|named|assumed)", text, re.MULTILINE))
    # Each line of the file says how it is known, and most of what it says is measured.
    assert kinds.total() == len([line for line in text.splitlines() if re.match(r"[a-z_]+:", line)]) - 1
    assert kinds["measured"] >= 3
    record_property("described", f"{stem:20} {kinds['measured']:>9} {kinds['named']:>6} {kinds['assumed']:>8}")
    contract = read_contract(file)
    results = play(contract, whole(contract), simulator, out)
    assert results.verdict == "pass", text + told(results)


SPINDLE = """\
# What tbkit found out about spindle; read it, mend it, then run tbkit verify on it.
# How each line is known: measured, named (from a port's name) or assumed.
tbkit: 1
decoder: {top: spindle, sources: [spindle.v]}  # named
clock: {port: clk, rate: 100 MHz, edge: rising}  # named; the edge is measured, the rate assumed
reset: {port: rst_n, active: low, kind: async, clocks: 1}  # measured; the fewest clocks that do
start: {count: 0, rest_states: any, settle: 7}  # measured
lines: {a: enc_a, b: enc_b, index: enc_z}  # named
count: {port: position, width: 16, signed: true, resolution: x4, forward: a-leads-b}  # measured
direction: {port: dir, forward: 1, valid: always}  # measured
error: {port: err, kind: pulse}  # measured
index: {action: zero, when: {a: 1, b: 1}}  # measured; where nothing speaks against it, it is taken to act as a level
filter: {rejects: 2, passes: 3}  # measured, to 128 clocks
latency: {count: 6}  # measured
"""


@pytest.mark.simulator("icarus")
@pytest.mark.usefixtures("simulator")
def test_spindle(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """What is written agrees with what the example's own decoder file says, line by line."""
    shutil.copy(EXAMPLES / "spindle.v", tmp_path)
    file = tmp_path / "found.yaml"
    assert main(["describe", str(tmp_path / "spindle.v"), "-o", str(file)]) == 0
    assert capsys.readouterr().out == f"wrote {file}; read it, then run: tbkit verify {file}\n"
    assert re.sub(r"} +#", "}  #", file.read_text("utf-8")) == SPINDLE


RTL = """\
module axis (input run, input first, input second, output reg [7:0] pos = 0); endmodule
module other (input x); endmodule
"""
NAMES = "run, first, second, pos"
UNTOLD = (
    f"d.v:1: which port is A and which B cannot be told from the names {NAMES};"
    " say it with `--role a=PORT --role b=PORT`\n"
    f"d.v:1: which port is the clock cannot be told from the names {NAMES}; say it with `--role clock=PORT` (or `clock=none`)\n"
)
NO_SUCH = (
    f"--role: 'axis' has no port 'frist'; its ports are {NAMES} (did you mean 'first'?)\n"
    "--role: there is no role 'clok'; there are clock, reset, a, b, index, count, direction, step, error, up,"
    " down, latch (did you mean 'clock'?)\n"
)
STILL = "d.v:1: it never counts in slow motion: is an enable input held at the wrong level, or are the lines others than these?\n"


@pytest.mark.simulator("icarus")
@pytest.mark.usefixtures("simulator")
@pytest.mark.parametrize(
    ("words", "message"),
    [
        ("none.v", "none.v: there is no such file\n"),
        ("d.v --top axes", "d.v:1: there is no module 'axes' in the sources; there are axis, other\n"),
        ("d.v", "d.v:1: name the top module with --top; modules at the top: axis, other\n"),
        ("d.v --top axis", UNTOLD),
        ("d.v --top axis --role clok=run --role a=frist", NO_SUCH),
        ("d.v --top axis --role clock=run --role a=first --role b=second", STILL),
    ],
)
def test_refusals(
    words: str, message: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("d.v").write_text(RTL, "utf-8")
    assert main(["describe", *words.split()]) == 2
    assert capsys.readouterr().err.replace(f"{tmp_path}/", "") == message
