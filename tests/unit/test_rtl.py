"""Ports read from the RTL, and decoder files that do not fit them."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from tbkit.contract_file import read_contract
from tbkit.rtl import Rtl, check_against_rtl, read_rtl

ROOT = Path(__file__).parents[2]
FILES = sorted([*(ROOT / "tests" / "decoders").glob("*.yaml"), *(ROOT / "example_dut").glob("*.yaml")])

RTL = """\
module axis #(
    parameter WIDTH = 8,
    localparam TOP = WIDTH - 1
) (
    input  wire             clk,
    input  wire             rst,
    input  wire [1:0]       ab,
    input  wire             en,
    input  wire [2:0]       mode,
    output reg signed [TOP:0] pos,
    output reg [3:0]        flags
);
endmodule
module other (input wire x); endmodule
"""
GOOD = {
    "decoder": "{top: axis, sources: [d.v]}",
    "clock": "{port: clk, rate: 50 MHz}",
    "reset": "{port: rst, active: high, kind: sync}",
    "lines": '{a: "ab[0]", b: "ab[1]"}',
    "inputs": "{en: 1, mode: {value: 2, width: 3}}",
    "count": "{port: pos, width: 8, signed: true}",
    "direction": '{port: "flags[0]", forward: 1, valid: always}',
    "latency": "{count: 3}",
}


def said(folder: Path, rtl: str = RTL, **changes: str) -> list[str]:
    """What is said about a decoder file with changes; its keys stand on lines 2 to 9 in their order."""
    (folder / "d.v").write_text(rtl)
    (folder / "x.yaml").write_text("\n".join(["tbkit: 1", *(f"{key}: {changes.get(key, text)}" for key, text in GOOD.items())]))
    return [str(problem) for problem in check_against_rtl(read_contract(Path("x.yaml")))]


@pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)
def test_every_decoder_file_fits(file: Path) -> None:
    contract = read_contract(file)
    if contract.design.language == "vhdl" and shutil.which("ghdl") is None:
        pytest.skip("needs ghdl to read VHDL")
    rtl = read_rtl(contract.design)
    assert isinstance(rtl, Rtl)
    assert len(rtl.ports) >= 3
    assert check_against_rtl(contract) == []


def test_good(folder: Path) -> None:
    assert said(folder) == []


@pytest.mark.parametrize(
    ("changes", "expected"),
    [
        (
            {"decoder": "{top: axes, sources: [d.v]}"},
            "x.yaml:2: decoder: there is no module 'axes' in the sources; there are axis, other (did you mean 'axis'?)",
        ),
        (
            {"decoder": "{top: axis, sources: [d.v], parameters: {WITDH: 8}}"},
            "x.yaml:2: decoder: 'axis' (d.v:1) has no parameter 'WITDH'; it has WIDTH (did you mean 'WIDTH'?)",
        ),
        (
            {"clock": "{port: clock, rate: 50 MHz}"},
            "x.yaml:3: clock: 'axis' (d.v:1) has no port 'clock'; its inputs are clk, rst, ab, en, mode (did you mean 'clk'?)",
        ),
        (
            {"count": "{port: post, width: 8, signed: true}"},
            "x.yaml:7: count: 'axis' (d.v:1) has no port 'post'; its outputs are pos, flags (did you mean 'pos'?)",
        ),
        (
            {"reset": "{port: pos, active: high, kind: sync}", "count": '{port: "flags[3:2]", width: 2, signed: false}'},
            "x.yaml:4: reset: the port 'pos' (d.v:10) is an output, and an input is needed here",
        ),
        (
            {"direction": '{port: "mode[1]", forward: 1, valid: always}', "inputs": "{en: 1}"},
            "x.yaml:8: direction: the port 'mode' (d.v:9) is an input, and an output is needed here",
        ),
        (
            {"count": "{port: pos, width: 9, signed: true}"},
            "x.yaml:7: count: the port 'pos' (d.v:10) has 8 bits, and 9 are declared here",
        ),
        (
            {"direction": '{port: "flags[4]", forward: 1, valid: always}'},
            "x.yaml:8: direction: the port 'flags' (d.v:11) has 4 bits, and bit 4 is none of them",
        ),
        (
            {"lines": '{a: "ab[0]", b: "ab[2]"}'},
            "x.yaml:5: lines: the port 'ab' (d.v:7) has 2 bits, and bit 2 is none of them",
        ),
        (
            {"inputs": "{en: 1}"},
            "x.yaml:6: inputs: the input 'mode' (d.v:9) is not named; hold it at a value: `inputs: {mode: 0}`",
        ),
        (
            {"inputs": "{en: 1, mode: {value: 2, width: 2}}"},
            "x.yaml:6: inputs: the port 'mode' (d.v:9) has 3 bits, and 2 are declared here",
        ),
    ],
)
def test_misfits(folder: Path, changes: dict[str, str], expected: str) -> None:
    assert said(folder, **changes) == [expected]


def test_parameters_count(folder: Path) -> None:
    """A width that follows from a parameter is that of the decoder file's value."""
    wide = {"decoder": "{top: axis, sources: [d.v], parameters: {WIDTH: 12}}"}
    assert said(folder, **wide) == ["x.yaml:7: count: the port 'pos' (d.v:10) has 12 bits, and 8 are declared here"]
    assert said(folder, **wide, count="{port: pos, width: 12, signed: true}") == []


