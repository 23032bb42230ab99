"""Decoders as plain per-clock programs: right ones, in every shape a contract allows, and faulty ones.

Written from the words of the contract alone and without arrays, so that it can stand against the oracles. Clock period k
ends at an active edge, which samples the levels of its end; an output with latency L that answers to period k has its new
value from period k + L on.
"""

from __future__ import annotations

import random
from dataclasses import dataclass

import numpy as np

from tbkit.contract import Contract, Span
from tbkit.encoder import Line
from tbkit.stimulus import Stimulus
from tbkit.trace import Series, Trace


@dataclass(frozen=True)
class Build:
    """How a right decoder is built where its contract leaves a choice.

    Attributes:
        filtering: ``equal`` (``depth`` equal samples), ``free`` (whatever is allowed), ``integrating``, ``poll`` (looks at
            the lines every ``depth`` clocks), ``dead-time`` (blind for ``depth`` clocks after a change), ``majority`` (of
            three samples).
        depth: clocks.
        warm: clocks after reset in which the lines are followed without counting.
        vary: latencies are drawn anew for each event, within the declared range.
        apart: the index is drawn apart from the count.
        idle: with-count direction between counts: ``hold`` or ``noise``.
        by_state: the direction follows every state, else only those that count.
        set_wins: a sticky error that is set and cleared at once is set.
        wild: anything goes when a state is too short to be promised.
        step_at_zero: a step is given while the index holds the count.
        late_leave: the step out of the index takes the longer of both latencies.
        from_rest: after reset the lines are taken to be in the first rest state, whatever they are.
        seed: of all draws.
    """

    filtering: str = "equal"
    depth: int = 1
    warm: int = 0
    vary: bool = False
    apart: bool = False
    idle: str = "hold"
    by_state: bool = True
    set_wins: bool = True
    wild: bool = False
    step_at_zero: bool = True
    late_leave: bool = False
    from_rest: bool = False
    seed: int = 0


def sampled(line: Line, period_ps: int, periods: int) -> bytearray:
    """The level just before the end of each clock period."""
    toggles = line.toggles_ps.tolist()
    levels = bytearray(periods)
    level, n = line.first, 0
    for k in range(periods):
        end = (k + 1) * period_ps
        while n < len(toggles) and toggles[n] < end:
            level ^= 1
            n += 1
        levels[k] = level
    return levels


def filtered(  # noqa: C901
    raw: bytearray, loads: bytearray, load_level: int | None, build: Build, passes: int, rejects: int, init: int, rng: random.Random
) -> bytearray:
    """A line behind its filter, ``passes - 1`` clocks late (``poll`` and ``dead-time``: not late).

    Where ``loads`` is set it takes the line's level, or ``load_level``.
    """
    out = bytearray(len(raw))
    now, counted = init, 0
    if build.filtering == "poll":
        phase = build.seed % build.depth
        for k, level in enumerate(raw):
            if loads[k]:
                now = level if load_level is None else load_level
            elif (k + phase) % build.depth == 0:
                now = level
            out[k] = now
        return out
    if build.filtering == "dead-time":
        blind = 0
        for k, level in enumerate(raw):
            if loads[k]:
                now, blind = level if load_level is None else load_level, 0
            elif blind:
                blind -= 1
            elif level != now:
                now, blind = level, build.depth - 1
            out[k] = now
        return out
    if build.filtering == "majority":
        window = [now] * 3
        for k, level in enumerate(raw):
            window = [level] * 3 if loads[k] else [*window[1:], level]
            out[k] = int(sum(window) > 1)
        return out
    if build.filtering == "free":
        last_load = -1
        for k, level in enumerate(raw):
            s = k - passes + 1
            if loads[k]:
                now = level if load_level is None else load_level
                last_load = k
            elif s > last_load and s > 0 and raw[s] != raw[s - 1]:
                length = 1
                while length < passes and raw[s + length] == raw[s]:
                    length += 1
                if length == passes or (length > rejects and rng.random() < 0.5):
                    now = raw[s]
            elif s == last_load + 1 and all(raw[j] == level for j in range(max(s, 0), k)):
                now = level
            out[k] = now
        return out
    pipe = [now] * (passes - build.depth) if build.filtering == "equal" else []
    total = build.depth * now
    for k, level in enumerate(raw):
        if loads[k]:
            now = level if load_level is None else load_level
            counted, total = 0, build.depth * now
            pipe = [now] * len(pipe)
        elif build.filtering == "integrating":
            total = min(total + 1, build.depth) if level else max(total - 1, 0)
            if total in (0, build.depth):
                now = int(total > 0)
        elif level == now:
            counted = 0
        else:
            counted += 1
            if counted >= build.depth:
                now, counted = level, 0
        pipe.append(now)
        out[k] = pipe.pop(0)
    return out


