"""Decoders as registers that change at each clock, as RTL would have them: for inputs and for what an index does.

Shares nothing with the oracles: levels are sampled edge by edge, pipelines are lists, and the next count follows from the
present one by ifs.
"""

from __future__ import annotations

import random
from dataclasses import dataclass

import numpy as np
from perclock import sampled, wrapped

from tbkit.contract import Contract
from tbkit.stimulus import Stimulus
from tbkit.trace import Series, Trace

NEXT = {"00": "10", "10": "11", "11": "01", "01": "00"}


@dataclass(frozen=True)
class Fault:
    """One thing that a faulty decoder of this kind does otherwise: the name says which."""

    name: str = ""


class _Log:
    def __init__(self) -> None:
        self.periods: list[int] = []
        self.values: list[int] = []

    def put(self, k: int, value: int) -> None:
        if not self.values or self.values[-1] != value:
            self.periods.append(k)
            self.values.append(value)

    def series(self) -> Series:
        return Series(np.array(self.periods), np.array(self.values), np.zeros(len(self.periods), dtype=bool))


def run(contract: Contract, stimulus: Stimulus, fault: str = "", seed: int = 0) -> Trace:  # noqa: C901
    """Play a stimulus to registers that keep a contract with exact latencies, x4, without a filter."""
    rng = random.Random(seed)  # noqa: S311
    count, index = contract.count, contract.index
    assert count is not None
    period_ps, periods = stimulus.period_ps, stimulus.periods
    levels = {name: sampled(line, period_ps, periods) for name, line in {**stimulus.lines, **stimulus.drives}.items()}
    depth, input_depth = contract.latency.count.min, contract.latency.inputs.min
    by_index, disarm_depth = contract.latency.index.min, contract.latency.inputs.min
    roles = {one.role: one for one in contract.inputs}
    last, now, direction, captured = 0, rng.randint(count.lowest, count.highest), 0, 0
    logs = {name: _Log() for name in ("count", "direction", "index", "step")}
    pressed = dict.fromkeys(("zero", "preload"), False)
    armed_zone = pressed_arm = False
    # Without a reset it may be armed from what was played before.
    armed = contract.reset is None and not stimulus.power_up and seed % 2 == 0
    if contract.reset is None and stimulus.power_up:
        now = contract.start.count
    shown, asked = rng.randint(count.lowest, count.highest), False

    def at(name: str, k: int) -> int:
        return levels[name][max(k, 0)]

    def lines(k: int) -> tuple[str, int]:
        return f"{at('a', k)}{at('b', k)}", at("index", k)

    for k in range(periods):
        # What stands in period k was decided by the edge that ends period k - 1.
        if contract.reset and (at("reset", k) if contract.reset.asynchronous else at("reset", k - 1)):
            now, direction, captured, step, home = contract.start.count, 0, 0, 0, 0
            armed_zone, armed, shown = True, False, now if seed % 2 else shown
            if index is not None:
                state, z = lines(k - by_index)
                armed_zone = _zone(index, state, z)
            pressed = {deed: bool(at(deed, k - input_depth)) for deed in pressed}
        else:
            old, new = lines(k - depth - 1)[0], lines(k - depth)[0]
            by = 1 if NEXT[old] == new else -1 if NEXT[new] == old else 0
            by = by if count.a_leads_forward else -by
            enabled = not ("enable" in roles and at("disable", k - input_depth))
            if fault == "enable-late":
                enabled = not ("enable" in roles and at("disable", k - input_depth - 1))
            if fault == "enable-ignored":
                enabled = True
            step = int(by != 0)
            counted = by if enabled else 0
            if by:
                direction = int(by > 0)
            home = 0
            target = None
            if index is not None:
                zone = _zone(index, *lines(k - by_index))
                if "arm" in roles and fault != "always-armed":
                    zone = zone and not at("disarm", k - disarm_depth)
                entered = zone and not armed_zone
                armed_zone = zone
                if "arm-once" in roles:
                    pressed_arm = bool(at("arm", k - input_depth))
                    armed |= pressed_arm
                    entered = entered and (armed or fault == "always-armed")
                    zone = entered
                    if entered and fault != "armed-for-ever":
                        armed = pressed_arm and bool(seed % 2)
                if index.action == "set" and (entered if index.edge else zone):
                    target = index.value + (counted if index.counts_last and fault != "step-lost" else 0)
                if index.action == "pulse":
                    home = int(entered)
                if index.action == "latch" and (entered or (fault == "latch-transparent" and zone)):
                    captured = now
            for deed, role in (("preload", "preload"), ("zero", "clear-count")):
                one = roles.get(role)
                on = bool(at(deed, k - input_depth - (fault == "inputs-late")))
                if one is None or fault == "inputs-ignored":
                    continue
                if on and not (one.edge and pressed[deed]):
                    keeps = one.counts_last and fault != "step-lost"
                    if fault == "step-kept" and not one.counts_last:
                        keeps = True
                    target = one.value + (counted if keeps else 0)
                pressed[deed] = on
            now = wrapped(contract, now + counted) if target is None else wrapped(contract, target)
        latch = bool(at("latch", k - input_depth))
        if "latch" not in roles or fault == "latch-open":
            shown = now
        elif latch and not (asked and roles["latch"].edge and fault != "latch-transparent"):
            shown = now if fault != "latch-late" else last
        asked, last = latch, now
        logs["count"].put(k, shown)
        logs["direction"].put(k, direction)
        logs["step"].put(k, step)
        logs["index"].put(k, captured if index is not None and index.action == "latch" else home)
    return Trace(
        logs["count"].series(),
        logs["direction"].series() if contract.direction else None,
        logs["step"].series() if contract.step else None,
        index=logs["index"].series() if index is not None and index.output is not None else None,
    )


def _zone(index: object, state: str, z: int) -> bool:
    return bool(z) and index.a in (None, int(state[0])) and index.b in (None, int(state[1]))  # type: ignore[attr-defined]
