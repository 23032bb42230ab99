"""The scoreboard: holds a trace against what both oracles allow, and names what differs.

Whole arrays first: an output that does exactly what is expected is accepted without a loop. Only an output that differs
(or is left some freedom) is walked through event by event, each compared relative to the one before, so that one lost
count is one finding.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field, replace

import numpy as np

from tbkit.contract import Contract, Error, Span
from tbkit.counting import counted, into_range
from tbkit.due import Due, apart, due_counts
from tbkit.expectation import Bools, Epoch, Events, Expectation, Hold, Int64s
from tbkit.findings import Finding, Score
from tbkit.shaftoracle import Rests
from tbkit.stimulus import Stimulus
from tbkit.trace import Series, Trace

#: Findings of one kind about one output that are kept with all detail; the rest are counted.
KEPT_PER_KIND = 10
#: An output that is off by more clocks than this is not called late or early, but lost and come from elsewhere.
MOST_OFF = 4


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
    kept: Counter[tuple[str, str]] = field(default_factory=Counter)

    def note_time(self, kind: str, output: str, clock: int, event: int, limit: int) -> None:
        """An output that came at ``clock``, before or after the ``limit``: it is wrong from the first of both on."""
        cause = int(self.events.period[event])
        self.note(kind, output, min(clock, limit), event, f"after {limit - cause} clocks", f"after {clock - cause} clocks")

    def note(self, kind: str, output: str, clock: int, event: int, expected: int | str, found: int | str) -> None:
        self.totals[kind] += 1
        self.kept[kind, output] += 1
        if self.kept[kind, output] <= KEPT_PER_KIND:
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
            still = "?" if events.open[n] else "input" if events.by_input[n] else "index"
            text = f"{events.after[n]:02b}" if events.after[n] != events.before[n] else still
            shown.append(f"[{text}]" if n == event and marked else text)
        return " ".join(shown)

    def saw_latency(self, clocks: int) -> None:
        self.worst = clocks if self.worst is None else max(self.worst, clocks)


def judge(contract: Contract, stimulus: Stimulus, expectation: Expectation, rests: Rests, trace: Trace) -> Score:
    """Compare a trace with what both oracles allow."""
    book = _Book(contract, stimulus, expectation.events)
    moves = None
    if contract.count is not None and trace.count is not None:
        moves = _count(book, expectation, rests, trace.count)
    events = expectation.events
    by_step = {"step": events.step != 0, "up": events.step > 0, "down": events.step < 0}
    for output in contract.step.outputs if contract.step else ():
        series: Series = getattr(trace, output.name)
        steps = _pulses(book, output.name, series, expectation.step_epochs, by_step[output.name], contract.latency.step)
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
            epochs = _before_full(expectation.error_epochs, trace.error, contract.error)
            _pulses(book, "error", trace.error, epochs, events.illegal, contract.latency.error)
    if contract.index is not None and trace.index is not None:
        if contract.index.action == "pulse":
            _pulses(book, "index", trace.index, expectation.index_epochs, events.enters_index, contract.latency.index)
        elif trace.count is not None:
            _captured(book, trace.index, trace.count, expectation)
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
    assert contract.count is not None
    return into_range(contract.count, value)


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
            carried = _carried(contract, expectation.events, done, epoch.first, carried)
        base = _base(book, epoch, seen, carried)
        due = due_counts(contract, expectation, epoch, base)
        changes = _changes_within(series, epoch.begin, epoch.end)
        when, value = series.period[changes], series.value[changes]
        book.comparisons += len(due.value)
        due_total += int((~due.optional).sum())
        responses += len(value)
        if seen == base and _exactly(due, when, value):
            event = due.event[: len(when)]
            if len(when):
                book.saw_latency(int((when - expectation.events.period[event]).max()))
            by_step = ~due.absolute[: len(when)] | (~due.by_input[: len(when)] & (not apart(contract)))
            periods.append(when[by_step])
            matched.append(event[by_step])
            shown = len(when)
        else:
            right, shown = _compare(book, due, when.tolist(), value.tolist(), seen, base)
            periods.append(np.array([clock for clock, _ in right], dtype=np.int64))
            matched.append(np.array([event for _, event in right], dtype=np.int64))
        # What a fault has left behind is carried along, so that it is found once.
        carried = int(value[-1]) if len(value) else seen
        done = int(due.first[shown]) if shown < len(due.first) else epoch.last
    if due_total and not responses:
        _silent(book, "count", epochs)
    _rest_counts(book, rests, series)
    return np.concatenate(periods), np.concatenate(matched)


def _base(book: _Book, epoch: Epoch, seen: int, carried: int | None) -> int:
    """The count from which an epoch is followed; a finding if it is not the one it must be."""
    if epoch.base == "start":
        start = _into_range(book.contract, book.contract.start.count)
        book.comparisons += 1
        if seen != start:
            book.note("start-up-count", "count", epoch.begin, -1, start, seen)
        return seen
    if epoch.base == "carry" and carried is not None:
        book.comparisons += 1
        if seen != carried:
            book.note("count-wrong", "count", epoch.begin, -1, carried, seen)
        return seen
    if epoch.allowed is not None:
        book.comparisons += 1
        if seen not in epoch.allowed:
            low, high = epoch.allowed[0], epoch.allowed[-1]
            expected = low if low == high else f"{low} to {high}"
            book.note("start-up-count", "count", epoch.begin, -1, expected, seen)
    return seen


def _carried(contract: Contract, events: Events, done: int, first: int, base: int) -> int | None:
    """The count after a gap in which only pulses that come and go were in doubt; None if it cannot be told."""
    assert contract.count is not None
    some = slice(done, first)
    path = counted(contract.count, events.step[some], events.sets[some], events.to[some], base)
    if contract.count.overflow == "hold":
        low, high = (min(base, int(path.min())), max(base, int(path.max()))) if len(path) else (base, base)
        if low <= contract.count.lowest or high >= contract.count.highest:
            # At an end, a pulse that comes and goes does not come back to the same count.
            return None
    return int(path[-1]) if len(path) else base


def _exactly(due: Due, when: Int64s, value: Int64s) -> bool:
    """Whether the changes are the due ones, one for one; the last ones may not have come yet."""
    many = len(when)
    return many <= len(due.value) and bool(
        (value == due.value[:many]).all()
        and (when >= due.earliest[:many]).all()
        and (when <= due.latest[:many]).all()
        and due.optional[many:].all()
    )


def _compare(book: _Book, due: Due, when: list[int], value: list[int], seen: int, base: int) -> tuple[list[tuple[int, int]], int]:
    """Name what differs; the same values at other times are late or early, whatever else they could be taken for."""
    many = len(when)
    if seen != base or many != len(due.value) or (np.array(value) != due.value).any():
        return _walk(book, due, when, value, seen)
    limits = zip(due.earliest.tolist(), due.latest.tolist(), strict=True)
    off = [
        clock - latest if clock > latest else min(clock - earliest, 0)
        for clock, (earliest, latest) in zip(when, limits, strict=True)
    ]
    if max(map(abs, off)) > MOST_OFF:
        return _walk(book, due, when, value, seen)
    right: list[tuple[int, int]] = []
    for clock, by, event in zip(when, off, due.event.tolist(), strict=True):
        book.saw_latency(clock - int(book.events.period[event]))
        if by:
            book.note_time("late" if by > 0 else "early", "count", clock, event, clock - by)
        else:
            right.append((clock, event))
    return right, many


def _walk(book: _Book, due: Due, when: list[int], value: list[int], seen: int) -> tuple[list[tuple[int, int]], int]:
    """Follow the changes one by one; every difference is a finding.

    Returns the changes that are right and made by a step, as (clock, event), and how many of the due ones were dealt with.
    """
    contract = book.contract
    right: list[tuple[int, int]] = []
    lost: list[tuple[str, int, int, int, int]] = []
    earliest, latest, steps = due.earliest.tolist(), due.latest.tolist(), due.step.tolist()
    absolute, optional, events = due.absolute.tolist(), due.optional.tolist(), due.event.tolist()
    values, by_input = due.value.tolist(), due.by_input.tolist()
    index_apart = apart(contract)
    periods = book.events.period
    e = c = 0
    now = seen
    while e < len(events) or c < len(when):
        target = wayside = now
        if e < len(events):
            wayside = _into_range(contract, now + steps[e])
            target = values[e] if absolute[e] else wayside
        passing = False
        if e < len(events) and c < len(when) and due.on_the_way[e] and steps[e] and wayside != target:
            passing = earliest[e] <= when[c] <= latest[e] and value[c] == wayside
            # The step alone: the zero has still to come in time.
            follows = c + 1 < len(when) and value[c + 1] == target and when[c + 1] <= latest[e]
            passing &= follows or (optional[e] and c + 1 == len(when))
        if passing:
            right.append((when[c], events[e]))
            steps[e] = 0
            now = value[c]
            c += 1
            continue
        if e < len(events) and c == len(when) and optional[e]:
            break
        if e < len(events) and target == now:
            e += 1  # nothing to be seen here (after an earlier fault, or at the end of a range that holds)
        elif e < len(events) and (c == len(when) or when[c] > latest[e]):
            is_next_due = e + 1 < len(events) and c < len(when) and when[c] >= earliest[e + 1]
            soon = c < len(when) and when[c] - latest[e] <= MOST_OFF
            if soon and value[c] == target and not is_next_due:
                book.note_time("late", "count", when[c], events[e], latest[e])
                book.saw_latency(int(when[c] - periods[events[e]]))
                now = value[c]
                c += 1
            else:
                set_by = "input-wrong" if by_input[e] else "index-missed" if absolute[e] else ""
                kind = set_by or ("count-lost" if abs(target - now) == 1 else "")
                lost.append((kind, latest[e], events[e], target, now))
            e += 1
        elif e == len(events) or when[c] < earliest[e]:
            alone = e < len(events) and (c + 1 == len(when) or when[c + 1] > latest[e])
            if alone and value[c] == target and earliest[e] - when[c] <= MOST_OFF:
                book.note_time("early", "count", when[c], events[e], earliest[e])
                e += 1
            else:
                book.note(_extra_kind(book, now, now, value[c], when[c]), "count", when[c], -1, now, value[c])
            now = value[c]
            c += 1
        elif value[c] == target:
            if not (by_input[e] or (absolute[e] and index_apart)):
                right.append((when[c], events[e]))
            book.saw_latency(int(when[c] - periods[events[e]]))
            now = value[c]
            e, c = e + 1, c + 1
        else:
            missed = absolute[e] and value[c] == wayside
            set_by = "input-wrong" if by_input[e] else "index-missed" if missed else ""
            kind = set_by or _extra_kind(book, now, target, value[c], when[c])
            book.note(kind, "count", when[c], events[e], target, value[c])
            now = value[c]
            e, c = e + 1, c + 1
    # A decoder that loses counts elsewhere too loses them at the ends of its range for the same reason.
    loses = book.totals["count-lost"] or any(kind == "count-lost" for kind, *_ in lost)
    for kind, clock, event, target, now in lost:
        book.note(kind or ("count-lost" if loses else "roll-over-wrong"), "count", clock, event, target, now)
    return right, e


def _extra_kind(book: _Book, now: int, target: int, found: int, clock: int) -> str:
    """What to call a change to ``found`` where ``target`` was due (``now``: no change was)."""
    contract = book.contract
    count = contract.count
    assert count is not None
    off = (found - target) % count.size
    off = min(off, count.size - off)
    far = min((found - now) % count.size, (now - found) % count.size) > 2
    sets = contract.index is not None and contract.index.action == "set"
    if contract.index is not None and sets and found == contract.index.value and (far or _index_near(book, clock)):
        return "index-false"
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


def _rest_counts(book: _Book, rests: Rests, series: Series) -> None:
    """The shaft oracle's part: what differs after the first finding about the count is its consequence."""
    book.comparisons += len(rests.period)
    seen = series.value[series.at(rests.period)]
    first = min((finding.clock for finding in book.found), default=book.stimulus.periods)
    wrong = np.flatnonzero((seen != rests.count) & (rests.period < first))
    if len(wrong):
        n = wrong[0]
        book.note("count-wrong", "count at rest, from the shaft", int(rests.period[n]), -1, int(rests.count[n]), int(seen[n]))


