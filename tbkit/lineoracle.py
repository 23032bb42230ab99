"""The line oracle: from the levels a decoder samples and the contract, what its outputs may do.

It knows nothing of the shaft. Data flow: toggles → sampled changes per line → filtered changes per line → events of the
state AB → epochs, that is stretches in which the contract ties every output change to an event.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from tbkit.contract import Contract, Filter
from tbkit.encoder import Line
from tbkit.expectation import Bools, Epoch, Events, Expectation, Hold, Int64s
from tbkit.stimulus import Stimulus

_NEVER = np.iinfo(np.int64).max // 4
#: AB codes (2·A + B) in the order in which A leads B.
_FORWARD = (0b00, 0b10, 0b11, 0b01)


@dataclass(frozen=True, slots=True)
class Changes:
    """A line's levels over clock periods: the first level, and from each period on the other one."""

    first: int
    period: Int64s

    def level(self, periods: Int64s) -> Int64s:
        """The level in each of ``periods``."""
        return self.first ^ (np.searchsorted(self.period, periods, side="right") & 1)


@dataclass(frozen=True, slots=True)
class Doubt:
    """Periods (inclusive) in which the filter's output is the decoder's own business."""

    begin: Int64s
    end: Int64s


@dataclass(frozen=True, slots=True, order=True)
class Open:
    """Periods (inclusive) in which the contract leaves events open; ``known``: the position is sure again afterwards."""

    begin: int
    end: int
    known: bool


def sample(line: Line, period_ps: int) -> Changes:
    """The levels at the ends of clock periods; pulses that no active edge sees are gone."""
    period = line.toggles_ps // period_ps
    if len(period) == 0:
        return Changes(line.first, period)
    last = np.flatnonzero(np.append(period[1:] != period[:-1], True))
    odd = (last + 1) & 1
    changed = odd != np.concatenate([[0], odd[:-1]])
    return Changes(line.first, period[last][changed])


def filtered(sampled: Changes, rules: Filter) -> tuple[Changes, Doubt]:
    """What surely passes the filter, and where it is free to pass something or not.

    A change that passes is placed where the lasting level began, since latency counts from there.
    """
    none = np.zeros(0, dtype=np.int64)
    begin = sampled.period
    if len(begin) == 0 or rules.passes == 1:
        return sampled, Doubt(none, none)
    length = np.diff(begin, append=_NEVER)
    level = sampled.first ^ ((np.arange(len(begin)) + 1) & 1)
    lasting = np.flatnonzero(length >= rules.passes)
    level_before = np.concatenate([[sampled.first], level[lasting]])
    passes = lasting[level[lasting] != level_before[:-1]]
    # The filter's output while run i is on, if nothing in doubt got through: that of the last lasting run before it.
    standing = level_before[np.searchsorted(lasting, np.arange(len(begin)), side="left")]
    short = length < rules.passes
    if rules.bursts_open:
        doubt = _bursts(begin, length, level != standing, short, rules.rejects)
    else:
        grey = np.flatnonzero(short & (length > rules.rejects) & (level != standing))
        doubt = Doubt(begin[grey], begin[grey] + length[grey])
    return Changes(sampled.first, begin[passes]), doubt


def _bursts(begin: Int64s, length: Int64s, against: Bools, short: Bools, rejects: int) -> Doubt:
    """Runs of short pulses whose sum, as an integrating filter takes it, can exceed what is surely rejected."""
    doubts: list[tuple[int, int]] = []
    edges = np.flatnonzero(np.diff(np.concatenate([[0], short.astype(np.int8), [0]])))
    for first, after in edges.reshape(-1, 2):
        total = highest = 0
        for run in range(first, after):
            total = total + int(length[run]) if against[run] else max(0, total - int(length[run]))
            highest = max(highest, total)
        # What is left over also shortens the way of the lasting level that follows.
        if highest > rejects or (total and after < len(begin) and against[after]):
            doubts.append(
                (int(begin[first]), int(begin[after]) if after < len(begin) else int(begin[after - 1] + length[after - 1]))
            )
    table = np.array(doubts, dtype=np.int64).reshape(-1, 2)
    return Doubt(table[:, 0], table[:, 1])


