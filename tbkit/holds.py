"""Levels that outputs must keep: a direction that is always valid, and a sticky error."""

from __future__ import annotations

import numpy as np

from tbkit.contract import Contract
from tbkit.epochs import Open, Release
from tbkit.expectation import Epoch, Events, Hold, Int64s


def direction_levels(contract: Contract, events: Events, epochs: tuple[Epoch, ...]) -> Hold:
    """Levels of a direction output that always tells the last motion; free until it is sure of a new direction.

    An x1 or x2 decoder may take its direction from every state or only from where it counts: between the two it is free.
    """
    assert contract.direction is not None
    latency, forward = contract.latency.direction, contract.direction.forward_level
    rows: list[tuple[Int64s, ...]] = []
    for epoch in epochs:
        chosen = np.arange(epoch.first, epoch.last)
        chosen = chosen[events.before[chosen] != events.after[chosen]]
        moved = events.moved[chosen]
        sure = (events.step[chosen] != 0) & (moved != 0)
        # The sign of the last sure event before or at each event, and whether every event since agrees with it.
        last_sure = np.maximum.accumulate(np.where(sure, np.arange(len(chosen)), -1))
        sign = np.where(last_sure >= 0, moved[np.maximum(last_sure, 0)], 0)
        against = np.cumsum(moved != sign)
        known = (last_sure >= 0) & (against == against[np.maximum(last_sure, 0)])
        begin = np.maximum(events.period[chosen] + latency.max, epoch.begin)
        end = np.minimum(np.append(events.period[chosen][1:] + latency.min, epoch.end + 1), epoch.end + 1)
        keep = known & (begin < end)
        level = np.where(sign > 0, forward, 1 - forward)
        rows.append((begin[keep], end[keep], level[keep], chosen[keep]))
    columns = list(zip(*rows, strict=True)) if rows else [(np.zeros(0, dtype=np.int64),)] * 4
    return Hold(*(np.concatenate(column).astype(np.int64) for column in columns))


def sticky_levels(
    contract: Contract, events: Events, opens: list[Open], released: list[Release], clears: list[tuple[int, int]], periods: int
) -> Hold:
    """Levels of a sticky error: 1 from an illegal transition until cleared; unknown after what the contract leaves open.

    ``clears``: (first period asserted, first period not asserted).
    """
    assert contract.error is not None
    by, clear, wins = contract.latency.error, contract.latency.clear, contract.error.wins
    illegal = np.flatnonzero(events.illegal & ~events.open)
    unsure = [stretch for stretch in opens if not stretch.known]
    # First and last cause, first period it may act, first period it surely has, level (-1: unknown), event.
    rows = [(k, k, k + by.min, k + by.max, 1, n) for k, n in zip(events.period[illegal].tolist(), illegal.tolist(), strict=True)]
    rows += [(s.begin, s.end, s.begin + by.min, s.end + by.max, -1, -1) for s in unsure]
    sets = np.array(rows, dtype=np.int64).reshape(-1, 6)
    cleared: list[tuple[int, ...]] = []
    for begin, end in clears:
        first, sure = begin + clear.min, end - 1 + clear.max
        together = (sets[:, 3] >= first) & (sets[:, 2] <= sure)
        if wins != "either" and by.exact and clear.exact and (sets[together, 4] == 1).all():
            # What is set while the clear lasts is cleared again, or never set; only with its end the two are at once.
            within = sets[together & (sets[:, 2] < sure)]
            sets = sets[~together | ((sets[:, 2] == sure) & (wins == "set"))]
            if wins == "set":
                # For a clock it is seen.
                cleared += [(k, k, at, at, -1, -1) for k, at in within[:, [0, 2]].tolist()]
                cleared += [(k, k, at + 1, at + 1, 0, -1) for k, at in within[:, [0, 2]].tolist()]
            cleared.append((begin, end - 1, first, sure, 0, -1))
        else:
            # Which of them wins is not part of this contract.
            sets[together, 4] = -1
            cleared.append((begin, end - 1, first, sure, -1 if together.any() else 0, -1))
    acts = np.concatenate([sets, np.array(cleared, dtype=np.int64).reshape(-1, 6)])
    for r in released:
        # What happens during a reset is nothing; what was on its way when it began does not arrive.
        acts = acts[~((acts[:, 0] >= r.begin) & (acts[:, 1] < r.end))]
        # Right after it some decoders are not awake yet.
        acts[(acts[:, 0] >= r.end) & (acts[:, 0] <= r.awake) & (acts[:, 5] >= 0), 4] = -1
        acts[:, 3] = np.where((acts[:, 1] < r.begin) & (acts[:, 3] > r.begin), r.begin, acts[:, 3])
        acts = acts[~((acts[:, 1] < r.begin) & (acts[:, 2] >= r.begin))]
    steps = acts[:, 2:].tolist() + [[r.begin, r.end, 0 if r.how in ("rest", "index") else -1, -1] for r in released]
    holds: list[tuple[int, int, int, int]] = []
    level, event, since = -1, -1, 0
    for first, sure, new, cause in sorted(steps):
        if level >= 0 and since < first:
            holds.append((since, first, level, event))
        if new == level:
            since = max(since, first)
        else:
            level, event, since = new, cause, max(sure, since)
    if level >= 0 and since < periods:
        holds.append((since, periods, level, event))
    return Hold(*np.array(holds, dtype=np.int64).reshape(-1, 4).T)
