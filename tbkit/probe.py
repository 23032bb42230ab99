"""Slow, clean experiments on a decoder, and what its outputs did: how ``tbkit describe`` finds out what a decoder really does.

Times are in clocks. A script is a list of what happens; every experiment of a decoder is played in one simulator process.
"""

from __future__ import annotations

import shutil
import tempfile
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from tbkit import bench
from tbkit.contract import A_LEADS_B, Contract
from tbkit.encoder import LINES, Edges, Line
from tbkit.errors import SimulatorError
from tbkit.motion import Crossings
from tbkit.ordered import merged
from tbkit.simulators import Simulator
from tbkit.stimulus import DRIVES, SIGNALS, Stimulus, Unfold
from tbkit.trace import Series, Trace, compressed, read_trace

#: Clocks after which everything a decoder does in answer to an edge is over.
GAP = 200
#: The part of a clock at which edges come where it does not matter.
PHASE = 0.4


@dataclass(slots=True)
class Script:
    """What happens to the lines, the index and the reset; ``reset_on`` is the level at which the reset port is asserted."""

    reset_on: int = 1
    state: str = "00"
    #: The latch is asked in every second clock, instead of all the time.
    strobes: bool = False
    now: float = 0.0
    toggles: dict[str, list[float]] = field(default_factory=lambda: {name: [] for name in SIGNALS})
    firsts: dict[str, int] = field(default_factory=dict)
    #: (clock, state before, state after, +1 for A leading B, -1 or 0) of each change of the state.
    edges: list[tuple[int, str, str, int]] = field(default_factory=list)
    marks: dict[str, list[int]] = field(default_factory=dict)

    def begin(self, clocks: int = 20, rest: float = GAP) -> Script:
        """Asserts the reset for some ``clocks`` and lets the decoder ``rest``; call it first."""
        self.firsts = {"a": int(self.state[0]), "b": int(self.state[1]), "reset": self.reset_on, "latch": 1}
        self.now = clocks + PHASE
        self.toggles["reset"].append(self.now)
        self.now += rest
        return self

    def mark(self, name: str) -> None:
        self.marks.setdefault(name, []).append(int(self.now))

    def wait(self, clocks: float) -> Script:
        self.now += clocks
        return self

    def toggle(self, *names: str) -> None:
        """Toggle lines at once."""
        for name in names:
            self.toggles[name].append(self.now)
        before = self.state
        a, b = (int(level) ^ (name in names) for level, name in zip(self.state, ("a", "b"), strict=True))
        self.state = f"{a}{b}"
        if self.state != before:
            way = (A_LEADS_B.index(self.state) - A_LEADS_B.index(before)) % 4
            self.edges.append((int(self.now), before, self.state, {1: 1, 3: -1}.get(way, 0)))

    def step(self, way: int, gap: float = GAP) -> None:
        """To the next state, and wait."""
        after = A_LEADS_B[(A_LEADS_B.index(self.state) + way) % 4]
        self.toggle(*(name for name, old, new in zip(("a", "b"), self.state, after, strict=True) if old != new))
        self.wait(gap)

    def walk(self, states: int, gap: float = GAP) -> Script:
        for _ in range(abs(states)):
            self.step(1 if states > 0 else -1, gap)
        return self

    def go_to(self, state: str) -> Script:
        while self.state != state:
            self.step(1)
        return self

    def stimulus(self, number: int, period_ps: int, *, fresh: bool) -> Stimulus:
        none = np.zeros(0, dtype=np.int64)
        lines = {
            name: Line(self.firsts.get(name, 0), np.array([round(at * period_ps) for at in self.toggles[name]], dtype=np.int64))
            for name in SIGNALS
        }
        if self.strobes:
            lines["latch"] = Line(0, np.arange(int(self.now) + GAP, dtype=np.int64) * period_ps + period_ps // 3)
        zero = np.zeros(1, dtype=np.int64)
        ideal = Edges({}, Crossings(none, none, none.astype(bool)), 0.5, (), exact_index=True)
        return Stimulus(
            f"probe-{number}", 0, period_ps, {name: lines[name] for name in LINES},
            {name: lines[name] for name in DRIVES}, ideal, 0, None, int(self.now) + GAP, Unfold(zero, zero),
            power_up=fresh,
        )  # fmt: skip


def probe(contract: Contract, simulator: Simulator, folder: Path, scripts: list[Script], *, fresh: bool = False) -> list[Trace]:
    """Play the scripts; returns what the outputs did. ``fresh``: each comes from power-up, where there is no reset.

    ``folder`` keeps the bench, which is built once for all experiments.

    Raises:
        SimulatorError: the decoder does not build, or a script was not played to its end.
    """
    ready = bench.build(contract, simulator, folder)
    period_ps = contract.clock.period_ps
    stimuli = [script.stimulus(number, period_ps, fresh=fresh) for number, script in enumerate(scripts)]
    run = Path(tempfile.mkdtemp(prefix="run-", dir=folder))
    played = bench.play(ready, contract, stimuli, run, lambda _: None)
    if played.failure is not None:
        raise SimulatorError(str(played.failure))
    traces = [read_trace(played.traces[n], contract, period_ps, stimuli[n].periods) for n in range(len(stimuli))]
    shutil.rmtree(run)
    return traces


def value_at(series: Series, clock: int) -> int | None:
    """The value at the end of a clock; None if it is unknown."""
    entry = int(series.at(clock))
    return None if series.unknown[entry] else int(series.value[entry])


def changes(series: Series, begin: int, end: int) -> list[tuple[int, int]]:
    """(clock, new value) of every change after ``begin`` and up to ``end``."""
    first, last = np.searchsorted(series.period, [begin, end], side="right").tolist()
    return list(zip(series.period[first:last].tolist(), series.value[first:last].tolist(), strict=True))


def known_changes(series: Series, begin: int, end: int) -> list[tuple[int, int]]:
    """Changes to values that are known."""
    return [(clock, value) for clock, value in changes(series, begin, end) if value_at(series, clock) is not None]


def total(series: Series, kind: str, idle: int) -> Series:
    """How often an output has told a step: in every clock of a pulse, at each change of a toggle, as a level rises."""
    told = np.append(False, ~(series.unknown[1:] | series.unknown[:-1]))
    if kind != "toggle":
        told &= series.value != idle
    lengths = (
        np.diff(series.period, append=series.period[-1:] + 1)[told] if kind == "pulse" else np.ones(int(told.sum()), dtype=np.int64)
    )
    begins = np.repeat(series.period[told], lengths)
    steps = begins + np.arange(len(begins)) - np.repeat(np.cumsum(lengths) - lengths, lengths)
    return Series(np.append(0, steps), np.arange(len(steps) + 1), np.zeros(len(steps) + 1, dtype=bool))


def together(up: Series, down: Series) -> Series:
    """Steps on two outputs as one series: up less down once they are totals."""
    period = merged(up.period, down.period)
    up_at, down_at = up.at(period), down.at(period)
    return compressed(period, 2 * up.value[up_at] - 2 * down.value[down_at], up.unknown[up_at] | down.unknown[down_at])
