"""The shaft oracle: at every rest the count is where the shaft truly is, whatever the lines did on the way.

It knows nothing of sampling, filtering or latency and shares no code with the line oracle; of the decoder's limits it knows
only how long a state and a level have to last. It is silent once the shaft is faster than that, or the lines stop telling
where it is, until a reset at rest or the index gives a new origin.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, floor

import numpy as np
import numpy.typing as npt

from tbkit.contract import A_LEADS_B, DEEDS, Contract, Count
from tbkit.motion import Int64s
from tbkit.ordered import merged
from tbkit.stimulus import Stimulus


@dataclass(frozen=True, slots=True)
class Rests:
    """At the end of clock period ``period[i]`` all lines have been still for long and the count is ``count[i]``."""

    period: Int64s
    count: Int64s


def _counted(count: Count, place: Int64s) -> Int64s:
    """The ideal count at each shaft position (whole states), up to a constant."""
    forward = place if count.a_leads_forward else -place
    if count.states_per_count == 1:
        return forward
    order = list(A_LEADS_B) if count.a_leads_forward else [A_LEADS_B[0], *reversed(A_LEADS_B[1:])]
    return (forward - order.index(count.at)) // count.states_per_count


def _gated(contract: Contract, stimulus: Stimulus, place: Int64s) -> Int64s:
    """1 where the index zeroes the count at that position, 0 where it does not, -1 where it depends on the instant."""
    windows, index = stimulus.ideal.windows, contract.index
    inside = np.zeros(len(place), dtype=bool)
    if not windows or index is None or index.action != "set":
        return inside.astype(np.int64)
    # Edges that are not where A and B have theirs, or are not seen together, may come up to a state earlier or later.
    whole = stimulus.ideal.exact_index and not stimulus.aperture_ps
    spare = 0 if whole else 1
    for window in windows:
        into = (place - floor(window.begin) + spare) % window.every
        inside |= into < ceil(window.end) - floor(window.begin) + 2 * spare
    if not whole:
        return -inside.astype(np.int64)
    states = np.array([[int(level) for level in state] for state in A_LEADS_B])[place % 4]
    if index.a is not None:
        inside &= states[:, 0] == index.a
    if index.b is not None:
        inside &= states[:, 1] == index.b
    return inside.astype(np.int64)


def rests(contract: Contract, stimulus: Stimulus, doubtful_ps: Int64s) -> Rests:
    """Every rest at which the shaft tells the count; ``doubtful_ps``: when an illegal transition was meant to happen."""
    none = np.zeros(0, dtype=np.int64)
    count = contract.count
    if count is None:
        return Rests(none, none)
    period_ps = stimulus.period_ps
    ledger = stimulus.ideal.ledger
    first = floor(stimulus.ideal.first_states)
    place = np.concatenate([[first], np.where(ledger.up, ledger.number, ledger.number - 1)])
    since_ps = np.concatenate([[0], ledger.time_ps])
    # Where the shaft jumps it is nowhere in between.
    lasts = np.append(since_ps[1:] != since_ps[:-1], True)
    place, since_ps = place[lasts], since_ps[lasts]
    counted, gated = _counted(count, place), _gated(contract, stimulus, place)
    hurried_ps = _hurried(contract, stimulus)
    seen_ps = contract.filter.passes * period_ps + stimulus.aperture_ps
    for begin_ps, end_ps in _short(stimulus.ideal.lines["index"].toggles_ps, seen_ps).tolist():
        # An index pulse, or a gap between two, that need not be seen.
        gated = np.where((gated == 1) & (since_ps >= begin_ps) & (since_ps <= end_ps), -1, gated)

    quiet_ps = contract.settle_clocks * period_ps
    # Reading the count is no act.
    driven = [line for name, line in stimulus.drives.items() if name != "latch"]
    acting = [line.toggles_ps for line in (*stimulus.lines.values(), *driven)]
    # The shaft as well: chatter can delay the first edge that is seen of a motion.
    moves = merged(*acting, ledger.time_ps)
    ends = np.append(moves[1:], stimulus.periods * period_ps)
    still = ends - moves > quiet_ps + period_ps
    check_ps = ends[still] // period_ps * period_ps - 1

    # A disturbance may go on disturbing, so what is lost to one is lost for good.
    good = check_ps < (stimulus.lost_ps if stimulus.lost_ps is not None else np.iinfo(np.int64).max)
    # Within a pulse that lasts for long the lines are still, but show another state: no rest of the shaft's.
    good &= _truthful(stimulus, place[np.searchsorted(since_ps, check_ps, side="right") - 1], check_ps)
    origins = _origins(contract, stimulus, place, since_ps, counted, gated, quiet_ps)
    origins += [_Origin(int(time), None, 0) for time in [*doubtful_ps.tolist(), *hurried_ps.tolist()]]
    origins.sort(key=lambda origin: origin.time_ps)
    times = np.array([origin.time_ps for origin in origins], dtype=np.int64)
    found: list[tuple[int, int]] = []
    for at_ps in check_ps[good].tolist():
        turn = int(np.searchsorted(times, at_ps, side="right")) - 1
        if turn < 0:
            continue
        origin_ps, value, ideal = origins[turn].time_ps, origins[turn].count, origins[turn].ideal
        if value is None:
            continue
        begin, end = np.searchsorted(since_ps, [origin_ps, at_ps], side="right").tolist()
        if count.overflow == "hold":
            path = value + counted[begin - 1 : end] - ideal
            if path.min() < count.lowest or path.max() > count.highest:
                continue
        here = value + int(counted[end - 1]) - ideal
        here = (here - count.lowest) % count.size + count.lowest
        found.append((at_ps // period_ps, here - (1 << 64) if here >= 1 << 63 else here))
    table = np.array(found, dtype=np.int64).reshape(-1, 2)
    return Rests(table[:, 0], table[:, 1])


def _truthful(stimulus: Stimulus, place: Int64s, at_ps: Int64s) -> npt.NDArray[np.bool_]:
    """Whether A and B show the state of the shaft, which is at ``place`` (whole states) at those times."""
    states = np.array([[int(level) for level in state] for state in A_LEADS_B])[place % 4]
    right = np.ones(len(place), dtype=bool)
    for column, line in enumerate((stimulus.lines["a"], stimulus.lines["b"])):
        level = line.first ^ (np.searchsorted(line.toggles_ps, at_ps, side="right") & 1)
        right &= level == states[:, column]
    return right


def _short(toggles_ps: Int64s, least_ps: int) -> Int64s:
    """int64[n, 2]: (begin, end) of every level that lasts less than ``least_ps``."""
    short = np.flatnonzero(np.diff(toggles_ps) < least_ps)
    return np.stack([toggles_ps[short], toggles_ps[short + 1]], axis=1)


def _hurried(contract: Contract, stimulus: Stimulus) -> Int64s:
    """When the shaft moves faster than the decoder promises to follow."""
    period_ps, ideal = stimulus.period_ps, stimulus.ideal
    # Edge times are rounded to whole ps, so a state may look shorter than it is by that much.
    both = ideal.lines["a"].toggles_ps, ideal.lines["b"].toggles_ps
    # Both lines at once are no state; through an aperture they are seen one after the other, in either order.
    states_ps = np.sort(np.concatenate(both)) if stimulus.aperture_ps else merged(*both)
    spare_ps = stimulus.aperture_ps - 2
    parts = [_short(states_ps, contract.shortest_state * period_ps + spare_ps)]
    parts += [_short(ideal.lines[name].toggles_ps, contract.filter.passes * period_ps + spare_ps) for name in ("a", "b")]
    if contract.index is not None:
        parts.append(_short(ideal.lines["index"].toggles_ps, contract.filter.passes * period_ps + spare_ps))
    return np.concatenate([part[:, 0] for part in parts])


@dataclass(frozen=True, slots=True)
class _Origin:
    """From ``time_ps`` on the count is ``count`` where the ideal count is ``ideal``; None: not known from outside."""

    time_ps: int
    count: int | None
    ideal: int


def _origins(
    contract: Contract, stimulus: Stimulus, place: Int64s, since_ps: Int64s, counted: Int64s, gated: Int64s, quiet_ps: int
) -> list[_Origin]:
    origins: list[_Origin] = []
    releases = _spans(stimulus, "reset") if contract.reset else [(0, 0)] if stimulus.power_up else []
    origins += [_Origin(begin, None, 0) for begin, _ in releases]
    busy = [span for deed in DEEDS if deed != "clear" for span in _spans(stimulus, deed)]
    moves = np.concatenate([stimulus.lines["a"].toggles_ps, stimulus.lines["b"].toggles_ps])
    for begin, time in releases:
        near = bool(((moves > time - quiet_ps) & (moves < time + quiet_ps)).any())
        near |= contract.reset is not None and time - begin < contract.reset.clocks * stimulus.period_ps
        near |= any(first < time + quiet_ps and last > begin - quiet_ps for first, last in busy)
        at = int(np.searchsorted(since_ps, time, side="right")) - 1
        # The state is read from the shaft; if the lines lie, the run is lost anyway.
        state = A_LEADS_B[int(place[at]) % 4]
        truthful = bool(_truthful(stimulus, place[at : at + 1], np.array([time]))[0])
        known = not near and truthful and state in contract.start.rest_states
        value = contract.start.count if known else None
        if gated[at] and contract.index is not None and contract.start.count != contract.index.value:
            # The index is on when the reset ends: sensed as a level it sets the count, as an edge it may.
            sure = known and gated[at] == 1 and not contract.index.edge
            value = contract.index.value if sure else None
        origins.append(_Origin(time, value, int(counted[at])))
    origins += _by_inputs(contract, stimulus, since_ps, counted, gated, quiet_ps)
    if contract.index is not None and contract.index.edge:
        gated = np.where((gated == 1) & (np.concatenate([[0], gated[:-1]]) == 1), 0, gated)
    armed = _spans(stimulus, "arm")
    for at in np.flatnonzero(gated).tolist():
        if contract.input("arm-once") and contract.reset and not any(begin <= since_ps[at] for begin, _ in armed):
            continue
        # Soon after a reset the decoder need not be awake; while an input acts, what the index does is the line oracle's affair.
        asleep = any(begin <= since_ps[at] < time + quiet_ps for begin, time in releases)
        asleep |= any(begin - quiet_ps <= since_ps[at] < time + quiet_ps for begin, time in busy)
        assert contract.index is not None
        value = contract.index.value if gated[at] == 1 and not asleep and not contract.input("arm-once") else None
        # The step into the index counts on from the value, or is lost to it; a jump is no step.
        stepped = at > 0 and abs(int(place[at] - place[at - 1])) == 1
        ideal = counted[at - 1] if contract.index.counts_last and stepped else counted[at]
        origins.append(_Origin(int(since_ps[at]), value, int(ideal)))
    return origins


def _by_inputs(
    contract: Contract, stimulus: Stimulus, since_ps: Int64s, counted: Int64s, gated: Int64s, quiet_ps: int
) -> list[_Origin]:
    """What inputs make of the count: set at rest it is known again, and what moves while it is disabled is not counted."""
    moves = np.concatenate([stimulus.lines["a"].toggles_ps, stimulus.lines["b"].toggles_ps])
    found: list[_Origin] = []
    for deed, role in DEEDS.items():
        one = contract.input(role)
        if one is None or role in ("clear-error", "arm", "arm-once"):
            continue
        for begin, end in _spans(stimulus, deed):
            near = bool(((moves > begin - quiet_ps) & (moves < end + quiet_ps)).any())
            near |= any(first < end + quiet_ps and last > begin - quiet_ps for first, last in _spans(stimulus, "reset"))
            at = int(np.searchsorted(since_ps, end, side="right")) - 1
            if role != "enable" or near:
                found.append(_Origin(begin, None, 0))
            if role != "enable" and not near:
                # An index that is active then sets the count again.
                found.append(_Origin(end, None if gated[at] else one.value, int(counted[at])))
    return found


def _spans(stimulus: Stimulus, signal: str) -> list[tuple[int, int]]:
    """When an input is acted on, from and to, each time."""
    line = stimulus.drives[signal]
    toggles = [0, *line.toggles_ps.tolist()] if line.first else line.toggles_ps.tolist()
    return list(zip(toggles[::2], toggles[1::2], strict=False))
