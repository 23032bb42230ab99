"""What the contract allows for one stimulus, as rows that a bench without Python reads and checks by.

A row is (stream, op, from, to, value, step, flags); periods are clock periods, both ends included. A stream is one thing that is
checked, by the numbers of :data:`STREAMS`; its rows are in order of time. The bench template says what it does with them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tbkit.contract import Contract, Span
from tbkit.counting import into_range
from tbkit.due import apart, planned
from tbkit.expectation import Bools, Epoch, Events, Expectation, Hold, Int64s
from tbkit.scoreboard import spread
from tbkit.shaftoracle import Rests

#: What is checked, each by its number. A free stream holds the periods in which its output may do what it likes.
STREAMS = ("count", "rest", "direction", "step", "up", "down", "error", "index", "step_free", "up_free", "down_free")
OPS = {"begin": 1, "due": 2, "allow": 3, "hold": 4, "free": 5, "known": 6, "rest": 7, "some": 8}
#: Of a begin: the count is given; it is carried on. Of what is due: the count is set; the step alone may come first; what follows
#: shows at once; the direction is told, forward or backward; it only happens in a gap.
GIVEN, CARRIED = 1, 2
SETS, ON_THE_WAY, MORE, FORWARD, BACKWARD, SILENT = 1, 2, 4, 8, 16, 32


@dataclass(frozen=True, slots=True)
class Row:
    """One row; see the module."""

    stream: str
    op: str
    begin: int
    end: int
    value: int = 0
    step: int = 0
    flags: int = 0

    @property
    def text(self) -> str:
        """The row as it is written: numbers, and the value as 64 bits in hexadecimal."""
        value = self.value & ((1 << 64) - 1)
        return f"{STREAMS.index(self.stream)} {OPS[self.op]} {self.begin} {self.end} {value:x} {self.step} {self.flags}"


def direction_offset(contract: Contract) -> int | None:
    """How many clocks after a count (or step) its direction is told; None if the direction is not tied to it."""
    if contract.direction is None or not contract.direction.with_count:
        return None
    main, span = contract.main_latency, contract.latency.direction
    return span.min - main.min if span == main or (span.exact and main.exact) else None


def rows(contract: Contract, expectation: Expectation, rests: Rests) -> list[Row]:
    """Every row for one stimulus, stream by stream in the order of :data:`STREAMS`."""
    events, latency = expectation.events, contract.latency
    found: list[Row] = []
    if contract.count:
        found += _known("count", contract, expectation.epochs)
        found += _count(contract, expectation)
        found += [
            Row("rest", "rest", period, period, count)
            for period, count in zip(rests.period.tolist(), rests.count.tolist(), strict=True)
        ]
    by_step = {"step": events.step != 0, "up": events.step > 0, "down": events.step < 0}
    outputs = contract.step.outputs if contract.step else ()
    for output in outputs:
        found += _known(output.name, contract, expectation.step_epochs)
        tells = contract.count is None and output is outputs[-1]
        found += _pulses(output.name, contract, events, expectation.step_epochs, by_step[output.name], latency.step, tells=tells)
    if contract.direction:
        found += _direction(contract, expectation)
    if contract.error and expectation.sticky_error is not None:
        found += _holds("error", expectation.sticky_error)
    elif contract.error:
        found += _known("error", contract, expectation.error_epochs)
        found += _pulses("error", contract, events, expectation.error_epochs, events.illegal, latency.error)
    if contract.index and contract.index.action == "pulse":
        found += _known("index", contract, expectation.index_epochs)
        found += _pulses("index", contract, events, expectation.index_epochs, events.enters_index, latency.index)
    elif contract.index and contract.index.action == "latch":
        found += _captures(contract, expectation)
    return sorted(found, key=lambda row: STREAMS.index(row.stream))


def _known(stream: str, contract: Contract, epochs: tuple[Epoch, ...]) -> list[Row]:
    """From when on no bit may be unknown."""
    if not epochs:
        return []
    settled = epochs[0].begin + (contract.start.settle if epochs[0].base == "start" else 0)
    return [Row(stream, "known", settled, settled)]


def _signs(contract: Contract, events: Events, chosen: Bools) -> Int64s:
    """The flag that says which direction is told with each event."""
    if contract.direction is None or not contract.direction.with_count:
        return np.zeros(len(events), dtype=np.int64)
    tells = chosen & (events.step != 0) & (events.moved != 0)
    return np.where(tells, np.where(events.step > 0, FORWARD, BACKWARD), 0)


def _count(contract: Contract, expectation: Expectation) -> list[Row]:
    count, events, epochs = contract.count, expectation.events, expectation.epochs
    assert count is not None
    by_step = ~events.sets | (~events.by_input & (not apart(contract)))
    signs = _signs(contract, events, np.full(len(events), fill_value=True))
    start = into_range(count, contract.start.count)
    to = np.array([into_range(count, value) for value in events.to.tolist()], dtype=np.int64) if events.sets.any() else events.to
    found: list[Row] = []
    for n, epoch in enumerate(epochs):
        base = {"start": GIVEN, "carry": CARRIED}.get(epoch.base, 0)
        found.append(Row("count", "begin", epoch.begin, epoch.end, start, 0, base))
        found += [Row("count", "allow", epoch.begin, epoch.begin, value) for value in epoch.allowed or () if not base]
        plan = planned(contract, expectation, epoch)
        more = np.append(plan.latest[1:] == plan.latest[:-1], False) if expectation.answered is not None else plan.sets & False
        flags = SETS * plan.sets + ON_THE_WAY * plan.on_the_way + MORE * more[: len(plan.sets)]
        flags = flags + np.where(by_step[plan.event] | plan.on_the_way, signs[plan.event], 0)
        columns = (plan.earliest, plan.latest, to[plan.event], plan.step, flags)
        found += [Row("count", "due", *row) for row in zip(*(column.tolist() for column in columns), strict=True)]
        if n + 1 < len(epochs) and epochs[n + 1].base == "carry":
            since = int(plan.event[-1]) + 1 if len(plan.event) else epoch.first
            some = slice(since, epochs[n + 1].first)
            silent = zip(events.sets[some].tolist(), to[some].tolist(), events.step[some].tolist(), strict=True)
            found += [Row("count", "due", 0, 0, value, step, SILENT + SETS * sets) for sets, value, step in silent if sets or step]
    return found


def _pulses(
    stream: str, contract: Contract, events: Events, epochs: tuple[Epoch, ...], wanted: Bools, latency: Span, *, tells: bool = False
) -> list[Row]:
    signs = _signs(contract, events, np.full(len(events), tells))
    found: list[Row] = []
    for epoch in epochs:
        due = epoch.first + np.flatnonzero(wanted[epoch.first : epoch.last])
        if stream in ("step", "up", "down"):
            free = spread(events.sets[due], events.period[due], latency)
            windows = events.period[due[free]].tolist()
            found += [Row(f"{stream}_free", "free", period + latency.min, period + latency.max) for period in windows]
            due = due[~free]
        found.append(Row(stream, "begin", epoch.begin + (epoch.base != "start"), epoch.end))
        for period, sign in zip(events.period[due].tolist(), signs[due].tolist(), strict=True):
            found.append(Row(stream, "due", period + latency.min, period + latency.max, flags=sign))
    return found


def _holds(stream: str, hold: Hold) -> list[Row]:
    return [
        Row(stream, "hold", begin, end - 1, level)
        for begin, end, level in zip(hold.begin.tolist(), hold.end.tolist(), hold.level.tolist(), strict=True)
    ]


def _direction(contract: Contract, expectation: Expectation) -> list[Row]:
    if expectation.direction is not None:
        return _holds("direction", expectation.direction)
    if direction_offset(contract) is not None:
        # It is looked at when the count is seen to move.
        return []
    events, span = expectation.events, contract.latency.direction
    by_step = ~events.sets | (~events.by_input & (not apart(contract))) if contract.count else np.ones(len(events), dtype=bool)
    told = _signs(contract, events, by_step)
    assert contract.direction is not None
    forward = contract.direction.forward_level
    found: list[Row] = []
    for epoch in expectation.epochs if contract.count else expectation.step_epochs:
        for event in (epoch.first + np.flatnonzero(told[epoch.first : epoch.last])).tolist():
            period, level = int(events.period[event]), forward if told[event] == FORWARD else 1 - forward
            if period + span.max <= epoch.end:
                found.append(Row("direction", "some", period + span.min, period + span.max, level))
    return found


def _captures(contract: Contract, expectation: Expectation) -> list[Row]:
    """When the index's port takes the count; ``value`` and ``step`` are the first and the last period whose count it may be."""
    events, by_index, by_count = expectation.events, contract.latency.index, contract.latency.count
    found: list[Row] = []
    for epoch in expectation.index_epochs:
        found.append(Row("index", "begin", epoch.begin + 1, epoch.end))
        due = epoch.first + np.flatnonzero(events.enters_index[epoch.first : epoch.last])
        found += [
            Row("index", "due", at + by_index.min, at + by_index.max, at + by_count.min - 1, at + by_count.max)
            for at in events.period[due].tolist()
        ]
    return found