def _silent(book: _Book, output: str, epochs: tuple[Epoch, ...]) -> None:
    """An output that never moved: one finding, where the first change is missing, says it better than a hundred."""
    first = epochs[0].first
    missing = [finding.clock for finding in book.found if finding.output == output]
    book.found = [finding for finding in book.found if finding.output != output]
    for kind in ("count-lost", "index-missed", "roll-over-wrong", "step-wrong", "error-missed"):
        if kind != "error-missed" or output == "error":
            book.totals.pop(kind, None)
    book.note("no-response", output, min(missing, default=0), first, "changes", "none")


# --- direction, step, error ----------------------------------------------------------------------------------------


def _direction_with_count(book: _Book, series: Series, periods: Int64s, event: Int64s) -> None:
    """The direction in the period in which the count (or step) moves, shifted by the difference of their latencies."""
    contract, events = book.contract, book.events
    assert contract.direction is not None
    main = contract.latency.count if contract.count is not None else contract.latency.step
    span = contract.latency.direction
    # What an illegal transition moves has no direction.
    stepped = (events.step[event] != 0) & (events.moved[event] != 0)
    event, periods = event[stepped], periods[stepped]
    book.comparisons += len(event)
    forward = contract.direction.forward_level
    expected = np.where(events.step[event] > 0, forward, 1 - forward)
    together = span == main or (span.exact and main.exact)
    first = periods + span.min - main.min if together else events.period[event] + span.min
    last = first if together else events.period[event] + span.max
    begin, end = series.at(first), series.at(last)
    ok = (series.value[end] == expected) & ~series.unknown[end]
    for n in np.flatnonzero(~ok).tolist():
        entries = slice(int(begin[n]), int(end[n]) + 1)
        if not together and bool(((series.value[entries] == expected[n]) & ~series.unknown[entries]).any()):
            # Its latency is not tied to the count's: right at some time within its range is right.
            continue
        if series.unknown[entries].any():
            book.note("unknown-level", "direction", int(last[n]), int(event[n]), "0 or 1", "X or Z")
            return
        seen = int(series.value[end[n]])
        book.note("direction-wrong", "direction", int(last[n]), int(event[n]), int(expected[n]), seen)


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
        if last[n] == first[n] + 1:
            # It has the right level for the rest of the time, or up to shortly before the next one is due.
            change = int(series.period[last[n]])
            if at_once and event >= 0 and change - clock <= MOST_OFF:
                book.note_time("late", output, change, event, clock)
                continue
            follows = n + 1 < len(hold.begin) and int(hold.level[n + 1]) != level and int(hold.event[n + 1]) >= 0
            if not at_once and follows and 0 < int(hold.end[n]) - change <= MOST_OFF:
                book.note_time("early", output, change, int(hold.event[n + 1]), int(hold.end[n]))
                continue
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
        if output in ("step", "up", "down"):
            # While the index holds the count, a decoder may give a step for a motion or not.
            free = spread(events.sets[due], events.period[due], latency)
            may, wants = (_in_window(seen, events.period[chosen], latency) for chosen in (due[free], due[~free]))
            seen = seen[wants | ~may]
            due = due[~free]
        # Each event's absence of a pulse is compared as well as each pulse.
        book.comparisons += epoch.last - epoch.first
        at = events.period[due]
        must = int(np.searchsorted(at, epoch.end - latency.max, side="right"))
        due_total, seen_total = due_total + must, seen_total + len(seen)
        answered = at[: len(seen)]
        if must <= len(seen) <= len(due) and bool(
            (seen >= answered + latency.min).all() and (seen <= answered + latency.max).all()
        ):
            right_period.append(seen)
            right_event.append(due[: len(seen)])
            continue
        right = _walk_pulses(book, output, at, due.tolist(), seen.tolist(), latency, must)
        right_period.append(np.array([clock for clock, _ in right], dtype=np.int64))
        right_event.append(np.array([event for _, event in right], dtype=np.int64))
    if due_total and not seen_total and output != "error":
        _silent(book, output, epochs)
    return np.concatenate(right_period), np.concatenate(right_event)