@pytest.mark.parametrize(
    "rtl",
    [
        pytest.param("modul axis (input clk);", id="no-module"),
        pytest.param(RTL.replace("en,\n", "en\n"), id="comma-missing"),
        pytest.param(RTL.replace("endmodule", "always @(posedge clk pos <= ;\nendmodule", 1), id="broken-inside"),
        pytest.param('`include "nowhere.vh"\n' + RTL.replace("[TOP:0]", "[`TOP:0]"), id="include-missing"),
    ],
)
def test_unreadable_rtl_is_left_to_the_simulator(folder: Path, rtl: str) -> None:
    assert rtl != RTL
    assert said(folder, rtl=rtl, clock="{port: clock, rate: 50 MHz}") == []


def test_macros_of_an_earlier_file_hold(folder: Path) -> None:
    """The simulators compile the sources one after another as one text."""
    (folder / "sizes.v").write_text("`define TOP 8\n")
    sources = {"decoder": "{top: axis, sources: [sizes.v, d.v]}"}
    rtl = RTL.replace("[TOP:0]", "[`TOP:0]")
    assert said(folder, rtl=rtl, **sources) == ["x.yaml:7: count: the port 'pos' (d.v:10) has 9 bits, and 8 are declared here"]
    assert said(folder, rtl=rtl, **sources, count="{port: pos, width: 9, signed: true}") == []


@pytest.mark.parametrize("bounds", ["0:1", "2:1"])
def test_bits_are_driven_of_plain_vectors_only(folder: Path, bounds: str) -> None:
    """The bench numbers the bits it drives from the right: A and B would be swapped, or go to other bits, unseen."""
    expected = (
        f"x.yaml:5: lines: the port 'ab' (d.v:7) is declared [{bounds}], and single bits are driven of vectors declared [N:0] only;"
        " declare it [1:0], or put a module around the decoder that does"
    )
    assert said(folder, rtl=RTL.replace("[1:0]", f"[{bounds}]")) == [expected]


def test_bits_are_read_by_their_own_numbers(folder: Path) -> None:
    rtl = RTL.replace("[3:0]", "[1:4]")
    assert said(folder, rtl=rtl, direction='{port: "flags[4]", forward: 1, valid: always}') == []
    expected = "x.yaml:8: direction: the port 'flags' (d.v:11) is declared [1:4], and bit 0 is none of them"
    assert said(folder, rtl=rtl) == [expected]


def test_an_input_with_a_value_of_its_own_may_be_left_open(folder: Path) -> None:
    rtl = RTL.replace("input  wire             en", "input  logic            en = 1")
    assert rtl != RTL
    assert said(folder, rtl=rtl, inputs="{mode: {value: 2, width: 3}}") == []


VHDL = """\
library ieee;
use ieee.std_logic_1164.all;
entity axis is
  port (
    clk, a, b : in std_logic;
    en : in std_logic{default};
    pos : out std_logic_vector(7 downto 0));
end entity;
"""


@pytest.mark.skipif(shutil.which("ghdl") is None, reason="needs ghdl to read VHDL")
def test_a_vhdl_input_with_a_default_may_be_left_open(folder: Path) -> None:
    lines = (
        "tbkit: 1", "decoder: {top: axis, sources: [axis.vhd]}", "clock: {port: clk, rate: 50 MHz}", "reset: none",
        "lines: {a: a, b: b}", "count: {port: pos, width: 8, signed: true}", "latency: {count: 3}",
    )  # fmt: skip
    (folder / "x.yaml").write_text("\n".join(lines))
    for default, expected in (
        (" := '1'", []),
        ("", ["x.yaml:1: inputs: the input 'en' (axis.vhd:6) is not named; hold it at a value: `inputs: {en: 0}`"]),
    ):
        (folder / "axis.vhd").write_text(VHDL.replace("{default}", default))
        assert [str(problem) for problem in check_against_rtl(read_contract(Path("x.yaml")))] == expected


def test_vhdl_has_other_keywords(folder: Path) -> None:
    """A port of VHDL may be called as a keyword of Verilog is."""
    (folder / "axis.vhd").write_text(VHDL.replace("{default}", " := '1'").replace("pos :", "reg :").replace("a, b", "wire, bit"))
    lines = (
        "tbkit: 1", "decoder: {top: axis, sources: [axis.vhd]}", "clock: {port: clk, rate: 50 MHz}", "reset: none",
        "lines: {a: wire, b: bit}", "count: {port: reg, width: 8, signed: true}", "latency: {count: 3}",
    )  # fmt: skip
    (folder / "x.yaml").write_text("\n".join(lines))
    assert check_against_rtl(read_contract(Path("x.yaml"))) == []
