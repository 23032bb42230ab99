"""The scoreboard: holds a trace against what both oracles allow, and names what differs.

Whole arrays first: an output that does exactly what is expected is accepted without a loop. Only an output that differs
(or is left some freedom) is walked through event by event, each compared relative to the one before, so that one lost
count is one finding.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field

import numpy as np

from tbkit.contract import Contract, Span
from tbkit.expectation import Bools, Epoch, Events, Expectation, Hold, Int64s
from tbkit.findings import Finding, Score
from tbkit.shaftoracle import Rests
from tbkit.stimulus import Stimulus
from tbkit.trace import Series, Trace

#: Findings of one kind that are kept with all detail; the rest are counted.
KEPT_PER_KIND = 10


@dataclass(slots=True)
class _Book:
    """Collects findings and counts comparisons."""

    contract: Contract
    stimulus: Stimulus
    events: Events
    comparisons: int = 0
    worst: int | None = None
    found: list[Finding] = field(default_factory=list)
    totals: Counter[str] = field(default_factory=Counter)

    def note_time(self, kind: str, output: str, clock: int, event: int, limit: int) -> None:
        """An output that came at ``clock``, before or after the ``limit``."""
        cause = int(self.events.period[event])
        self.note(kind, output, clock, event, f"after {limit - cause} clocks", f"after {clock - cause} clocks")

    def note(self, kind: str, output: str, clock: int, event: int, expected: int | str, found: int | str) -> None:
        self.totals[kind] += 1
        if self.totals[kind] <= KEPT_PER_KIND:
            time_ps = self.stimulus.unfold(clock * self.stimulus.period_ps)
            expected, found = self._shown(expected, output), self._shown(found, output)
            self.found.append(Finding(kind, time_ps, clock, output, expected, found, self.states(event, clock)))

    def _shown(self, value: int | str, output: str) -> int | str:
        """Unsigned 64-bit counts are negative inside."""
        count = self.contract.count
        negative = isinstance(value, int) and value < 0 and output == "count" and count is not None and not count.signed
        return value + (1 << 64) if negative and isinstance(value, int) else value

    def states(self, event: int, clock: int) -> str:
        """The line states around ``event``, or around ``clock`` if no event is concerned (-1)."""
        events = self.events
        if len(events) == 0:
            return f"{2 * self.stimulus.lines['a'].first + self.stimulus.lines['b'].first:02b} at rest"
        marked = event >= 0
        if not marked:
            event = max(int(np.searchsorted(events.period, clock, side="right")) - 1, 0)
        shown = [f"{events.before[max(event - 2, 0)]:02b}"]
        for n in range(max(event - 2, 0), min(event + 3, len(events))):
            text = f"{events.after[n]:02b}" if events.after[n] != events.before[n] else "index"
            shown.append(f"[{text}]" if n == event and marked else text)
        return " ".join(shown)

    def saw_latency(self, clocks: int) -> None:
        self.worst = clocks if self.worst is None else max(self.worst, clocks)


@dataclass(frozen=True, slots=True)
class _Due:
    """Changes that are due on one output within one epoch, one after another.

    ``alternative`` is another value that may be seen on the way there (``value`` where there is none).
    """

    earliest: Int64s
    latest: Int64s
    value: Int64s
    step: Int64s
    absolute: Bools
    alternative: Int64s
    event: Int64s


def judge(contract: Contract, stimulus: Stimulus, expectation: Expectation, rests: Rests, trace: Trace) -> Score:
    """Compare a trace with what both oracles allow."""
    book = _Book(contract, stimulus, expectation.events)
    moves = None
    if contract.count is not None and trace.count is not None:
        moves = _count(book, expectation, rests, trace.count)
    if contract.step is not None and trace.step is not None:
        steps = _pulses(book, "step", trace.step, expectation.epochs, expectation.events.step != 0, contract.latency.step)
        moves = steps if contract.count is None else moves
    if contract.direction is not None and trace.direction is not None:
        if expectation.direction is not None:
            _levels(book, "direction", trace.direction, expectation.direction)
        elif moves is not None:
            _direction_with_count(book, trace.direction, *moves)
    if contract.error is not None and trace.error is not None:
        if expectation.sticky_error is not None:
            _levels(book, "error", trace.error, expectation.sticky_error)
        else:
            events = expectation.events
            _pulses(book, "error", trace.error, expectation.error_epochs, events.illegal, contract.latency.error)
    book.found.sort(key=lambda finding: finding.time_ps)
    return Score(book.comparisons, book.worst, expectation.open_periods, tuple(book.found), dict(book.totals))


def _has_unknown(book: _Book, output: str, series: Series, first: int, last: int) -> bool:
    """Note the first X or Z between two periods; the output is then not compared any further."""
    begin, end = int(series.at(first)), int(series.at(last)) + 1
    bad = np.flatnonzero(series.unknown[begin:end])
    if len(bad) == 0:
        return False
    clock = max(int(series.period[begin + bad[0]]), first)
    book.note("unknown-level", output, clock, -1, "0 or 1 in every bit", "X or Z")
    return True


def _changes_within(series: Series, begin: int, end: int) -> slice:
    """The entries of a series that begin after ``begin`` and up to ``end``."""
    first, last = np.searchsorted(series.period, [begin, end], side="right")
    return slice(int(first), int(last))


# --- count ---------------------------------------------------------------------------------------------------------


def _into_range(contract: Contract, value: int) -> int:
    count = contract.count
    assert count is not None
    if count.overflow == "hold":
        return min(max(value, count.lowest), count.highest)
    value = (value - count.lowest) % count.size + count.lowest
    # Traces hold int64, so an unsigned 64-bit count is negative in its upper half.
    return value - (1 << 64) if value >= 1 << 63 else value


def _expected_counts(contract: Contract, events: Events, epoch: Epoch, base: int) -> Int64s:
    """int64[n]: the count after each event of the epoch."""
    count = contract.count
    assert count is not None
    step, zero = events.step[epoch.first : epoch.last], events.zero[epoch.first : epoch.last]
    total = np.cumsum(step)
    last_zero = np.maximum.accumulate(np.where(zero, np.arange(len(step)), -1)) if len(step) else step
    # Sums of steps stay far below 2^63 even where the base does not, so they are brought into range apart.
    moved = np.where(last_zero >= 0, total - total[np.maximum(last_zero, 0)], total)
    if count.overflow == "hold":
        exact = moved + np.where(last_zero >= 0, 0, base)
        if len(exact) == 0 or (exact.min() >= count.lowest and exact.max() <= count.highest):
            return exact
        values, value = [], base
        for by, zeroed in zip(step.tolist(), zero.tolist(), strict=True):
            value = 0 if zeroed else min(max(value + by, count.lowest), count.highest)
            values.append(value)
        return np.array(values, dtype=np.int64)
    exact = moved + np.where(last_zero >= 0, 0, base)
    if count.overflow == "modulo":
        return np.asarray(exact % count.size)
    # Two's complement does the rest, up to 64 bits.
    if count.width == 64:
        return exact
    return np.asarray(((exact - count.lowest) & ((1 << count.width) - 1)) + count.lowest)


def _due_counts(contract: Contract, events: Events, epoch: Epoch, base: int) -> _Due:
    """The count changes that are due in an epoch."""
    chosen = slice(epoch.first, epoch.last)
    value = _expected_counts(contract, events, epoch, base)
    before = np.concatenate([[base], value[:-1]]).astype(np.int64) if len(value) else value
    step, zero, leaves = events.step[chosen], events.zero[chosen], events.leaves_index[chosen]
    by_count, by_index = contract.latency.count, contract.latency.index
    period = events.period[chosen]
    earliest = period + np.where(zero, by_index.min, by_count.min)
    latest = period + np.where(zero, by_index.max, np.where(leaves, max(by_count.max, by_index.max), by_count.max))
    apart = by_count != by_index
    alternative = value.copy()
    due = value != before
    if apart and zero.any():
        # Counted first, zeroed a little later (or the other way round): the step alone may be seen on the way.
        on_the_way = zero & (step != 0)
        earliest = np.where(on_the_way, period + min(by_count.min, by_index.min), earliest)
        counted = [_into_range(contract, b + s) for b, s in zip(before.tolist(), step.tolist(), strict=True)]
        alternative = np.where(on_the_way, np.array(counted, dtype=np.int64), value)
        due |= on_the_way
    keep = np.flatnonzero(due)
    return _Due(earliest[keep], latest[keep], value[keep], step[keep], zero[keep], alternative[keep], epoch.first + keep)


@dataclass(frozen=True, slots=True)
class _Moves:
    """Count changes that were matched with their events: the period of the change, and the event."""

    period: Int64s
    event: Int64s


def _count(book: _Book, expectation: Expectation, rests: Rests, series: Series) -> tuple[Int64s, Int64s] | None:
    """Check the count; returns (period of the change, event) of every change that was rightly made."""
    contract, epochs = book.contract, expectation.epochs
    if not epochs:
        return None
    settled = epochs[0].begin + (contract.start.settle if epochs[0].base == "start" else 0)
    if _has_unknown(book, "count", series, settled, book.stimulus.periods - 1):
        return None
    periods: list[Int64s] = []
    matched: list[Int64s] = []
    carried: int | None = None
    done = 0
    responses = due_total = 0
    for epoch in epochs:
        seen = int(series.value[series.at(epoch.begin)])
        if epoch.base == "carry" and carried is not None:
            gap = expectation.events.step[done : epoch.first]
            carried = _into_range(contract, carried + int(gap.sum()))
        base = _base(book, epoch, seen, carried)
        due = _due_counts(contract, expectation.events, epoch, base)
        changes = _changes_within(series, epoch.begin, epoch.end)
        when, value = series.period[changes], series.value[changes]
        book.comparisons += len(due.value)
        due_total += len(due.value)
        responses += len(value)
        if seen == base and _exactly(due, when, value):
            periods.append(when)
            matched.append(due.event)
            if len(when):
                book.saw_latency(int((when - expectation.events.period[due.event]).max()))
        else:
            right = _walk(book, due, when.tolist(), value.tolist(), seen)
            periods.append(np.array([clock for clock, _ in right], dtype=np.int64))
            matched.append(np.array([event for _, event in right], dtype=np.int64))
        # What a fault has left behind is carried along, so that it is found once.
        carried = int(value[-1]) if len(value) else seen
        done = epoch.last
    if due_total and not responses:
        _silent(book, "count", expectation.events, epochs)
    before = sum(book.totals.values())
    _rest_counts(book, rests, series, quiet=before > 0)
    return np.concatenate(periods), np.concatenate(matched)


def _base(book: _Book, epoch: Epoch, seen: int, carried: int | None) -> int:
    """The count from which an epoch is followed; a finding if it is not the one it must be."""
    start = book.contract.start.count
    if epoch.base == "start":
        book.comparisons += 1
        if seen != start:
            book.note("start-up-count", "count", epoch.begin, -1, start, seen)
        return seen if seen != start else start
    if epoch.base == "carry" and carried is not None:
        book.comparisons += 1
        if seen != carried:
            book.note("count-wrong", "count", epoch.begin, -1, carried, seen)
        return seen
    if epoch.spread is not None:
        book.comparisons += 1
        allowed = [_into_range(book.contract, start + by) for by in range(epoch.spread[0], epoch.spread[1] + 1)]
        if seen not in allowed:
            book.note("start-up-count", "count", epoch.begin, -1, f"{allowed[0]} to {allowed[-1]}", seen)
    return seen


def _exactly(due: _Due, when: Int64s, value: Int64s) -> bool:
    """Whether the changes are the due ones, one for one."""
    return len(when) == len(due.value) and bool(
        (value == due.value).all() and (when >= due.earliest).all() and (when <= due.latest).all()
    )


def _walk(book: _Book, due: _Due, when: list[int], value: list[int], seen: int) -> list[tuple[int, int]]:
    """Follow the changes one by one; every difference is a finding. Returns the right ones as (clock, event)."""
    contract, right = book.contract, []
    earliest, latest, steps = due.earliest.tolist(), due.latest.tolist(), due.step.tolist()
    absolute, events = due.absolute.tolist(), due.event.tolist()
    periods = book.events.period
    e = c = 0
    now = seen
    while e < len(events) or c < len(when):
        target = wayside = now
        if e < len(events):
            wayside = _into_range(contract, now + steps[e])
            target = 0 if absolute[e] else wayside
        passing = e < len(events) and c < len(when) and absolute[e] and when[c] <= latest[e] and value[c] == wayside
        if e < len(events) and target == now and not passing:
            e += 1  # nothing to be seen here (after an earlier fault, or at the end of a range that holds)
        elif e < len(events) and (c == len(when) or when[c] > latest[e]):
            is_next_due = e + 1 < len(events) and c < len(when) and when[c] >= earliest[e + 1]
            if c < len(when) and value[c] == target and not is_next_due:
                book.note_time("late", "count", when[c], events[e], latest[e])
                book.saw_latency(int(when[c] - periods[events[e]]))
                now = value[c]
                c += 1
            else:
                kind = "index-missed" if absolute[e] else _lost_kind(contract, now, target)
                book.note(kind, "count", latest[e], events[e], target, now)
            e += 1
        elif e == len(events) or when[c] < earliest[e]:
            alone = e < len(events) and (c + 1 == len(when) or when[c + 1] > latest[e])
            if alone and value[c] == target:
                book.note_time("early", "count", when[c], events[e], earliest[e])
                e += 1
            else:
                book.note(_extra_kind(book, now, now, value[c], when[c]), "count", when[c], -1, now, value[c])
            now = value[c]
            c += 1
        elif value[c] == target:
            right.append((when[c], events[e]))
            book.saw_latency(int(when[c] - periods[events[e]]))
            now = value[c]
            e, c = e + 1, c + 1
        elif absolute[e] and value[c] == wayside and due.alternative[e] != due.value[e]:
            # Counted, not yet zeroed: the same event is due still.
            steps[e] = 0
            now = value[c]
            c += 1
        else:
            missed = absolute[e] and value[c] == wayside
            kind = "index-missed" if missed else _extra_kind(book, now, target, value[c], when[c])
            book.note(kind, "count", when[c], events[e], target, value[c])
            now = value[c]
            e, c = e + 1, c + 1
    return right


def _lost_kind(contract: Contract, now: int, target: int) -> str:
    return "roll-over-wrong" if abs(target - now) > 1 and contract.count is not None else "count-lost"


def _extra_kind(book: _Book, now: int, target: int, found: int, clock: int) -> str:
    """What to call a change to ``found`` where ``target`` was due (``now``: no change was)."""
    contract = book.contract
    count = contract.count
    assert count is not None
    if found == 0 and contract.index is not None and _index_near(book, clock):
        return "index-false"
    off = (found - target) % count.size
    off = min(off, count.size - off)
    wraps = abs(target - now) > 1 or (count.overflow == "hold" and now in (count.lowest, count.highest))
    if wraps or (off >= 4 and off & (off - 1) == 0) or (abs(found - now) > 2 and found in (count.lowest, count.highest)):
        return "roll-over-wrong"
    return "count-extra" if target == now else "count-wrong"


def _index_near(book: _Book, clock: int) -> bool:
    """Whether the index line was active in the time in which it could have caused something at ``clock``."""
    contract, line = book.contract, book.stimulus.lines["index"]
    reach = contract.latency.longest + contract.filter.passes + 1
    begin, end = (clock - reach) * book.stimulus.period_ps, (clock + 1) * book.stimulus.period_ps
    first, last = np.searchsorted(line.toggles_ps, [begin, end])
    return bool(first != last or (line.first + first) % 2)


def _rest_counts(book: _Book, rests: Rests, series: Series, *, quiet: bool) -> None:
    """The shaft oracle's part. With ``quiet`` what differs has been found already, and is only counted as compared."""
    book.comparisons += len(rests.period)
    seen = series.value[series.at(rests.period)]
    wrong = np.flatnonzero(seen != rests.count)
    if len(wrong) and not quiet:
        n = wrong[0]
        book.note("count-wrong", "count at rest, from the shaft", int(rests.period[n]), -1, int(rests.count[n]), int(seen[n]))


