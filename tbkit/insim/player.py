"""The cocotb test that runs inside the simulator: starts one job after another on the rendered bench.

The bench plays and records by itself; Python only says which job is next, watches the time, and leaves a mark for every
job that ended, so that what was finished survives whatever comes later.
"""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import Any

import cocotb
from cocotb.handle import HierarchyObject, Immediate
from cocotb.triggers import with_timeout


@cocotb.test()
async def play(bench: Any) -> None:
    """Run every job of the list; a job that outlasts its stimulus fails the test."""
    folder = Path(os.environ["TBKIT_FOLDER"])
    if os.environ["TBKIT_ZEROED"] == "1":
        _zero(bench.decoder)
    for job, length_ps in json.loads((folder / "jobs.json").read_text("utf-8")):
        bench.job.value = job
        bench.go.value = 1
        await with_timeout(bench.done.rising_edge, length_ps, "ps")
        (folder / f"{job}.done").touch()
        bench.go.value = 0
        await with_timeout(bench.done.falling_edge, length_ps, "ps")


def _zero(place: Any) -> None:
    """Set every register below ``place`` to 0; what only follows from others takes its own value again."""
    for handle in place:
        if isinstance(handle, HierarchyObject):
            _zero(handle)
        elif hasattr(handle, "is_const") and not handle.is_const and hasattr(handle, "set"):
            handle.set(Immediate(0))
