"""A plain cocotb bench, as most are written: on every clock it drives the lines, reads the outputs and compares.

The measure for tests/benchmark/bench.py. It plays the same edges on the same decoder, and really checks.
"""

from __future__ import annotations

import json
import os
from pathlib import Path

import cocotb
from cocotb.clock import Clock
from cocotb.triggers import ReadOnly, Timer

LATENCY = 6  # of example_dut/spindle.v, in clocks
ORDER = (0b00, 0b10, 0b11, 0b01)  # A B while A leads


@cocotb.test()
async def plain(dut) -> None:  # any handle
    job = json.loads(Path(os.environ["PLAIN_JOB"]).read_text("utf-8"))
    state, position, direction = 0, 0, 0
    expected = [(0, 0, 0)] * (LATENCY - 1)  # position, direction, error on their way through the decoder
    compared = 0
    dut.enc_a.value = 0
    dut.enc_b.value = 0
    dut.enc_z.value = 0
    dut.rst_n.value = 0
    Clock(dut.clk, job["period_ps"], "ps").start(start_high=False)
    falling, rising = dut.clk.falling_edge, dut.clk.rising_edge
    for _ in range(4):
        await falling
    dut.rst_n.value = 1
    for _ in range(12):
        await falling
    for levels in job["levels"]:  # A B for every clock
        if levels != state:
            change = (ORDER.index(levels) - ORDER.index(state)) % 4
            if change != 2:
                position, direction = position + 2 - abs(change), int(change == 1)
            dut.enc_a.value = levels >> 1
            dut.enc_b.value = levels & 1
            error = int(change == 2)
            state = levels
        else:
            error = 0
        await rising
        await ReadOnly()
        expected.append((position, direction, error))
        want = expected.pop(0)
        got = (dut.position.value.to_signed(), int(dut.dir.value), int(dut.err.value))
        assert got == want
        compared += 1
        await falling
    assert compared > 0
    await Timer(1, "ns")