def _silent(book: _Book, output: str, events: Events, epochs: tuple[Epoch, ...]) -> None:
    """An output that never moved: one finding says it better than a hundred."""
    first = epochs[0].first
    book.found = [finding for finding in book.found if finding.output != output]
    for kind in ("count-lost", "index-missed", "roll-over-wrong", "step-wrong", "error-missed"):
        if kind != "error-missed" or output == "error":
            book.totals.pop(kind, None)
    book.note("no-response", output, int(events.period[first]) if first < len(events) else 0, first, "changes", "none")


# --- direction, step, error ----------------------------------------------------------------------------------------


def _direction_with_count(book: _Book, series: Series, periods: Int64s, event: Int64s) -> None:
    """The direction in the period in which the count (or step) moves, shifted by the difference of their latencies."""
    contract = book.contract
    assert contract.direction is not None
    main = contract.latency.count if contract.count is not None else contract.latency.step
    counted = book.events.step[event] != 0
    event, at = event[counted], periods[counted] + contract.latency.direction.min - main.min
    book.comparisons += int((book.events.step != 0).sum())
    entry = series.at(at)
    if series.unknown[entry].any():
        first = int(np.flatnonzero(series.unknown[entry])[0])
        book.note("unknown-level", "direction", int(at[first]), int(event[first]), "0 or 1", "X or Z")
        return
    forward = contract.direction.forward_level
    expected = np.where(book.events.step[event] > 0, forward, 1 - forward)
    seen = series.value[entry]
    for n in np.flatnonzero(seen != expected).tolist():
        book.note("direction-wrong", "direction", int(at[n]), int(event[n]), int(expected[n]), int(seen[n]))


