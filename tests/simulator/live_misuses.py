"""Runs inside the simulator: what the library says to those who use it wrongly."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

import cocotb
import pytest
from cocotb.clock import Clock
from cocotb.triggers import ClockCycles

from tbkit.cocotb import EncoderDriver, Scoreboard, verify_profile
from tbkit.errors import InputError, UnfitError
from tbkit.regression import builtin_profiles

DECODERS = Path(os.environ["LIVE_DECODERS"])
PROFILES = {profile.name: profile for profile in builtin_profiles()}


@cocotb.test()
async def ports_that_are_not_there(dut: Any) -> None:
    with pytest.raises(LookupError, match=r"^xor_form has no port 'rst', which the decoder file names$"):
        Scoreboard(dut, DECODERS / "set_wins.yaml")


@cocotb.test()
async def a_decoder_file_that_is_not_there(dut: Any) -> None:
    with pytest.raises(InputError, match=r"none.yaml:1: the decoder file cannot be read: No such file or directory$"):
        Scoreboard(dut, DECODERS / "none.yaml")


@cocotb.test()
async def a_tick(dut: Any) -> None:
    with pytest.raises(UnfitError, match=r"^a decoder with a tick is watched by `tbkit verify` only$"):
        Scoreboard(dut, DECODERS / "sampled_by_tick.yaml")
    with pytest.raises(UnfitError, match=r"^a decoder with a tick is played by `tbkit verify` only$"):
        await verify_profile(dut, DECODERS / "sampled_by_tick.yaml", PROFILES["walk"])


@cocotb.test()
async def a_profile_that_does_not_fit(dut: Any) -> None:
    with pytest.raises(UnfitError, match=r"^for decoders with an index action$"):
        await verify_profile(dut, DECODERS / "xor_form.yaml", PROFILES["index-11"])


@cocotb.test()
async def units_without_a_meaning(dut: Any) -> None:
    encoder = EncoderDriver(dut.a, dut.b)
    with pytest.raises(
        UnfitError, match=r"^the unit 'rev' needs the encoder's line count: add `encoder: {lines: 1024}` to the profile$"
    ):
        await encoder.move("1 rev", "60 rpm")
    with pytest.raises(UnfitError, match=r"^the unit 'dwell' needs a decoder; name its file after the profile's$"):
        await encoder.rest("3 dwell")
    with pytest.raises(ValueError, match=r"^found '3', expected a number and a unit for a time: "):
        await encoder.rest("3")


@cocotb.test()
async def nothing_compared(dut: Any) -> None:
    """The scoreboard was made after the reset, so it never knows where the count began."""
    dut.reset.value = 1
    Clock(dut.clk, 20, "ns").start()
    await ClockCycles(dut.clk, 10)
    dut.reset.value = 0
    await ClockCycles(dut.clk, 10)
    scoreboard = Scoreboard(dut, DECODERS / "xor_form.yaml")
    await EncoderDriver(dut.a, dut.b, clock=dut.clk).move("9 states", "1 states/us")
    expected = r"^nothing was compared; make the scoreboard before the reset is released, and let the lines move after it$"
    with pytest.raises(ValueError, match=expected):
        await scoreboard.check()
