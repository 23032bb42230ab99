"""A count that is read through a latch: its port shows what the count was when it was last asked for.

The bench asks again and again (:func:`tbkit.stimulus.compile_stimulus`). What the count itself does at a clock shows at the first
answer from that clock on, and several steps may show at once.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tbkit.contract import Contract
from tbkit.expectation import Epoch, Events, Int64s


def answers(contract: Contract, asked: list[tuple[int, int]]) -> Int64s:
    """int64[n]: the periods from which on the port shows what the count is then.

    ``asked``: (first period in which the latch input is asserted, first in which it is not).
    """
    latch = contract.input("latch")
    once = latch is not None and latch.edge
    times = [np.arange(begin, begin + 1 if once else end) for begin, end in asked]
    return np.concatenate([np.zeros(0, dtype=np.int64), *times]) + contract.latency.inputs.min


def shown(epochs: tuple[Epoch, ...], events: Events, contract: Contract, answered: Int64s) -> tuple[Epoch, ...]:
    """The epochs as the port shows them: each begins with the first answer in it."""
    found: list[Epoch] = []
    lost = False
    for epoch in epochs:
        # While a reset lasts it may be the reset that the port shows.
        awake = epoch.begin + (contract.latency.inputs.min if epoch.base == "start" else 0)
        n = int(np.searchsorted(answered, awake))
        if n == len(answered) or answered[n] >= epoch.end:
            lost |= epoch.base != "carry"
            continue
        begin = int(answered[n])
        first = max(epoch.first, int(np.searchsorted(events.period, begin - contract.latency.count.min, side="right")))
        if first == epoch.first:
            base, allowed = epoch.base, epoch.allowed
        else:
            # Steps have shown with it already.
            base, allowed = "carry" if epoch.base == "carry" else "adopt", None
        base = "adopt" if base == "carry" and lost else base
        lost = False
        found.append(replace(epoch, begin=begin, first=first, last=max(first, epoch.last), base=base, allowed=allowed))
    return tuple(found)
