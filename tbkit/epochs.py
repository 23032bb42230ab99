"""Cuts a run into epochs: at resets, and at whatever the contract leaves open."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from tbkit.contract import Contract
from tbkit.counting import counted, into_range
from tbkit.expectation import Epoch, Events, Int64s
from tbkit.stimulus import Stimulus

#: Moments from which counting may begin after a reset in motion: with more, the count that follows is not checked.
MOST_MOMENTS = 200


@dataclass(frozen=True, slots=True, order=True)
class Open:
    """Periods (inclusive) in which the contract leaves events open; ``known``: the position is sure again afterwards."""

    begin: int
    end: int
    known: bool


@dataclass(frozen=True, slots=True)
class Release:
    """A reset, or power-up.

    Attributes:
        begin: first period in which it is asserted.
        end: first period in which it is not.
        awake: the last period whose events may not be followed yet; ``end`` - 1 when the lines are at rest.
        how: ``rest`` (what the contract says about the start holds), ``moving``, ``index`` (the index sets the count) or
            ``elsewhere`` (the contract says nothing: the lines rest in another state, or the reset was too short).
    """

    begin: int
    end: int
    awake: int
    how: str


@dataclass(frozen=True, slots=True)
class Activity:
    """Every period in which a line that matters changes.

    Attributes:
        lines: each line as sampled.
        raw, passed: all of them, as sampled and behind the filter.
    """

    lines: tuple[Int64s, ...]
    raw: Int64s
    passed: Int64s

    def known(self, period: int, passes: int) -> int:
        """The first period, from ``period`` on, in which every line has a level that the filter surely passes."""
        latest = period
        for changes in self.lines:
            run = int(np.searchsorted(changes, period, side="right")) - 1
            while 0 <= run < len(changes) - 1 and int(changes[run + 1] - changes[run]) < passes:
                run += 1
                latest = max(latest, int(changes[run]))
        return latest


def releases(
    contract: Contract,
    stimulus: Stimulus,
    events: Events,
    spans: list[tuple[int, int]],
    activity: Activity,
    index_active: Int64s,
    set_spans: Sequence[tuple[int, int]],
) -> list[Release]:
    """Sort every (asserted, released) of ``spans`` by what may be said about the time after it.

    ``index_active``: int64, periods in which the index sets the count, among those in which something is released.
    ``set_spans``: when an input sets the count.
    """
    found: list[Release] = []
    settle = contract.start.settle
    set_to = contract.index.value if contract.index and contract.index.action == "set" else contract.start.count
    # A filter that adds up pulses may take even a level that passes late, and the next one for that.
    lateness = contract.main_latency.max - contract.main_latency.min if contract.filter.bursts_open else 0
    surely = contract.filter.passes + lateness
    for begin, end in spans:
        # What the filter holds after a reset is known once each line has had a level for as long as always passes.
        near = np.searchsorted(activity.raw, [end - max(settle, contract.filter.passes), end + settle])
        event = int(np.searchsorted(events.period, end + settle))
        still = near[0] == near[1]
        set_meanwhile = any(first <= end + settle and last >= begin for first, last in set_spans)
        if set_meanwhile or (contract.reset is not None and end - begin < contract.reset.clocks):
            how = "elsewhere"
        elif not still:
            # What the index sets as a level meanwhile is one count more that may be right.
            how = "elsewhere" if contract.start.count != set_to and end in index_active else "moving"
        elif _state_before(events, stimulus, event) not in contract.start.rest_states:
            how = "elsewhere"
        else:
            how = "index" if contract.start.count != set_to and end in index_active else "rest"
        awake = end - 1 if how == "rest" else activity.known(end + settle, surely)
        found.append(Release(begin, end, awake, how))
    return found


def _state_before(events: Events, stimulus: Stimulus, event: int) -> str:
    if event < len(events):
        code = int(events.before[event])
    elif len(events):
        code = int(events.after[-1])
    else:
        code = 2 * stimulus.lines["a"].first + stimulus.lines["b"].first
    return format(code, "02b")


@dataclass(frozen=True, slots=True)
class Cutter:
    """Cuts a run of ``periods`` clock periods."""

    contract: Contract
    events: Events
    releases: list[Release]
    activity: Activity
    periods: int

    def cut(self, opens: list[Open], low: int, high: int) -> tuple[Epoch, ...]:
        """The epochs of an output whose changes come ``low`` to ``high`` clocks after their events."""
        breaks: list[tuple[int, int, Open | Release]] = [(r.begin, r.end, r) for r in self.releases]
        breaks += [(stretch.begin, stretch.end, stretch) for stretch in opens if not self._in_reset(stretch)]
        if not self.contract.reset and not self.releases:
            breaks.append((0, 0, Open(0, 0, known=False)))
        epochs: list[Epoch] = []
        building: Epoch | None = None
        until = -1
        resets = [r.begin for r in self.releases]
        for begin, end, cause in sorted(breaks, key=lambda item: item[:2]):
            if isinstance(cause, Release):
                if building is not None:
                    epochs += self._closed(building, begin - 1, low)
                building = self._after_release(cause, low, high)
                if until >= end:
                    # What was open before the reset still is.
                    building = self._open_ended(*self._quiet(max(until, cause.awake), low, high), "adopt")
                continue
            until = max(until, end)
            base = "carry" if cause.known else "adopt"
            after = end
            if building is not None:
                if building.begin < begin + low - 1:
                    # A reset may come before the answer.
                    reset = bisect_left(resets, begin)
                    cut_short = resets[reset] - 1 if reset < len(resets) else self.periods
                    epochs += self._closed(building, min(begin + low - 1, cut_short), low)
                else:
                    # Begins before things were quiet again after the one before: both are one gap, unsure if either is.
                    after = max(end, building.begin - high)
                    base = "carry" if base == building.base == "carry" else "adopt"
            quiet, event = self._quiet(after, low, high)
            building = self._open_ended(quiet, event, base)
        if building is not None:
            epochs += self._closed(building, self.periods - 1, low)
        return tuple(epochs)

    def _in_reset(self, stretch: Open) -> bool:
        return any(r.begin <= stretch.begin and stretch.end < r.end for r in self.releases)

    def _open_ended(self, begin: int, event: int, base: str, allowed: tuple[int, ...] | None = None) -> Epoch:
        return Epoch(begin, self.periods - 1, event, len(self.events), base, allowed)

    def _closed(self, epoch: Epoch, end: int, low: int) -> list[Epoch]:
        """The epoch up to ``end``, with the events that may answer by then."""
        last = max(int(np.searchsorted(self.events.period, end - low, side="right")), epoch.first)
        return [replace(epoch, end=end, last=last)] if epoch.begin < end else []

    def _after_release(self, release: Release, low: int, high: int) -> Epoch:
        """The epoch that begins after a release, open-ended."""
        end, settle = release.end, self.contract.start.settle
        if release.how == "rest":
            return self._open_ended(end, int(np.searchsorted(self.events.period, end + settle)), "start")
        quiet, event = self._quiet(release.awake, low, high)
        allowed: tuple[int, ...] | None = None
        if release.how == "index" and self.contract.index is not None:
            index = self.contract.index
            allowed = (index.value, self.contract.start.count) if index.edge else (index.value,)
            if int(np.searchsorted(self.events.period, end + settle)) != event:
                allowed = None
        elif release.how == "moving" and release.awake == end + settle:
            allowed = self._after_motion(end, event)
        return self._open_ended(quiet, event, "adopt", allowed)

    def _after_motion(self, end: int, event: int) -> tuple[int, ...] | None:
        """Counts that are right after a release in motion.

        The edges from some moment on are counted, and that moment is the decoder's own.
        """
        contract, events = self.contract, self.events
        settle, count = contract.start.settle, contract.count
        window = [end - settle, end + settle]
        first, last = np.searchsorted(events.period, window).tolist()
        # A pulse that the filter would reject may be what a decoder wakes up to.
        raw, passed = (
            np.searchsorted(changes, [end - settle, end + settle]) for changes in (self.activity.raw, self.activity.passed)
        )
        sure = raw[1] - raw[0] == passed[1] - passed[0] and not events.open[first:event].any()
        sure = sure and (contract.illegal_holds or not events.illegal[first:event].any())
        sure = sure and (contract.index is None or not (events.sets | events.enters_index | events.leaves_index)[first:event].any())
        if count is None or not sure or len(contract.start.rest_states) < 4 or last - first > MOST_MOMENTS:
            return None
        start = into_range(count, contract.start.count)
        found = {start} if last == event else set()
        for moment in range(first, last + 1):
            some = slice(moment, event)
            values = counted(count, events.step[some], events.sets[some], events.to[some], start)
            found.add(int(values[-1]) if len(values) else start)
        return tuple(sorted(found))

    def _quiet(self, after: int, low: int, high: int) -> tuple[int, int]:
        """The first period at which every event up to ``after`` has shown and no later one can have; and the next event."""
        periods = self.events.period
        event = int(np.searchsorted(periods, after, side="right"))
        begin = after + high
        while event < len(periods) and int(periods[event]) + low <= begin:
            begin = int(periods[event]) + high
            event += 1
        return begin, event