def _before_full(epochs: tuple[Epoch, ...], series: Series, error: Error) -> tuple[Epoch, ...]:
    """The epochs up to where an error counter that stops at its end has come there: from then on it tells nothing."""
    if error.kind != "counter" or not error.holds:
        return epochs
    ups, most = np.flatnonzero(series.value == 1), (1 << error.output.width) - 1
    if len(ups) < most:
        return epochs
    full = int(series.period[ups[most - 1]])
    return tuple(replace(epoch, end=min(epoch.end, full)) for epoch in epochs if epoch.begin < full)


def _captured(book: _Book, series: Series, count: Series, expectation: Expectation) -> None:
    """An output that takes the count as the index becomes active, and keeps it until the next time.

    Which side of a step in the same clock it takes is its own business.
    """
    by_index, by_count = book.contract.latency.index, book.contract.latency.count
    events = expectation.events
    for epoch in expectation.index_epochs:
        due = epoch.first + np.flatnonzero(events.enters_index[epoch.first : epoch.last])
        at = events.period[due]
        changes = _changes_within(series, epoch.begin, epoch.end)
        when = series.period[changes]
        book.comparisons += len(due) + len(when)
        for clock in when[~_in_window(when, at, by_index)].tolist():
            seen = int(series.value[series.at(clock)])
            book.note("index-false", "index", clock, -1, int(series.value[series.at(clock - 1)]), seen)
        for event, cause in zip(due.tolist(), at.tolist(), strict=True):
            clock = cause + by_index.max
            if clock > epoch.end:
                break
            entry = int(series.at(clock))
            first, last = int(count.at(cause + by_count.min - 1)), int(count.at(cause + by_count.max))
            right = set(count.value[first : last + 1].tolist())
            if series.unknown[entry]:
                book.note("unknown-level", "index", clock, event, "0 or 1 in every bit", "X or Z")
                return
            if int(series.value[entry]) not in right:
                book.note("capture-wrong", "index", clock, event, int(count.value[last]), int(series.value[entry]))