class Output:
    """An output as a list of (period, value)."""

    def __init__(self, first: int) -> None:
        self.changes = [(0, first)]

    def put(self, period: int, value: int) -> None:
        """From ``period`` on ``value``; what was to come later is dropped."""
        while self.changes and self.changes[-1][0] >= period:
            self.changes.pop()
        self.changes.append((period, value))

    def pulse(self, period: int, length: int = 1) -> None:
        self.put(period, 1)
        self.put(period + length, 0)

    def series(self, periods: int, unknown_from: int | None = None) -> Series:
        kept: list[tuple[int, int]] = []
        for period, value in self.changes:
            if period < periods and (not kept or kept[-1][1] != value):
                kept.append((period, value))
        unknown = np.zeros(len(kept), dtype=bool)
        if unknown_from is not None:
            unknown |= np.array([period >= unknown_from for period, _ in kept])
        return Series(
            np.array([period for period, _ in kept], dtype=np.int64),
            np.array([value - (1 << 64) if value >= 1 << 63 else value for _, value in kept], dtype=np.int64),
            unknown,
        )


def wrapped(contract: Contract, value: int) -> int:
    """Bring a count back into its range as the contract says."""
    count = contract.count
    assert count is not None
    if count.lowest <= value <= count.highest:
        return value
    if count.overflow == "hold":
        return count.lowest if value < count.lowest else count.highest
    span = count.highest - count.lowest + 1
    while value > count.highest:
        value -= span
    while value < count.lowest:
        value += span
    return value


class _Delay:
    """Draws when an output answers: within its range, one answer after the other."""

    def __init__(self, span: Span, late: int, vary: bool, rng: random.Random) -> None:
        self.span, self.late, self.vary, self.rng = span, late, vary, rng
        self.last = -1
        self.fixed = rng.randint(span.min, span.max)

    def due(self, k: int) -> int:
        """``k`` is when the lines behind the filter show the cause."""
        clocks = self.rng.randint(self.span.min, self.span.max) if self.vary else self.fixed
        due = max(k - self.late + clocks, self.last + 1 if self.vary else 0, k)
        self.last = due
        return due


NEXT = {"00": "10", "10": "11", "11": "01", "01": "00"}


