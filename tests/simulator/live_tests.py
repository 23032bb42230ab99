"""Runs inside the simulator: what :mod:`test_live` asks for by environment variables."""

from __future__ import annotations

import json
import os
from dataclasses import asdict
from pathlib import Path
from typing import Any

import cocotb

from tbkit.cocotb import verify_profile
from tbkit.profile_file import read_profile
from tbkit.regression import builtin_profiles


@cocotb.test()
async def both_lanes(dut: Any) -> None:
    """Plays the profiles, built-in ones or those of one file, and writes their scores."""
    named = os.environ.get("LIVE_PROFILES", "").split(",")
    own = [read_profile(Path(os.environ["LIVE_FILE"]))] if "LIVE_FILE" in os.environ else []
    scores = {}
    for profile in own or [one for one in builtin_profiles() if one.name in named]:
        scores[profile.name] = asdict(await verify_profile(dut, os.environ["LIVE_DECODER"], profile, seed=1))
    Path(os.environ["LIVE_SCORES"]).write_text(json.dumps(scores), "utf-8")
