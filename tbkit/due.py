"""The changes of a count that are due: what each event of an epoch does, from when on it may show, and until when it must."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np

from tbkit.contract import Contract
from tbkit.counting import counted
from tbkit.expectation import Bools, Epoch, Expectation, Int64s


@dataclass(frozen=True, slots=True)
class Planned:
    """What every event of an epoch does to the count, whatever the count is.

    Attributes:
        earliest, latest: int64[n], periods.
        step: int64[n]. ``sets``: bool[n], the count becomes ``to``, the step included; ``by_input`` or by the index.
        on_the_way: bool[n], the step alone may be seen before the index sets the count.
        event: int64[n]; those that a latched count never shows are left out.
    """

    earliest: Int64s
    latest: Int64s
    step: Int64s
    sets: Bools
    to: Int64s
    by_input: Bools
    on_the_way: Bools
    event: Int64s

    def some(self, chosen: Int64s | Bools | slice) -> Planned:
        """Some of them."""
        return Planned(*(getattr(self, one.name)[chosen] for one in fields(self)))


@dataclass(frozen=True, slots=True)
class Due:
    """Changes that are due on one output within one epoch, one after another.

    ``absolute``: the count is set, ``by_input`` or by the index. ``on_the_way``: the step alone may be seen before the index sets
    the count. ``optional``: may come after the epoch's end. ``first``: the first of several events that show at once.
    """

    earliest: Int64s
    latest: Int64s
    value: Int64s
    step: Int64s
    absolute: Bools
    by_input: Bools
    on_the_way: Bools
    optional: Bools
    event: Int64s
    first: Int64s

    def some(self, chosen: Int64s | Bools) -> Due:
        """Some of them."""
        return Due(*(getattr(self, one.name)[chosen] for one in fields(self)))


def apart(contract: Contract) -> bool:
    """Whether the index may answer at another time than the count does."""
    return contract.latency.count != contract.latency.index or not contract.latency.count.exact


def planned(contract: Contract, expectation: Expectation, epoch: Epoch) -> Planned:
    """What the events of an epoch do."""
    events = expectation.events
    chosen = slice(epoch.first, epoch.last)
    step, sets, leaves = events.step[chosen], events.sets[chosen], events.leaves_index[chosen]
    by_count, by_index = contract.latency.count, contract.latency.index
    period = events.period[chosen]
    # A count that the index holds is let go when the index is seen to have ended, but before the next step.
    index = contract.index
    slowly = leaves & (index is not None and index.action == "set" and not index.edge)
    let_go = np.minimum(max(by_count.max, by_index.max), np.append(np.diff(period), by_index.max + 1) + by_count.min - 1)
    by_input = events.by_input[chosen]
    earliest = period + np.where(sets & ~by_input, by_index.min, by_count.min)
    latest = period + np.where(sets & ~by_input, by_index.max, np.where(slowly, np.maximum(let_go, by_count.max), by_count.max))
    # Counted first, set a little later: the step alone may be seen on the way.
    on_the_way = events.enters_index[chosen] & sets & ~by_input & (step != 0) & apart(contract)
    earliest = np.where(on_the_way, period + min(by_count.min, by_index.min), earliest)
    found = Planned(earliest, latest, step, sets, events.to[chosen], by_input, on_the_way, np.arange(epoch.first, epoch.last))
    if expectation.answered is None:
        return found
    turn = np.searchsorted(expectation.answered, latest)
    answered = turn < len(expectation.answered)
    at = expectation.answered[turn[answered]]
    return replace(found.some(answered), earliest=at, latest=at)


def due_counts(contract: Contract, expectation: Expectation, epoch: Epoch, base: int) -> Due:
    """The count changes that are due in an epoch that begins with the count ``base``."""
    assert contract.count is not None
    plan = planned(contract, expectation, epoch)
    value = counted(contract.count, plan.step, plan.sets, plan.to, base)
    before = np.concatenate([[base], value[:-1]]).astype(np.int64) if len(value) else value
    due = Due(
        plan.earliest,
        plan.latest,
        value,
        plan.step,
        plan.sets,
        plan.by_input,
        plan.on_the_way,
        plan.latest > epoch.end,
        plan.event,
        plan.event,
    )
    if expectation.answered is not None and len(value):
        # What is answered at once shows at once.
        begins = np.append(True, plan.latest[1:] != plan.latest[:-1])
        first, last = np.flatnonzero(begins), np.flatnonzero(np.append(begins[1:], True))
        before = before[first]
        step, absolute = np.add.reduceat(due.step, first), np.logical_or.reduceat(due.absolute, first)
        # At the ends of a count that holds there, steps do not add up.
        absolute |= np.abs(step) > np.abs(value[last] - before)
        due = replace(due.some(last), step=step, absolute=absolute, first=due.event[first])
    return due.some((due.value != before) | due.on_the_way)