def _levels(book: _Book, output: str, series: Series, hold: Hold) -> None:
    """Every level that must be kept is kept."""
    book.comparisons += len(hold.begin)
    first, last = series.at(hold.begin), series.at(hold.end - 1)
    unknown = np.concatenate([[0], np.cumsum(series.unknown)])
    bad = np.flatnonzero(unknown[last + 1] != unknown[first])
    if len(bad):
        n = int(bad[0])
        book.note("unknown-level", output, int(hold.begin[n]), int(hold.event[n]), int(hold.level[n]), "X or Z")
        return
    changed = np.flatnonzero((first != last) | (series.value[first] != hold.level))
    for n in changed.tolist():
        level, event = int(hold.level[n]), int(hold.event[n])
        at_once = int(series.value[first[n]]) != level
        clock = int(hold.begin[n]) if at_once else int(series.period[first[n] + 1])
        if output == "direction":
            kind = "direction-wrong"
        elif level == 1:
            kind = "error-missed"
        else:
            # Still up when it should have been cleared, or up for no reason.
            was_up = n > 0 and int(hold.level[n - 1]) == 1 and hold.end[n - 1] <= hold.begin[n]
            kind = "error-stuck" if at_once and was_up else "error-false"
        book.note(kind, output, clock, event, level, 1 - level)


