"""Fixtures of the simulator tests; see :mod:`harness` for what the tests call."""

from __future__ import annotations

from pathlib import Path

import pytest
from harness import need

from tbkit.simulators import Simulator


@pytest.fixture
def simulator(request: pytest.FixtureRequest) -> Simulator:
    """The simulator that the test's marker names."""
    marker = request.node.get_closest_marker("simulator")
    assert marker is not None, "a test with this fixture says which simulator it needs: @pytest.mark.simulator(name)"
    return need(marker.args[0])


@pytest.fixture(scope="session")
def out(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One build folder for all tests, so that Verilator's run-time library is compiled once."""
    return tmp_path_factory.mktemp("tbkit-out")