def _count_table(contract: Contract) -> Int64s:
    """int64[4, 4]: count step for AB before and after, by the contract's resolution, boundary and forward sense."""
    count = contract.count
    order = list(_FORWARD)
    if count is not None and not count.a_leads_forward:
        order = [order[0], *reversed(order[1:])]
    if contract.states_per_count == 1:
        entered = set(order)
    else:
        at = int(count.at, 2) if count is not None else 0
        entered = {at} if contract.states_per_count == 4 else {at, at ^ 0b11}
    table = np.zeros((4, 4), dtype=np.int64)
    for place, state in enumerate(order):
        if state in entered:
            before = order[place - 1]
            table[before, state], table[state, before] = 1, -1
    return table


def _moved_table(contract: Contract) -> Int64s:
    """int64[4, 4]: states moved, in the decoder's forward sense."""
    sign = -1 if contract.count is not None and not contract.count.a_leads_forward else 1
    table = np.zeros((4, 4), dtype=np.int64)
    for place, state in enumerate(_FORWARD):
        before = _FORWARD[place - 1]
        table[before, state], table[state, before] = sign, -sign
    return table


def _index_active(contract: Contract, a: Int64s, b: Int64s, z: Int64s) -> Bools:
    gate = contract.index
    if gate is None:
        return np.zeros(len(a), dtype=bool)
    active = z.astype(bool)
    if gate.a is not None:
        active &= a == gate.a
    if gate.b is not None:
        active &= b == gate.b
    return active


def _opens(contract: Contract, a: Changes, b: Changes, doubts: list[tuple[Changes, Doubt]]) -> list[Open]:
    """Where a pulse the filter is free to pass, or a state too short to be followed, leaves the contract open."""
    opens: list[Open] = []
    # With the other line still this long, the doubtful pulse is a legal there-and-back at most.
    near = contract.shortest_state + contract.latency.count.max - contract.latency.count.min
    for other, doubt in doubts:
        for begin, end in zip(doubt.begin.tolist(), doubt.end.tolist(), strict=True):
            span = np.searchsorted(other.period, [begin - near, end + near])
            opens.append(Open(begin, end, bool(span[0] == span[1]) and contract.index is None))
    states = np.union1d(a.period, b.period)
    hasty = np.flatnonzero(np.diff(states) < contract.shortest_state)
    return opens + [Open(int(states[n]), int(states[n + 1]), False) for n in hasty]


def make_events(contract: Contract, stimulus: Stimulus) -> tuple[Events, list[Open]]:
    """Merge the filtered lines into events, and list where the contract leaves open what happens."""
    sampled = {name: sample(line, stimulus.period_ps) for name, line in stimulus.lines.items()}
    (a, doubt_a), (b, doubt_b), (z, doubt_z) = (filtered(sampled[name], contract.filter) for name in ("a", "b", "index"))
    if contract.index is None:
        none = np.zeros(0, dtype=np.int64)
        z, doubt_z = Changes(0, none), Doubt(none, none)
    period = np.union1d(np.union1d(a.period, b.period), z.period)
    after_a, after_b, after_z = (line.level(period) for line in (a, b, z))
    before_a, before_b, before_z = (line.level(period - 1) for line in (a, b, z))
    before, after = 2 * before_a + before_b, 2 * after_a + after_b
    active = _index_active(contract, after_a, after_b, after_z)
    active_before = _index_active(contract, before_a, before_b, before_z)
    zero = active & ~active_before if contract.index is not None and contract.index.edge else active
    opens = _opens(contract, a, b, [(b, doubt_a), (a, doubt_b)])
    opens += [Open(begin, end, False) for begin, end in zip(doubt_z.begin.tolist(), doubt_z.end.tolist(), strict=True)]
    is_open = np.zeros(len(period), dtype=bool)
    for stretch in opens:
        low, high = np.searchsorted(period, [stretch.begin, stretch.end + 1])
        is_open[low:high] = True
    events = Events(
        period,
        before,
        after,
        _moved_table(contract)[before, after],
        _count_table(contract)[before, after],
        (before ^ after) == 0b11,
        zero,
        active_before & ~active,
        is_open,
    )
    return events, sorted(opens)