def _pulses(
    book: _Book, output: str, series: Series, epochs: tuple[Epoch, ...], wanted: Bools, latency: Span
) -> tuple[Int64s, Int64s] | None:
    """One clock of 1 for each wanted event, none otherwise; returns (period, event) of the right ones."""
    if not epochs:
        return None
    settled = epochs[0].begin + (book.contract.start.settle if epochs[0].base == "start" else 0)
    if _has_unknown(book, output, series, settled, book.stimulus.periods - 1):
        return None
    events = book.events
    ends = np.append(series.period[1:], book.stimulus.periods)
    up = (series.value == 1) & ~series.unknown
    lengths = (ends - series.period)[up]
    # Every clock period in which the output is up.
    ups = np.repeat(series.period[up] - (np.cumsum(lengths) - lengths), lengths) + np.arange(int(lengths.sum()))
    right_period: list[Int64s] = []
    right_event: list[Int64s] = []
    due_total = seen_total = 0
    for epoch in epochs:
        due = epoch.first + np.flatnonzero(wanted[epoch.first : epoch.last])
        begin = epoch.begin if epoch.base == "start" else epoch.begin + 1
        seen = ups[np.searchsorted(ups, begin) : np.searchsorted(ups, epoch.end, side="right")]
        if output == "step":
            # While the index holds the count at 0, a decoder may give a step for a motion or not.
            free = events.zero[due]
            may, must = (_in_window(seen, events.period[chosen], latency) for chosen in (due[free], due[~free]))
            seen = seen[must | ~may]
            due = due[~free]
        # Each event's absence of a pulse is compared as well as each pulse.
        book.comparisons += epoch.last - epoch.first
        due_total, seen_total = due_total + len(due), seen_total + len(seen)
        at = events.period[due]
        if len(seen) == len(due) and bool((seen >= at + latency.min).all() and (seen <= at + latency.max).all()):
            right_period.append(seen)
            right_event.append(due)
            continue
        right = _walk_pulses(book, output, at, due.tolist(), seen.tolist(), latency)
        right_period.append(np.array([clock for clock, _ in right], dtype=np.int64))
        right_event.append(np.array([event for _, event in right], dtype=np.int64))
    if due_total and not seen_total and output == "step":
        _silent(book, output, events, epochs)
    return np.concatenate(right_period), np.concatenate(right_event)


