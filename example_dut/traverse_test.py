"""A cocotb test of one's own, with tbkit's encoder and scoreboard: the traverse runs out, dithers and comes back.

Run it with cocotb's runner or makefiles, top module `traverse`, source `traverse.sv`.
"""

from pathlib import Path

import cocotb
from cocotb.clock import Clock
from cocotb.triggers import ClockCycles

from tbkit.cocotb import EncoderDriver, Scoreboard

DECODER = Path(__file__).with_name("traverse.yaml")


@cocotb.test()
async def out_and_back(dut):
    Clock(dut.clk, 10, "ns").start()
    dut.reset.value = 1
    dut.fault_clear.value = 0
    scoreboard = Scoreboard(dut, DECODER)
    encoder = EncoderDriver((dut.enc, 0), (dut.enc, 1), pitch="40 um", clock=dut.clk)
    await ClockCycles(dut.clk, 10)
    dut.reset.value = 0
    await ClockCycles(dut.clk, 10)

    await encoder.move("4 mm", "2 m/s", accel="40000 m/s2")
    await encoder.dither(every="200 ns", times=20)
    await encoder.move("-4 mm", "1 m/s")
    await encoder.rest("1 us")

    score = await scoreboard.assert_right()
    assert score.comparisons > 800
