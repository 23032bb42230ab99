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


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    """How the lines of described decoders are known."""
    rows = [
        value for report in terminalreporter.getreports("passed") for name, value in report.user_properties if name == "described"
    ]
    if rows:
        terminalreporter.section("lines of described decoders")
        terminalreporter.write_line(f"{'':20} {'measured':>9} {'named':>6} {'assumed':>8}")
        for row in sorted(map(str, rows)):
            terminalreporter.write_line(row)


@pytest.fixture(scope="session")
def out(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One build folder for all tests, so that Verilator's run-time library is compiled once."""
    return tmp_path_factory.mktemp("tbkit-out")