def expect(contract: Contract, stimulus: Stimulus) -> Expectation:
    """What the contract allows for this stimulus."""
    events, opens = make_events(contract, stimulus)
    latency = contract.latency
    cutter = _Cutter(contract, stimulus, events, _reset_spans(stimulus) if contract.reset else [])
    moving = [latency.count if contract.count else latency.step]
    moving += [latency.index] if contract.index else []
    moving += [latency.step] if contract.step else []
    rebases = [] if contract.illegal_holds else [Open(int(k), int(k), False) for k in events.period[events.illegal]]
    epochs = cutter.cut(sorted(opens + rebases), min(span.min for span in moving), max(span.max for span in moving))
    error_epochs = cutter.cut(opens, latency.error.min, latency.error.max)
    direction = None
    if contract.direction and not contract.direction.with_count:
        direction_epochs = cutter.cut(opens, latency.direction.min, latency.direction.max)
        direction = _direction(contract, events, direction_epochs)
    compared = sum(epoch.end - epoch.begin for epoch in epochs)
    return Expectation(
        events,
        epochs,
        error_epochs,
        direction,
        _sticky(contract, stimulus, events, opens, error_epochs) if contract.error and contract.error.sticky else None,
        stimulus.periods - compared,
    )


def _reset_spans(stimulus: Stimulus) -> list[tuple[int, int]]:
    """(first period asserted, first period released) of each reset."""
    changes = sample(stimulus.drives["reset"], stimulus.period_ps)
    periods = changes.period.tolist()
    if changes.first:
        periods = [0, *periods]
    if len(periods) % 2:
        periods.append(stimulus.periods)
    return list(zip(periods[::2], periods[1::2], strict=True))


@dataclass(frozen=True, slots=True)
class _Cutter:
    """Cuts a run into epochs at resets and at what is open."""

    contract: Contract
    stimulus: Stimulus
    events: Events
    resets: list[tuple[int, int]]

    def cut(self, opens: list[Open], low: int, high: int) -> tuple[Epoch, ...]:
        """The epochs of an output whose changes come ``low`` to ``high`` clocks after their events."""
        periods, total = self.events.period, self.stimulus.periods
        breaks: list[tuple[int, int, str]] = [(begin, end, "reset") for begin, end in self.resets]
        breaks += [(stretch.begin, stretch.end, "carry" if stretch.known else "adopt") for stretch in opens]
        if not self.contract.reset:
            breaks.append((0, 0, "power-up" if self.stimulus.power_up else "adopt"))
        epochs: list[Epoch] = []
        building: Epoch | None = None
        for begin, end, kind in sorted(breaks):
            if building is not None and building.begin > begin + low and kind not in ("reset", "power-up"):
                # Begins before things were quiet again after the one before: both are one gap, unsure if either is.
                after = max(end, building.begin - high)
                quiet, event = self._quiet(after, low, high)
                base = "adopt" if "adopt" in (kind, building.base) else building.base
                building = Epoch(quiet, total - 1, event, len(periods), base, building.spread)
                continue
            if building is not None:
                # Events whose change may come only after the cut are left out with it.
                limit = begin if kind == "reset" else begin + low
                last = int(np.searchsorted(periods, limit - high, side="left"))
                stop = min(limit, int(periods[last]) + low) if last < len(periods) else limit
                epochs += self._closed(building, stop - 1, last)
            building = self._after(kind, end, low, high)
        if building is not None:
            epochs += self._closed(building, total - 1, len(periods))
        return tuple(epochs)

    @staticmethod
    def _closed(epoch: Epoch, end: int, last: int) -> list[Epoch]:
        return [replace(epoch, end=end, last=last)] if epoch.begin < end and epoch.first <= last else []

    def _after(self, kind: str, end: int, low: int, high: int) -> Epoch:
        """The epoch that begins after a break, open-ended."""
        periods, final, many = self.events.period, self.stimulus.periods - 1, len(self.events)
        if kind in ("carry", "adopt"):
            quiet, event = self._quiet(end, low, high)
            return Epoch(quiet, final, event, many, kind)
        settle = self.contract.start.settle
        near = np.searchsorted(periods, [end - settle if kind == "reset" else 0, end + settle])
        if near[0] != near[1]:
            # Released during motion: the edges from some moment on are counted, and that moment is the decoder's own.
            quiet, event = self._quiet(end + settle, low, high)
            sums = np.concatenate([[0], np.cumsum(self.events.step[near[0] : near[1]][::-1])])
            surely = int(self.events.step[near[1] : event].sum())
            return Epoch(quiet, final, event, many, "adopt", (int(sums.min()) + surely, int(sums.max()) + surely))
        event = int(near[1])
        if _state_before(self.events, self.stimulus, event) not in self.contract.start.rest_states:
            return Epoch(end + settle, final, event, many, "adopt")
        return Epoch(end, final, event, many, "start")

    def _quiet(self, after: int, low: int, high: int) -> tuple[int, int]:
        """The first period at which every event up to ``after`` has shown and no later one can have; and the next event."""
        periods = self.events.period
        event = int(np.searchsorted(periods, after, side="right"))
        begin = after + high
        while event < len(periods) and int(periods[event]) + low <= begin:
            begin = int(periods[event]) + high
            event += 1
        return begin, event


