"""What the inputs acted on do to the events of the lines.

An input takes effect in its own latency and a line in another, so an input's times are shifted to those of the lines whose
effect it meets: what an input does in period k meets the line event of period k. Where a latency has a range, which of
them meet is open.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
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


def _armed_once(
    presses: Spans, zones: Spans, resets: Spans, doubts: Sequence[Open], periods: int, *, fresh: bool
) -> tuple[Spans, list[Open]]:
    """When the index does nothing, and where that is open, if each press of an input lets it act once.

    Not said is what comes of a press in a reset or while the index is active already, and whether an index that acts while the
    press still lasts has used it up. ``doubts``: where it is not sure whether the index is active. Not ``fresh``: it may be armed
    from what was played before.
    """
    disarmed: Spans = []
    opens: list[Open] = []
    state, since, held = "off" if fresh else "maybe", 0, 0
    moments = [(begin, 0, end) for begin, end in resets] + [(begin, 1, end) for begin, end in presses]
    moments += [(begin, 2, end) for begin, end in zones] + [(doubt.begin, 3, doubt.end) for doubt in doubts if not doubt.known]
    for begin, what, end in sorted(moments):
        if what == 0:
            since = since if state == "off" else begin
            state = "off"
        elif what == 1:
            if state == "off":
                disarmed.append((since, begin))
            clash = any(first <= end and begin <= last for first, last in (*resets, *zones))
            state, held = "maybe" if clash else "on", end
        elif what == 3 and state == "on":
            state = "maybe"
        elif what == 2 and state != "off":
            if state == "maybe":
                opens.append(Open(begin, begin, known=False))
            state, since = ("maybe", since) if begin < held else ("off", begin + 1)
    if state == "off":
        disarmed.append((since, periods))
    return disarmed, opens


def acts(contract: Contract, asserted: Callable[[str], Spans], zones: Spans, doubts: Sequence[Open], periods: int) -> Acts:
    """What inputs do in a run of ``periods``.

    ``asserted`` gives the periods in which the reset or a deed of :data:`DEEDS` is on, the end not included; ``zones``: those in
    which the index is active, armed or not, both ends included; ``doubts``: where the lines are not sure.
    """
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
        if role == "arm-once":
            shift = by.min - index.min
            presses = [(begin + shift, end + shift) for begin, end in asserted(deed)]
            settle = contract.start.settle
            resets = [(begin, end + settle) for begin, end in asserted("reset")] if contract.reset else []
            fresh = contract.reset is not None
            idle, unsure_of = _armed_once(presses, zones, resets, doubts, periods, fresh=fresh)
            disarmed += idle
            opens += unsure_of
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
