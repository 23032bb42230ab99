"""The line oracle: from the levels a decoder samples and the contract, what its outputs may do.

It knows nothing of the shaft. Data flow: toggles → sampled changes per line → filtered changes per line → events of the
state AB → epochs (:mod:`tbkit.epochs`), that is stretches in which the contract ties every output change to an event.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tbkit.contract import Contract, Filter
from tbkit.encoder import Line
from tbkit.epochs import Activity, Cutter, Open, releases
from tbkit.expectation import Bools, Events, Expectation, Int64s
from tbkit.holds import direction_levels, sticky_levels
from tbkit.inputs import Acts, acts, within
from tbkit.latched import answers, shown
from tbkit.ordered import merged
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
    """Periods (inclusive) in which the filter's output is the decoder's own business.

    Attributes:
        begin, end: int64[n]; at ``end`` begins a level that surely passes, or stays.
        shortest: int64[n], clocks; no level that passes in or beside the doubt is shorter.
    """

    begin: Int64s
    end: Int64s
    shortest: Int64s

    def overlaps(self, begin: Int64s, end: Int64s) -> Bools:
        """Whether something is in doubt in each stretch from ``begin`` to ``end`` (inclusive)."""
        return np.searchsorted(self.begin, end, side="right") > np.searchsorted(self.end, begin, side="left")


_NONE = np.zeros(0, dtype=np.int64)
_NO_DOUBT = Doubt(_NONE, _NONE, _NONE)


def sample(line: Line, period_ps: int) -> Changes:
    """The levels at the ends of clock periods; pulses that no active edge sees are gone."""
    period = line.toggles_ps // period_ps
    if len(period) == 0:
        return Changes(line.first, period)
    last = np.flatnonzero(np.append(period[1:] != period[:-1], True))
    odd = (last + 1) & 1
    changed = odd != np.concatenate([[0], odd[:-1]])
    return Changes(line.first, period[last][changed])


def filtered(sampled: Changes, rules: Filter, spread: int = 0) -> tuple[Changes, Doubt]:
    """What surely passes the filter, and where it is free to pass something or not.

    A change that passes is placed where the lasting level began, since latency counts from there. ``spread`` (clocks) is how
    much later than the earliest one a change may come through.
    """
    begin = sampled.period
    if len(begin) == 0 or rules.passes == 1:
        return sampled, _NO_DOUBT
    length = np.diff(begin, append=_NEVER)
    level = sampled.first ^ ((np.arange(len(begin)) + 1) & 1)
    # The last run lasts for ever, so that every run has a lasting one at or after it.
    lasting = np.flatnonzero(length >= rules.passes)
    level_before = np.concatenate([[sampled.first], level[lasting]])
    passes = lasting[level[lasting] != level_before[:-1]]
    # The filter's output while run i is on, if nothing in doubt got through: that of the last lasting run before it.
    after = np.searchsorted(lasting, np.arange(len(begin)), side="left")
    against = level != level_before[after]
    short = length < rules.passes
    free = short & (length > rules.rejects) & against
    if rules.bursts_open:
        # Only a single pulse is surely rejected; what comes of several with short gaps depends on how the filter adds up.
        free |= short & np.append(short[1:], False)
    free_at = np.flatnonzero(free)
    # What may pass leaves everything open up to the next level that lasts, which then brings a change or not.
    if len(free_at) == 0:
        return Changes(sampled.first, begin[passes]), _NO_DOUBT
    until = after
    if rules.bursts_open and spread:
        # Such a filter may still be busy with a burst when the next level begins, and take that level late, and the next
        # one for that, until one lasts for so much longer: till then the line may be overtaken by the other one.
        calm = np.flatnonzero(length[lasting] >= rules.passes + spread)
        until = calm[np.searchsorted(calm, after, side="left")]
    first = free_at[np.append(True, until[free_at][1:] != until[free_at][:-1])]
    last = lasting[until[first]]
    if rules.bursts_open:
        shortest = np.ones(len(first), dtype=np.int64)
    else:
        before = np.append(0, lasting)[after[first]]
        passing = np.append(np.where(length > rules.rejects, length, _NEVER), _NEVER)
        shortest = np.minimum.reduceat(passing, np.stack([before, last + 1], axis=1).ravel())[::2]
    return Changes(sampled.first, begin[passes]), Doubt(begin[first], begin[last], shortest)


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
    for before, move in enumerate(contract.illegal_moves or ()):
        table[before, before ^ 0b11] = move
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


@dataclass(frozen=True, slots=True)
class _Lines:
    """A, B and index behind the filter, and where the filter is free."""

    a: Changes
    b: Changes
    index: Changes
    doubt_a: Doubt
    doubt_b: Doubt
    doubt_index: Doubt


def _index_zones(contract: Contract, lines: _Lines) -> list[tuple[int, int]]:
    """The periods (both ends included) in which the index is active, armed or not."""
    # From before the first change on: it may be active from the beginning.
    period = np.append(-1, merged(lines.a.period, lines.b.period, lines.index.period))
    active = _index_active(contract, *(line.level(period) for line in (lines.a, lines.b, lines.index)))
    begins = np.flatnonzero(active & ~np.append(False, active[:-1]))
    ends = np.flatnonzero(active & ~np.append(active[1:], False))
    last = np.append(period[1:], _NEVER) - 1
    return list(zip(period[begins].tolist(), last[ends].tolist(), strict=True))


def _still(line: Changes, doubt: Doubt, begin: Int64s, end: Int64s) -> Bools:
    """Whether a line surely has one level in each stretch of periods (inclusive)."""
    span = np.searchsorted(line.period, [begin, end + 1])
    return np.asarray((span[0] == span[1]) & ~doubt.overlaps(begin, end))


def _opens(contract: Contract, lines: _Lines) -> list[Open]:
    """Where a pulse the filter is free to pass, or a state too short to be followed, leaves the contract open."""
    opens: list[Open] = []
    # Where the latency has a range, a pulse that may pass can be seen that much longer than it lasts.
    reach = contract.shortest_state - 1 + contract.latency.count.max - contract.latency.count.min
    for other, doubt_other, doubt in ((lines.b, lines.doubt_b, lines.doubt_a), (lines.a, lines.doubt_a, lines.doubt_b)):
        # With the other line still this long, the doubtful pulse is a legal there-and-back at most.
        known = _still(other, doubt_other, doubt.begin - reach, doubt.end + reach)
        known &= doubt.shortest >= contract.shortest_state
        if contract.index is not None:
            off = lines.index.level(doubt.begin) == 0
            known &= off & _still(lines.index, lines.doubt_index, doubt.begin - reach, doubt.end + reach)
        opens += [Open(*row) for row in zip(doubt.begin.tolist(), doubt.end.tolist(), known.tolist(), strict=True)]
    if contract.index is not None:
        doubt = lines.doubt_index
        matters = np.ones(len(doubt.begin), dtype=bool)
        for line, doubt_line, level in (
            (lines.a, lines.doubt_a, contract.index.a),
            (lines.b, lines.doubt_b, contract.index.b),
        ):
            if level is not None:
                shut = (line.level(doubt.begin) != level) & _still(line, doubt_line, doubt.begin - reach, doubt.end + reach)
                matters &= ~shut
        opens += [
            Open(begin, end, False) for begin, end in zip(doubt.begin[matters].tolist(), doubt.end[matters].tolist(), strict=True)
        ]
    states = merged(lines.a.period, lines.b.period)
    hasty = np.flatnonzero(np.diff(states) < contract.shortest_state)
    return opens + [Open(int(states[n]), int(states[n + 1]), False) for n in hasty]


def _unordered(contract: Contract, events: Events) -> list[Open]:
    """Where count and index answer with such different latencies that their order, and so the count, is open."""
    latency, gate = contract.latency, contract.index
    if gate is None or gate.action != "set":
        return []
    acting = np.flatnonzero((events.step != 0) | events.enters_index)
    period, zeroed, stepped = events.period[acting], events.enters_index[acting], events.step[acting] != 0
    never = np.iinfo(np.int64).max // 4
    earliest = period + np.minimum(np.where(zeroed, latency.index.min, never), np.where(stepped, latency.count.min, never))
    latest = period + np.maximum(np.where(zeroed, latency.index.max, 0), np.where(stepped, latency.count.max, 0))
    close = np.flatnonzero((latest[:-1] >= earliest[1:]) & (zeroed[1:] | zeroed[:-1]))
    return [Open(int(period[n]), int(period[n + 1]), False) for n in close]


def _filter_lines(contract: Contract, sampled: dict[str, Changes]) -> _Lines:
    count = contract.latency.count
    (a, doubt_a), (b, doubt_b), (z, doubt_z) = (
        filtered(sampled[name], contract.filter, latency.max - latency.min)
        for name, latency in (("a", count), ("b", count), ("index", contract.latency.index))
    )
    if contract.index is None:
        z, doubt_z = Changes(0, _NONE), _NO_DOUBT
    return _Lines(a, b, z, doubt_a, doubt_b, doubt_z)


def make_events(contract: Contract, lines: _Lines, opens: list[Open], by_inputs: Acts) -> Events:
    """Merge the filtered lines, and what inputs do, into events; ``opens``: where the contract leaves open what happens."""
    unsure = np.array([(stretch.begin, stretch.end) for stretch in opens if not stretch.known], dtype=np.int64).reshape(-1, 2)
    period = merged(lines.a.period, lines.b.period, lines.index.period, unsure[:, 0], by_inputs.begins())
    after_a, after_b, after_z = (line.level(period) for line in (lines.a, lines.b, lines.index))
    before_a, before_b, before_z = (line.level(period - 1) for line in (lines.a, lines.b, lines.index))
    before, after = 2 * before_a + before_b, 2 * after_a + after_b
    active = _index_active(contract, after_a, after_b, after_z) & ~within(period, by_inputs.disarmed)
    active_before = _index_active(contract, before_a, before_b, before_z) & ~within(period - 1, by_inputs.disarmed)
    enters, leaves = active & ~active_before, active_before & ~active
    # +1 where a stretch begins, -1 behind its end: above 0 inside.
    edges = np.zeros(len(period) + 1, dtype=np.int64)
    np.add.at(edges, np.searchsorted(period, unsure[:, 0]), 1)
    np.add.at(edges, np.searchsorted(period, unsure[:, 1], side="right"), -1)
    step = np.where(within(period, by_inputs.disabled), 0, _count_table(contract)[before, after])
    sets, to, by_input = np.zeros_like(active), np.zeros_like(step), np.zeros_like(active)
    index = contract.index
    if index is not None and index.action == "set":
        sets = enters if index.edge else active
        to = np.full_like(step, index.value) + (step if index.counts_last else 0)
    for begin, end, one in by_inputs.sets:
        here = within(period, ((begin, end),))
        sets, by_input = sets | here, by_input | here
        to = np.where(here, one.value + (step if one.counts_last else 0), to)
    return Events(
        period,
        before,
        after,
        _moved_table(contract)[before, after],
        step,
        (before ^ after) == 0b11,
        sets,
        to,
        by_input,
        enters,
        leaves,
        np.cumsum(edges)[:-1] > 0,
    )


def _clashes(contract: Contract, lines: _Lines, by_inputs: Acts) -> list[Open]:
    """Where the index and an input act at once, or the index is active as it is armed: what comes of that is open."""
    index = contract.index
    if index is None:
        return []
    found: list[Open] = []
    spans = [(begin, end) for begin, end, _ in by_inputs.sets] + list(by_inputs.disabled)
    if index.edge or index.action != "set":
        spans += [(end, end + 1) for _, end in by_inputs.disarmed]
    for begin, end in spans:
        near = np.arange(begin - 1, end + 1)
        if _index_active(contract, lines.a.level(near), lines.b.level(near), lines.index.level(near)).any():
            found.append(Open(begin - 1, end, known=False))
    return found


def expect(contract: Contract, stimulus: Stimulus) -> Expectation:
    """What the contract allows for this stimulus."""
    sampled = {name: sample(line, stimulus.period_ps) for name, line in stimulus.lines.items()}
    lines = _filter_lines(contract, sampled)
    doubts = _opens(contract, lines)
    by_inputs = acts(contract, lambda deed: _asserted(stimulus, deed), _index_zones(contract, lines), doubts, stimulus.periods)
    opens = sorted([*doubts, *by_inputs.opens, *_clashes(contract, lines, by_inputs)])
    events = make_events(contract, lines, opens, by_inputs)
    unordered = _unordered(contract, events)
    if unordered:
        events = make_events(contract, lines, opens + unordered, by_inputs)
    # Beside the count nothing is said of what a decoder does while it is disabled.
    wide = sorted([*opens, *by_inputs.others])
    spans = _asserted(stimulus, "reset") if contract.reset else [(0, 0)] if stimulus.power_up else []
    names = ("a", "b", "index") if contract.index is not None else ("a", "b")
    activity = Activity(
        tuple(sampled[name].period for name in names),
        merged(*(sampled[name].period for name in names)),
        merged(lines.a.period, lines.b.period, lines.index.period),
    )
    ends = np.array([end for _, end in spans], dtype=np.int64)
    index_on = _index_active(contract, lines.a.level(ends), lines.b.level(ends), lines.index.level(ends))
    released = releases(contract, stimulus, events, spans, activity, ends[index_on], [span[:2] for span in by_inputs.sets])
    cutter = Cutter(contract, events, released, activity, stimulus.periods)
    latency = contract.latency
    jumps = [] if contract.illegal_holds else [Open(int(k), int(k), False) for k in events.period[events.illegal]]
    # Whether a step output tells a move that is none of the shaft's, the contract does not say.
    step_epochs = cutter.cut(wide + jumps, latency.step.min, latency.step.max)
    rebases = jumps if contract.illegal_moves is None else []
    epochs = step_epochs
    if contract.count:
        moving = [latency.count, latency.index] if contract.index and contract.index.action == "set" else [latency.count]
        epochs = cutter.cut(opens + rebases + unordered, min(span.min for span in moving), max(span.max for span in moving))
    answered = None
    if contract.input("latch"):
        answered = answers(contract, _asserted(stimulus, "latch"))
        epochs = shown(epochs, events, contract, answered)
    direction = sticky = None
    if contract.direction and not contract.direction.with_count:
        direction = direction_levels(contract, events, cutter.cut(wide, latency.direction.min, latency.direction.max))
    if contract.error and contract.error.sticky:
        clears = _asserted(stimulus, "clear")
        sticky = sticky_levels(contract, events, wide, released, clears, stimulus.periods)
    compared = sum(epoch.end - epoch.begin for epoch in epochs)
    return Expectation(
        events,
        epochs,
        step_epochs,
        cutter.cut(wide, latency.error.min, latency.error.max),
        cutter.cut(wide, latency.index.min, latency.index.max) if contract.index else (),
        direction,
        sticky,
        stimulus.periods - compared,
        answered,
    )


def _asserted(stimulus: Stimulus, name: str) -> list[tuple[int, int]]:
    """(first period asserted, first period released) of an input, each time."""
    changes = sample(stimulus.drives[name], stimulus.period_ps)
    periods = changes.period.tolist()
    if changes.first:
        periods = [0, *periods]
    if len(periods) % 2:
        periods.append(stimulus.periods)
    return list(zip(periods[::2], periods[1::2], strict=True))
