"""The wheel holds all it needs and runs far from a checkout; the make targets' commands are the README's."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
pytestmark = pytest.mark.simulator("verilator")


def test_wheel_runs_outside_a_checkout(tmp_path: Path) -> None:
    source = tmp_path / "source"
    shutil.copytree(
        ROOT, source, ignore=shutil.ignore_patterns(".git", ".venv", "tbkit-out", "*.egg-info", "build", "dist", "__pycache__")
    )
    subprocess.run(
        [sys.executable, "-m", "pip", "wheel", "--quiet", "--no-deps", "--wheel-dir", str(tmp_path), str(source)], check=True
    )
    (wheel,) = tmp_path.glob("tbkit-*.whl")
    names = zipfile.ZipFile(wheel).namelist()
    assert "tbkit/templates/bench.sv.j2" in names
    assert "tbkit/regression/reversals.yaml" in names
    assert "tbkit/py.typed" in names
    assert not [name for name in names if name.startswith(("tests/", "templates/", "example_dut/"))]

    place = tmp_path / "site"
    subprocess.run([sys.executable, "-m", "pip", "install", "--quiet", "--no-deps", "--target", str(place), str(wheel)], check=True)
    shutil.copytree(ROOT / "example_dut", tmp_path / "example_dut")
    done = subprocess.run(
        [sys.executable, "-m", "tbkit", "verify", "example_dut/traverse.yaml", "--simulator", "verilator", "--only", "transitions"],
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(place)},
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert "PASS  1 profile," in done.stdout
    # It was the installed copy that ran, not the checkout.
    shown = subprocess.run(
        [sys.executable, "-c", "import tbkit; print(tbkit.__file__)"],
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(place)},
        capture_output=True,
        text=True,
        check=True,
    )
    assert Path(shown.stdout.strip()).is_relative_to(place)