def run(contract: Contract, stimulus: Stimulus, build: Build, fault: str = "") -> Trace:  # noqa: C901
    """Play a stimulus to a decoder."""
    rng = random.Random(f"{build.seed} {stimulus.name} {stimulus.seed}")  # noqa: S311
    period_ps, periods = stimulus.period_ps, stimulus.periods
    raw = {name: sampled(line, period_ps, periods) for name, line in stimulus.lines.items()}
    if fault == "swapped":
        raw["a"], raw["b"] = raw["b"], raw["a"]
    if fault == "skewed-lines":
        raw["a"] = raw["a"][:1] + raw["a"][:-1]
    if fault == "index-inverted":
        raw["index"] = bytearray(1 - level for level in raw["index"])
    clear = sampled(stimulus.drives["clear"], period_ps, periods)
    reset = sampled(stimulus.drives["reset"], period_ps, periods) if contract.reset else bytearray(periods)
    # An asynchronous reset acts within the period; the edge that ends the period of its release is awake again.
    resetting = reset

    # Loading: during reset and the warm-up after it the lines are followed without counting.
    fresh = contract.reset is not None or stimulus.power_up
    loads = bytearray(periods)
    left = build.warm if fresh else 0
    if fresh and not contract.reset and left == 0:
        left = 1
    for k in range(periods):
        if resetting[k]:
            left = build.warm
            loads[k] = 1
        elif left:
            left -= 1
            loads[k] = 1
    rules = contract.filter
    late = 0 if build.filtering in ("poll", "dead-time") else rules.passes - 1
    depth = {"filter-deeper": 1, "filter-shallower": -1}.get(fault, 0)
    shown = {}
    rest = contract.start.rest_states[0]
    for name, level in (("a", int(rest[0])), ("b", int(rest[1])), ("index", None)):
        if rules.passes == 1 and build.filtering == "equal" and not depth:
            shown[name] = raw[name]
            continue
        made = Build(build.filtering, build.depth + depth, seed=build.seed)
        passes = max(rules.passes, made.depth) if depth else rules.passes
        shown[name] = filtered(
            raw[name], loads, level if build.from_rest else None, made, passes, rules.rejects, rng.randint(0, 1), rng
        )

    spans = contract.latency
    shift = {"later": 1, "earlier": -1}.get(fault, 0)

    def delay(span: Span, more: int = 0) -> _Delay:
        if build.filtering in ("poll", "dead-time"):
            # The wait for the next look is the rest of the range.
            span = Span(span.min, span.min)
        return _Delay(Span(span.min + more, span.max + more), late, build.vary, rng)

    to_count, to_index = delay(spans.count if contract.count else spans.step, shift), delay(spans.index)
    to_direction, to_step = delay(spans.direction), delay(spans.step, shift if not contract.count else 0)
    error_shift = {"error-late": 1, "error-early": -1}.get(fault, 0)
    to_error, to_clear = delay(spans.error, error_shift), spans.clear.max
    same_direction = contract.count is not None and spans.direction == spans.count
    same_direction |= contract.count is None and spans.direction == spans.step
    same_step = contract.count is None or (spans.step == spans.count and not build.apart)
    same_index = spans.index == spans.count and not build.apart

    size = contract.count
    start = contract.start.count
    if fault == "start-wrong":
        start += 1
    known = fresh and not contract.reset
    count_now = start if known or size is None else rng.randint(size.lowest, size.highest)
    out_count = Output(count_now)
    out_direction = Output(rng.randint(0, 1))
    out_step = Output(0)
    out_error = Output(0 if known else rng.randint(0, 1) if contract.error and contract.error.sticky else 0)
    sticky_now = out_error.changes[0][1]
    forward = contract.direction.forward_level if contract.direction else 1
    order = ["00", "10", "11", "01"]
    if size is not None and not size.a_leads_forward:
        order = ["00", "01", "11", "10"]
    place = {state: n for n, state in enumerate(order)}
    gate = contract.index
    every = size.states_per_count if size else 1
    marks = {1: set(order), 2: {size.at, order[(place[size.at] + 2) % 4]} if size else set(), 4: {size.at} if size else set()}[
        every
    ]

    states = [f"{a}{b}" for a, b in ((0, 0), (0, 1), (1, 0), (1, 1))]
    a_line, b_line, z_line = shown["a"], shown["b"], shown["index"]
    state = states[2 * a_line[0] + b_line[0]] if fresh else rng.choice(order)
    if build.from_rest and fresh:
        state = rest
    active = False
    last_event, last_way, edges = -(10**9), 0, 0
    just_reset = known
    ops: list[tuple[int, str, int]] = []
    sets: list[int] = []
    illegal_before = False
    unknown_from = None

    for k in range(periods):
        now = states[2 * a_line[k] + b_line[k]]
        if resetting[k]:
            since = k if contract.reset and contract.reset.asynchronous else k + 1
            if not (fault == "reset-keeps-count" and k > 40):
                ops.clear()
                count_now = start
                out_count.put(since, count_now)
            sets.clear()
            if fault != "reset-keeps-error" or k < 20:
                sticky_now = 0
            if fault not in ("error-always", "error-always-low"):
                out_error.put(since, sticky_now)
            out_step.put(since, 0)
            to_count.last = to_index.last = to_direction.last = to_step.last = to_error.last = k
            just_reset, last_way, illegal_before = True, 0, False
            last_event = -(10**9)
        before, state = state, now
        if loads[k]:
            if build.from_rest:
                state = rest
            active = _gated(contract, fault, state, z_line[k])
            if active and gate is not None and (not gate.edge or build.seed % 2) and not resetting[k] and size is not None:
                count_now = 0
                out_count.put(k + 1, 0)
            continue

        was_active, active = active, _gated(contract, fault, state, z_line[k])
        zero = active and not was_active if gate is not None and gate.edge and fault != "index-level" else active
        if just_reset and fault == "false-count-after-reset" and state == "11":
            ops.append((to_count.due(k), "step", 1))
        if just_reset and fault == "false-error-after-reset" and state != "00":
            out_error.pulse(to_error.due(k))
            sets.append(k)
        if just_reset and active and gate is not None and not gate.edge:
            ops.append((to_index.due(k), "zero", 0))
        just_reset = False
        if state != before or active != was_active:
            way = (place[state] - place[before]) % 4
            way = -1 if way == 3 else way
            illegal = way == 2
            step = 0
            if way == 1 and state in marks:
                step = 1
            elif way == -1 and before in marks:
                step = -1
            if fault == "not-mirrored" and every > 1:
                step = way if way in (1, -1) and state in marks else 0
            hasty = state != before and k - last_event < contract.shortest_state
            true_step = step
            if state != before:
                edges += 1
            jump = rng.randint(-3, 3) if build.wild and hasty else 0
            if illegal and contract.illegal_moves:
                step = contract.illegal_moves[int(before, 2)]
            elif illegal:
                jump += rng.randint(-2, 2)
            # --- faults in counting
            turned = way in (1, -1) and last_way == -way
            lost = {
                "lost-on-reversal": turned and way == -1 and before == "11",
                "lost-once": edges == 1024,
                "lost-transition": before == "01" and state == "00",
            }
            doubled = {
                "extra-on-reversal": turned and way == 1 and before == "10",
                "by-two": before == "10" and state == "11",
            }
            if lost.get(fault):
                step = 0
            elif doubled.get(fault):
                step *= 2
            elif fault == "illegal-counts" and illegal:
                step = 2
            elif fault == "never":
                step, zero, illegal, active = 0, False, False, False
            elif fault == "backwards":
                step = -step
            elif fault == "index-drift" and was_active and not active and way == -1 and step:
                step = 0
            elif fault == "index-late-state":
                zero = was_active and not active
            if way in (1, -1):
                last_way = way
            if illegal:
                last_way = 0

            if step or zero or jump:
                due = to_count.due(k)
                if zero and not same_index and (build.vary or spans.index != spans.count):
                    at_zero = max(to_index.due(k), ops[-1][0] + 1 if ops and build.vary else 0)
                    if (step or jump) and due < at_zero and not was_active:
                        ops.append((due, "step", step + jump))
                    ops.append((at_zero, "zero", 0))
                    to_count.last = max(to_count.last, at_zero) if build.vary else to_count.last
                else:
                    if was_active and not active and build.late_leave:
                        due = max(due, k - late + spans.index.max)
                    ops.append((due, "zero" if zero else "step", step + jump))
            else:
                due = to_count.due(k) if way in (1, -1) and not build.vary else k - late + to_count.fixed
            # --- direction
            if contract.direction is not None and way in (1, -1):
                level = forward if way == 1 else 1 - forward
                inverted = {
                    "direction-transition": before == "10" and state == "11",
                    "direction-inverted": True,
                    "direction-after-reversal": turned,
                }
                if inverted.get(fault):
                    level = 1 - level
                if fault in ("direction-stuck", "never"):
                    pass
                elif contract.direction.with_count:
                    if step and not (jump and not true_step):
                        at = due if same_direction else to_direction.due(k)
                        out_direction.put(at, level)
                        if build.idle == "noise":
                            out_direction.put(at + 1, rng.randint(0, 1))
                elif step or build.by_state:
                    out_direction.put(to_direction.due(k) + (1 if fault == "direction-late" else 0), level)
            # --- step
            pulses = true_step if contract.count is not None else step
            if contract.step is not None and pulses and fault != "never" and (not zero or build.step_at_zero):
                at = due if same_step else to_step.due(k)
                if fault == "step-missing" and before == "11" and state == "01":
                    pass
                else:
                    out_step.pulse(at, 2 if fault == "step-double" else 1)
            if contract.step is not None and fault == "step-extra" and illegal:
                out_step.pulse(to_step.due(k))
            # --- error
            wild_error = build.wild and hasty and rng.random() < 0.5
            raised = illegal or wild_error
            silent = {
                "error-never": True,
                "never": True,
                "error-in-one-state": before == "10",
                "error-second-missed": illegal_before,
            }
            if silent.get(fault):
                raised = False
            elif fault == "error-on-reversal" and turned and state == "00":
                raised = True
            illegal_before = illegal
            if raised and contract.error is not None:
                at = to_error.due(k)
                if contract.error.sticky and fault != "not-sticky":
                    sets.append(at)
                elif fault == "error-stuck":
                    out_error.put(at, 1)
                else:
                    out_error.pulse(at, 2 if fault == "error-long" else 1)
            if fault == "unknown" and edges == 30 and unknown_from is None:
                unknown_from = k
            if state != before:
                last_event = k

        while ops and ops[0][0] <= k:
            due, kind, by = ops.pop(0)
            old = count_now
            count_now = 0 if kind == "zero" else _counted(contract, fault, count_now, by)
            if count_now != old:
                out_count.put(due, count_now)
        if contract.error is not None and contract.error.sticky and (sets or k >= to_clear):
            cleared = k >= to_clear and clear[k - to_clear] and fault != "clear-ignored"
            raised = bool(sets) and sets[0] <= k
            while sets and sets[0] <= k:
                sets.pop(0)
            level = ((sticky_now and not cleared) or raised) if build.set_wins else ((sticky_now or raised) and not cleared)
            if int(level) != sticky_now:
                sticky_now = int(level)
                out_error.put(k, sticky_now)
    # A rare last one may be due beyond the end.
    if fault == "error-always":
        out_error.changes = [(0, 1)]
    return Trace(
        out_count.series(periods, unknown_from) if contract.count else None,
        out_direction.series(periods) if contract.direction else None,
        out_step.series(periods) if contract.step else None,
        error=out_error.series(periods) if contract.error else None,
    )


def _gated(contract: Contract, fault: str, state: str, z: int) -> bool:
    gate = contract.index
    if gate is None or fault == "index-never":
        return False
    active = bool(z)
    if fault == "index-without-line":
        active = True
    if fault != "index-ungated":
        active = active and gate.a in (None, int(state[0])) and gate.b in (None, int(state[1]))
    return active


def _counted(contract: Contract, fault: str, count: int, by: int) -> int:
    size = contract.count
    if size is None:
        return 0
    value = count + by
    if fault == "roll-over-early" and size.overflow == "wrap":
        half = (size.highest - size.lowest + 1) // 2
        if value > size.lowest + half + half // 2 - 1:
            return value - half
        if value < size.lowest + half // 2:
            return value + half
        return value
    if fault == "hold-wraps" and size.overflow == "hold":
        return size.lowest if value > size.highest else size.highest if value < size.lowest else value
    if fault == "wrap-holds":
        return min(max(value, size.lowest), size.highest)
    if fault == "modulo-off" and size.overflow == "modulo":
        return value % (size.highest + 2) if size.highest + 1 < 1 << size.width else value % size.highest
    return wrapped(contract, value)
