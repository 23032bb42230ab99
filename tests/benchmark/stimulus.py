"""Stimulus edges per second on one core, and the peak memory of ten million edges.

``make bench``. A jerk-limited move of an encoder with phase, duty and jitter errors: from the profile to lines, and from there
to the words that the bench plays. Each size runs in a process of its own, so that its peak memory is its own.
"""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from tbkit.contract_file import read_contract
from tbkit.profile_file import read_profile
from tbkit.stimulus import compile_stimulus, lay_out
from tbkit.units import Scale

SIZES = (1_000_000, 10_000_000)
LINES = 2500
EXAMPLES = Path(__file__).parents[2] / "example_dut"
PROFILE = """\
profile: bench-stimulus
encoder: {{lines: {lines}, phase_error: 10 deg, duty_error: 5 deg, jitter: 0.5 deg}}
motion:
  - move: {{by: {by} states, speed: 6000 rpm, accel: 4000 rev/s2, jerk: 2e6 rev/s3}}
"""


def main(arguments: list[str]) -> None:
    """Without arguments every size in turn; with a file, that profile in this process."""
    if arguments:
        profile = read_profile(Path(arguments[0]))
        contract = read_contract(EXAMPLES / "spindle.yaml")
        times = [time.perf_counter()]
        scenario = lay_out(profile, Scale.of(None, profile.encoder.lines), 1, 0)
        edges = sum(len(line.toggles_ps) for line in scenario.disturbed.lines.values())
        del scenario
        times.append(time.perf_counter())
        compile_stimulus(profile, contract, 1).words()
        times.append(time.perf_counter())
        rates = " ".join(f"{edges / seconds / 1e6:>14.2f}" for seconds in np.diff(times))
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
        print(f"{edges:>12,} {rates} {peak:>9.0f} MiB", flush=True)
        return
    print("stimulus of a jerk-limited move with phase, duty and jitter errors, million edges/s")
    print(f"{'edges':>12} {'to lines':>14} {'to words':>14} {'peak memory':>13}", flush=True)
    with tempfile.TemporaryDirectory() as folder:
        for size in SIZES:
            path = Path(folder) / f"{size}.yaml"
            path.write_text(PROFILE.format(lines=LINES, by=size), "utf-8")
            subprocess.run([sys.executable, __file__, str(path)], check=True)


if __name__ == "__main__":
    main(sys.argv[1:])
