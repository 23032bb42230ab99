"""What the inputs acted on do to the events of the lines.

An input takes effect in its own latency and a line in another, so an input's times are shifted to those of the lines whose
effect it meets: what an input does in period k meets the line event of period k. Where a latency has a range, which of
them meet is open.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from tbkit.contract import DEEDS, Contract, Input
from tbkit.epochs import Open
from tbkit.expectation import Bools, Int64s

Spans = list[tuple[int, int]]


@dataclass(frozen=True, slots=True)
class Acts:
    """Periods of the lines (the end not included) in which inputs act.

    Attributes:
        sets: when the count is set, and by which input.
        disabled: when steps are not counted.
        disarmed: when the index does nothing.
        opens: when it is not sure what counts.
        others: when nothing is said of the outputs beside the count.
    """

    sets: tuple[tuple[int, int, Input], ...] = ()
    disabled: tuple[tuple[int, int], ...] = ()
    disarmed: tuple[tuple[int, int], ...] = ()
    opens: tuple[Open, ...] = ()
    others: tuple[Open, ...] = ()

    def begins(self) -> Int64s:
        """When something begins or ends to act though no line changes."""
        times = [begin for begin, _, _ in self.sets] + [time for span in self.disarmed for time in span]
        return np.array(sorted(times), dtype=np.int64)


def within(periods: Int64s, spans: tuple[tuple[int, int], ...]) -> Bools:
    """Whether each period lies in one of the spans."""
    inside = np.zeros(len(periods), dtype=bool)
    for begin, end in spans:
        inside |= (periods >= begin) & (periods < end)
    return inside


def acts(contract: Contract, asserted: Callable[[str], Spans]) -> Acts:
    """What inputs do; ``asserted`` gives the periods in which a deed of :data:`DEEDS` is on, the end not included."""
    by, main, index = contract.latency.inputs, contract.main_latency, contract.latency.index
    sets: list[tuple[int, int, Input]] = []
    disabled: Spans = []
    disarmed: Spans = []
    opens: list[Open] = []
    others: list[Open] = []
    for deed, role in DEEDS.items():
        one = contract.input(role)
        if one is None or role == "clear-error":
            continue
        met = index if role == "arm" else main
        for begin, end in asserted(deed):
            last = begin if one.edge else end - 1
            unsure = Open(begin + by.min - met.max, last + by.max - met.min, known=False)
            shift = by.min - met.min
            if not (by.exact and met.exact):
                opens.append(unsure)
            elif role == "arm":
                disarmed.append((begin + shift, end + shift))
            elif role == "enable":
                disabled.append((begin + shift, end + shift))
            else:
                sets.append((begin + shift, last + 1 + shift, one))
            if role == "enable":
                (others if one.resyncs else opens).append(Open(unsure.begin - 1, unsure.end + 1, known=False))
    # Of two inputs at once, and of one that sets the count while it is disabled, the contract does not say which wins.
    spans = [*((begin, end, one.role) for begin, end, one in sets), *((begin, end, "enable") for begin, end in disabled)]
    for n, (begin, end, role) in enumerate(sorted(spans)):
        for other_begin, other_end, other in sorted(spans)[n + 1 :]:
            if other_begin > end:
                break
            if other != role:
                opens.append(Open(begin, max(end, other_end), known=False))
    return Acts(tuple(sets), tuple(disabled), tuple(disarmed), tuple(opens), tuple(others))
