"""Runs inside the simulator: what :mod:`test_live` asks for by environment variables."""

from __future__ import annotations

import json
import os
from dataclasses import asdict
from pathlib import Path
from typing import Any

import cocotb

from tbkit.cocotb import verify_profile
from tbkit.regression import builtin_profiles


@cocotb.test()
async def both_lanes(dut: Any) -> None:
    """Plays the profiles and writes their scores."""
    profiles = {profile.name: profile for profile in builtin_profiles()}
    scores = {}
    for name in os.environ["LIVE_PROFILES"].split(","):
        scores[name] = asdict(await verify_profile(dut, os.environ["LIVE_DECODER"], profiles[name], seed=1))
    Path(os.environ["LIVE_SCORES"]).write_text(json.dumps(scores), "utf-8")
