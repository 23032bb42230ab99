"""Which of the behaviours that a contract declares a run has exercised.

A pass says nothing of what was never tried: what a contract declares and no profile did is told.
"""

from __future__ import annotations

from collections import Counter

import numpy as np

from tbkit.contract import A_LEADS_B, DEEDS, Contract
from tbkit.expectation import Expectation
from tbkit.lineoracle import sample
from tbkit.stimulus import Stimulus
from tbkit.trace import Trace

#: The roles of inputs by the deed that exercises them.
_DEEDS = {"latch": "latch", **{role: deed for deed, role in DEEDS.items()}}


def declared(contract: Contract) -> tuple[str, ...]:
    """Every behaviour that the contract declares, in words."""
    found = ["motion forward", "motion backward"]
    found += [f"reversal in {state}, {way}" for state in A_LEADS_B for way in ("from forward", "from backward")]
    if contract.count:
        found += ["upper end of the count", "lower end of the count"]
    if contract.error or contract.illegal_moves is not None:
        found += [f"illegal transition from {state}" for state in A_LEADS_B]
    if contract.index:
        found += ["index entered forward", "index entered backward"]
    if contract.filter.rejects:
        found += ["pulse that the filter rejects"]
    if contract.reset:
        found += [f"reset released in {state}" for state in contract.start.rest_states] + ["reset released in motion"]
    found += [f"{one.role} input" for one in contract.inputs]
    together = ("clear-count", "preload", "latch")
    found += [f"{one.role} input in the clock of a step" for one in contract.inputs if one.role in together]
    return tuple(found)


def exercised(contract: Contract, stimulus: Stimulus, expectation: Expectation, trace: Trace) -> Counter[str]:
    """How often one run has exercised each behaviour; only what is not left open counts."""
    events, seen = expectation.events, Counter[str]()
    sure = ~events.open
    seen["motion forward"], seen["motion backward"] = (int((sure & (events.moved == way)).sum()) for way in (1, -1))
    moving = np.flatnonzero(sure & (events.moved != 0))
    turned = moving[1:][events.moved[moving[1:]] == -events.moved[moving[:-1]]]
    for event in turned.tolist():
        way = "from backward" if events.moved[event] > 0 else "from forward"
        seen[f"reversal in {int(events.before[event]):02b}, {way}"] += 1
    for event in np.flatnonzero(sure & events.illegal).tolist():
        seen[f"illegal transition from {int(events.before[event]):02b}"] += 1
    for event in np.flatnonzero(sure & events.enters_index & (events.moved != 0)).tolist():
        seen[f"index entered {'forward' if events.moved[event] > 0 else 'backward'}"] += 1
    if contract.count and trace.count is not None:
        seen["upper end of the count"] = int((trace.count.value == _as_seen(contract.count.highest)).sum())
        seen["lower end of the count"] = int((trace.count.value == _as_seen(contract.count.lowest)).sum())
    if contract.filter.rejects:
        shortest = [np.diff(line.toggles_ps) for line in stimulus.lines.values()]
        seen["pulse that the filter rejects"] = sum(
            int((one <= contract.filter.rejects * stimulus.period_ps).sum()) for one in shortest
        )
    if contract.reset:
        seen.update(_released(contract, stimulus))
    for one in contract.inputs:
        seen[f"{one.role} input"] = len(stimulus.drives[_DEEDS[one.role]].toggles_ps) // 2
        if one.role in ("clear-count", "preload"):
            together = sure & events.by_input & (events.moved != 0) & (events.to == one.value)
            seen[f"{one.role} input in the clock of a step"] = int(together.sum())
        if expectation.answered is not None and one.role == "latch":
            at_once = np.isin(events.period[sure & (events.step != 0)] + contract.latency.count.min, expectation.answered)
            seen["latch input in the clock of a step"] = int(at_once.sum())
    return seen


def _as_seen(count: int) -> int:
    """Traces hold int64."""
    return count - (1 << 64) if count >= 1 << 63 else count


def _released(contract: Contract, stimulus: Stimulus) -> Counter[str]:
    """In which states of the lines, or in motion, reset was released."""
    found: Counter[str] = Counter()
    lines = [sample(stimulus.lines[name], stimulus.period_ps) for name in ("a", "b")]
    reset = stimulus.drives["reset"]
    near = contract.settle_clocks
    for time_ps in reset.toggles_ps[1 - reset.first :: 2].tolist():
        period = time_ps // stimulus.period_ps
        moves = any(((line.period > period - near) & (line.period < period + near)).any() for line in lines)
        state = "".join(str(int(line.level(np.array([period]))[0])) for line in lines)
        found["reset released in motion" if moves else f"reset released in {state}"] += 1
    return found