def spread(free: Bools, causes: Int64s, latency: Span) -> Bools:
    """What is free makes those free whose answers can be taken for its own."""
    if len(free) == 0:
        return free
    begins = np.concatenate([[True], np.diff(causes) > latency.max - latency.min])
    return np.asarray(np.logical_or.reduceat(free, np.flatnonzero(begins))[np.cumsum(begins) - 1])


def _in_window(clocks: Int64s, causes: Int64s, latency: Span) -> Bools:
    """Whether each clock can be the answer to one of the causes."""
    first = np.searchsorted(causes, clocks - latency.max, side="left")
    last = np.searchsorted(causes, clocks - latency.min, side="right")
    return np.asarray(first != last)


def _walk_pulses(
    book: _Book, output: str, at: Int64s, due: list[int], seen: list[int], latency: Span, must: int
) -> list[tuple[int, int]]:
    """Follow the pulses one by one; of the due ones only the first ``must`` have to be seen."""
    if len(due) == len(seen) == must:
        off = np.array(seen) - np.clip(seen, at + latency.min, at + latency.max)
        if np.abs(off).max() <= MOST_OFF:
            for clock, by, event in zip(seen, off.tolist(), due, strict=True):
                if by:
                    book.note_time("late" if by > 0 else "early", output, clock, event, clock - by)
            return [(clock, event) for clock, by, event in zip(seen, off.tolist(), due, strict=True) if not by]
    by_name = {"error": ("error-missed", "error-false"), "index": ("index-missed", "index-false")}
    missed, false = by_name.get(output, ("step-wrong", "step-wrong"))
    right: list[tuple[int, int]] = []
    earliest, latest = (at + latency.min).tolist(), (at + latency.max).tolist()
    e = c = 0
    while e < len(due) or c < len(seen):
        if c == len(seen) and e >= must:
            break
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