def _in_window(clocks: Int64s, causes: Int64s, latency: Span) -> Bools:
    """Whether each clock can be the answer to one of the causes."""
    first = np.searchsorted(causes, clocks - latency.max, side="left")
    last = np.searchsorted(causes, clocks - latency.min, side="right")
    return np.asarray(first != last)


def _walk_pulses(book: _Book, output: str, at: Int64s, due: list[int], seen: list[int], latency: Span) -> list[tuple[int, int]]:
    missed, false = ("error-missed", "error-false") if output == "error" else ("step-wrong", "step-wrong")
    right: list[tuple[int, int]] = []
    earliest, latest = (at + latency.min).tolist(), (at + latency.max).tolist()
    e = c = 0
    while e < len(due) or c < len(seen):
        if e < len(due) and (c == len(seen) or seen[c] > latest[e]):
            is_next_due = e + 1 < len(due) and c < len(seen) and seen[c] >= earliest[e + 1]
            soon = c < len(seen) and seen[c] <= latest[e] + latency.max + 1
            if soon and not is_next_due:
                book.note_time("late", output, seen[c], due[e], latest[e])
                c += 1
            else:
                book.note(missed, output, latest[e], due[e], 1, 0)
            e += 1
        elif e == len(due) or seen[c] < earliest[e]:
            alone = e < len(due) and seen[c] >= int(at[e]) and (c + 1 == len(seen) or seen[c + 1] > latest[e])
            if alone:
                book.note_time("early", output, seen[c], due[e], earliest[e])
                e += 1
            else:
                runs_on = output == "error" and bool(right) and c > 0 and seen[c] == seen[c - 1] + 1
                book.note("error-stuck" if runs_on else false, output, seen[c], -1, 0, 1)
            c += 1
        else:
            right.append((seen[c], due[e]))
            e, c = e + 1, c + 1
    return right
