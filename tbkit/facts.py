"""Facts about a profile: what it asks of a decoder, in numbers, before anything is simulated."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tbkit.contract import Contract
from tbkit.motion import Motion
from tbkit.ordered import merged
from tbkit.profile import Encoder
from tbkit.stimulus import Scenario, too_fast
from tbkit.units import PS_PER_S, Scale, parse


@dataclass(frozen=True, slots=True)
class Facts:
    """Numbers about one profile.

    Attributes:
        length_ps: from the begin of the motion to its end.
        edges: of A, B and index, with all disturbances.
        states: boundaries between states that the shaft passes.
        top_speed: states/s.
        shortest_state_ps: the shortest time between two edges of A and B as the encoder gives them, jumps apart (None: there
            are no two).
        shortest_level_ps: the shortest time between two edges of one line there.
        undetectable: what no decoder of A and B could notice, in words.
    """

    length_ps: int
    edges: int
    states: int
    top_speed: float
    shortest_state_ps: int | None
    shortest_level_ps: int | None
    undetectable: tuple[str, ...]


def _top_speed(motion: Motion) -> float:
    """The highest speed in states/ps; a jump has none."""
    time = motion.duration_ps.astype(np.float64)
    # Inside a piece the speed is highest where the acceleration passes zero.
    crest = np.divide(-motion.accel, motion.jerk, out=np.zeros_like(time), where=motion.jerk != 0)
    moments = (np.zeros_like(time), np.clip(crest, 0.0, time), time)
    speeds = [np.abs(motion.speed + at * (motion.accel + at * motion.jerk / 2)).max(where=time > 0, initial=0.0) for at in moments]
    return float(max(speeds))


def facts(scenario: Scenario, contract: Contract | None) -> Facts:
    """What this profile asks of a decoder."""
    lines = scenario.edges.lines
    a, b = lines["a"].toggles_ps, lines["b"].toggles_ps
    states, levels = np.diff(merged(a, b)), np.concatenate([np.diff(a), np.diff(b)])
    ledger_ps = scenario.edges.ledger.time_ps
    return Facts(
        scenario.motion.end_ps - scenario.begin_ps,
        sum(len(line.toggles_ps) for line in scenario.disturbed.lines.values()),
        len(ledger_ps),
        _top_speed(scenario.motion) * PS_PER_S,
        int(states.min()) if len(states) else None,
        int(levels.min()) if len(levels) else None,
        (*scenario.disturbed.undetectable, *(too_fast(ledger_ps, contract.clock.period_ps) if contract else ())),
    )


def _time_text(time_ps: int) -> str:
    """A time to six digits, in the largest unit that it fills."""
    unit, size = next(
        (pair for pair in (("s", 10**12), ("ms", 10**9), ("us", 10**6), ("ns", 10**3)) if time_ps >= pair[1]), ("ps", 1)
    )
    return f"{time_ps / size:,.6g} {unit}"


def _speed_text(states_per_s: float, encoder: Encoder) -> str:
    """A speed in states/s and in the units that the encoder gives a meaning."""
    texts = [f"{states_per_s:,.6g} states/s"]
    scale = Scale.of(None, encoder.lines, encoder.pitch)
    for unit, known in (("rpm", encoder.lines), ("m/s", encoder.pitch)):
        if known is not None:
            texts.append(f"{states_per_s / PS_PER_S / float(scale.per_time(parse(f'1 {unit}', 'speed'))):,.6g} {unit}")
    return ", ".join(texts)


def fact_lines(found: Facts, encoder: Encoder, contract: Contract | None) -> list[tuple[str, str]]:
    """The facts as (name, text), with the decoder's limits held against them if there is one."""
    rows = [
        ("length", _time_text(found.length_ps)),
        ("edges", f"{found.edges:,} on A, B and index; {found.states:,} states passed"),
        ("top speed", _speed_text(found.top_speed, encoder)),
    ]
    if contract and contract.count:
        resolution = {1: "x4", 2: "x2", 4: "x1"}[contract.states_per_count]
        rows.append(("count rate", f"{found.top_speed / contract.states_per_count:,.6g} counts/s at {resolution}"))
    limits = [
        ("shortest state", found.shortest_state_ps, "shortest_state", contract.shortest_state if contract else 0),
        ("shortest level", found.shortest_level_ps, "filter passes", contract.filter.passes if contract else 0),
    ]
    for name, time_ps, limit, clocks in limits:
        if time_ps is None:
            continue
        text = _time_text(time_ps)
        if contract:
            period_ps = contract.clock.period_ps
            kept = "kept" if time_ps >= clocks * period_ps else "NOT KEPT, the check is open there"
            text += f", {time_ps / period_ps:,.4g} clocks; the decoder's limit ({limit}: {clocks}) is {kept}"
        rows.append((name, text))
    return rows + [("no decoder detects", text) for text in found.undetectable]