def _state_before(events: Events, stimulus: Stimulus, event: int) -> str:
    if event < len(events):
        code = int(events.before[event])
    elif len(events):
        code = int(events.after[-1])
    else:
        code = 2 * stimulus.lines["a"].first + stimulus.lines["b"].first
    return format(code, "02b")


def _direction(contract: Contract, events: Events, epochs: tuple[Epoch, ...]) -> Hold:
    """Levels of a direction output that always tells the last motion; free until it is sure of a new direction.

    An x1 or x2 decoder may take its direction from every state or only from where it counts: between the two it is free.
    """
    assert contract.direction is not None
    latency, forward = contract.latency.direction, contract.direction.forward_level
    rows: list[tuple[Int64s, ...]] = []
    for epoch in epochs:
        chosen = np.arange(epoch.first, epoch.last)
        chosen = chosen[(events.before[chosen] != events.after[chosen])]
        moved, sure = events.moved[chosen], events.step[chosen] != 0
        # The sign of the last sure event before or at each event, and whether every event since agrees with it.
        last_sure = np.maximum.accumulate(np.where(sure, np.arange(len(chosen)), -1))
        sign = np.where(last_sure >= 0, moved[np.maximum(last_sure, 0)], 0)
        against = np.cumsum(moved != sign)
        known = (last_sure >= 0) & (against == against[np.maximum(last_sure, 0)]) & ~events.open[chosen] & ~events.illegal[chosen]
        begin = events.period[chosen] + latency.max
        end = np.append(events.period[chosen][1:] + latency.min, epoch.end + 1)
        end = np.minimum(end, epoch.end + 1)
        begin = np.maximum(begin, epoch.begin)
        keep = known & (begin < end)
        level = np.where(sign > 0, forward, 1 - forward)
        rows.append((begin[keep], end[keep], level[keep], chosen[keep]))
    columns = list(zip(*rows, strict=True)) if rows else [(np.zeros(0, dtype=np.int64),)] * 4
    return Hold(*(np.concatenate(column).astype(np.int64) for column in columns))


def _sticky(contract: Contract, stimulus: Stimulus, events: Events, opens: list[Open], epochs: tuple[Epoch, ...]) -> Hold:
    """Levels of a sticky error: 1 from an illegal transition until cleared; unknown after what the contract leaves open."""
    by, clear = contract.latency.error, contract.latency.clear
    # (first period it may act, first period it surely has, level or None if unknown, event).
    acts: list[tuple[int, int, int | None, int]] = []
    for n in np.flatnonzero(events.illegal & ~events.open).tolist():
        at = int(events.period[n])
        acts.append((at + by.min, at + by.max, 1, n))
    acts += [(stretch.begin + by.min, stretch.end + by.max, None, -1) for stretch in opens if not stretch.known]
    changes = sample(stimulus.drives["clear"], stimulus.period_ps).period.tolist()
    sets = list(acts)
    for begin, end in zip(changes[::2], changes[1::2], strict=True):
        first, sure = begin + clear.min, end - 1 + clear.max
        # Set and clear together: which of them wins is not part of this contract.
        together = any(act[1] >= first and act[0] <= sure for act in sets)
        acts.append((first, sure, None if together else 0, -1))
    acts.sort(key=lambda act: act[:2])
    holds: list[tuple[int, int, int, int]] = []
    level: int | None = None
    event = -1
    for epoch in epochs:
        if epoch.base != "carry":
            level, event = (0 if epoch.base == "start" else None), -1
        since = epoch.begin
        for first, sure, new, cause in acts:
            if not (epoch.begin < sure and first <= epoch.end):
                continue
            if level is not None and since < first:
                holds.append((since, first, level, event))
            if new is not None and new == level:
                since = max(since, first)
                continue
            level, event, since = new, cause, max(sure, since)
        if level is not None and since <= epoch.end:
            holds.append((since, epoch.end + 1, level, event))
    return Hold(*np.array(holds, dtype=np.int64).reshape(-1, 4).T)
