"""Finds out what a decoder does and writes a decoder file that says so.

Ports get their roles by name, direction and width; the rest is measured on slow clean motion where it can be, and else assumed.
Every line of the file says which.
"""

from __future__ import annotations

import itertools
import os
import random
import tempfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from tbkit import units
from tbkit.contract import (
    A_LEADS_B,
    NO_CLOCK_PS,
    Clock,
    Constant,
    Contract,
    Count,
    Design,
    Direction,
    Error,
    Input,
    Latency,
    Output,
    Port,
    Reset,
    Span,
    Start,
    Step,
)
from tbkit.errors import InputError, Problem
from tbkit.paces import LENGTHS, SPREAD, reset_clocks, reset_is_asynchronous, settle_clocks, shortest_state, try_pulses
from tbkit.probe import GAP, Script, changes, known_changes, probe, together, total, value_at
from tbkit.roles import Roles, find_roles, is_low
from tbkit.rtl import Rtl, modules, read_rtl
from tbkit.simulators import find
from tbkit.trace import Series, Trace

RATE_MHZ = 100
#: How often a count moves at least in the first motion; an x1 count does five times.
_FEWEST = 4
#: A count is driven past its ends if that takes no more clocks.
_FARTHEST_CLOCKS = 2_000_000


@dataclass(slots=True)
class Draft:
    """A decoder file in the making: (key, text, how it is known), and what looks wrong."""

    rows: list[tuple[str, str, str]] = field(default_factory=list)
    doubts: list[str] = field(default_factory=list)

    def add(self, key: str, text: str, how: str) -> None:
        self.rows.append((key, text, how))

    def text(self, head: str) -> str:
        # Long lines do not push the others' remarks away.
        width = min(max(len(f"{key}: {text}") for key, text, _ in self.rows), 100)
        lines = [f"# {head}", "# How each line is known: measured, named (from a port's name) or assumed.", "tbkit: 1"]
        lines += [f"{f'{key}: {text}':{width}}  # {how}" for key, text, how in self.rows]
        lines += [f"# LOOK: {doubt}" for doubt in self.doubts]
        return "\n".join(lines) + "\n"


def describe(sources: Sequence[Path], top: str | None, home: Path, given: Mapping[str, str]) -> str:
    """The text of a decoder file for the RTL; paths in it start from ``home``.

    ``given``: ports by their roles, for those that names do not tell; a line may be a bit of a vector, as ``ab[1]``.

    Raises:
        InputError: the top module or a port that is needed cannot be told.
        SimulatorError: the decoder does not build or run.
    """
    files = tuple(path.resolve() for path in sources)
    rtl, design = _top(files, top)
    roles = find_roles(rtl, files[0], given)
    draft = Draft()
    names = ", ".join(_relative(path, home) for path in files)
    folders = [
        _relative(path, home) for path in design.include_dirs if any("`include" in file.read_text("utf-8") for file in files)
    ]
    include = f", include_dirs: [{', '.join(folders)}]" if folders else ""
    draft.add("decoder", f"{{top: {design.top}, sources: [{names}]{include}}}", "named")
    with tempfile.TemporaryDirectory(prefix="tbkit-describe-") as folder:
        _Prober(design, roles, draft, Path(folder)).run()
    return draft.text(f"What tbkit found out about {design.top}; read it, mend it, then run tbkit verify on it.")


def _relative(path: Path, home: Path) -> str:
    return os.path.relpath(path, home.resolve())


def _top(files: tuple[Path, ...], top: str | None) -> tuple[Rtl, Design]:
    vhdl = files[0].suffix in (".vhd", ".vhdl")
    if top is None:
        tops = () if vhdl else modules(files)
        if len(tops) != 1:
            found = ", ".join(tops) or "none that could be told"
            raise InputError([Problem(str(files[0]), 1, f"name the top module with --top; modules at the top: {found}")])
        top = tops[0]
    design = Design(top, files, () if vhdl else tuple(dict.fromkeys(file.parent for file in files)), standard="08" if vhdl else "")
    rtl = read_rtl(design)
    if not isinstance(rtl, Rtl):
        known = ", ".join(rtl) if rtl else "none that could be read"
        raise InputError([Problem(str(files[0]), 1, f"there is no module {top!r} in the sources; there are {known}")])
    return rtl, design


class _Prober:
    """Runs the experiments one after another, each with what those before have shown."""

    def __init__(self, design: Design, roles: Roles, draft: Draft, folder: Path) -> None:
        self.design, self.roles, self.draft, self.folder = design, roles, draft, folder
        self.simulator = find("auto", design.language)[0]
        wide = Span(0, GAP)
        signed, size = roles.signed, roles.count.width if roles.count else 1
        low, high = (-(1 << (size - 1)), (1 << (size - 1)) - 1) if signed else (0, (1 << size) - 1)
        self.contract = Contract(
            Path(f"{design.top}.yaml"),
            design,
            Clock(roles.clock, units.PS_PER_S // (RATE_MHZ * 10**6) if roles.clock else NO_CLOCK_PS),
            *roles.lines,
            Latency(wide, wide, wide, wide, wide, wide),
            index_line=roles.index,
            reset=Reset(Port(roles.reset.name), True, 4) if roles.reset else None,
            start=Start(),
            constants=roles.constants,
            inputs=(Input(roles.latch, "latch"),) if roles.latch else (),
            count=Count(roles.count, signed, 1, "00", True, "wrap", low, high) if roles.count else None,
            direction=Direction(roles.direction, 1, with_count=True) if roles.direction else None,
            step=Step("pulse", roles.steps) if roles.steps else None,
            error=Error(roles.error, "pulse" if roles.error.width == 1 else "counter") if roles.error else None,
        )
        self.reset_on = 1
        self.step_kind, self.step_idle = "", 0
        self.strobes = False
        self.asynchronous: bool | None = None
        self.reset_for: int | None = None
        self.settle: int | None = None
        self.forward_literal = roles.literals[0] if roles.literals else ""
        self.latency: dict[str, Span] = {}

    def script(self, state: str = "00") -> Script:
        return Script(self.reset_on, state, strobes=self.strobes).begin()

    def play(self, *scripts: Script) -> list[Trace]:
        return probe(self.contract, self.simulator, self.folder, list(scripts))

    def main(self, trace: Trace) -> Series:
        """What shows a count: the count, or the steps."""
        if trace.count is not None:
            return trace.count
        steps = self.steps(trace)
        return steps[0] if len(steps) == 1 else together(*steps)

    def steps(self, trace: Trace) -> list[Series]:
        """How many steps each output has told; what it does itself as long as its kind is not known."""
        steps = [one for one in (trace.step, trace.up, trace.down) if one is not None]
        return [total(one, self.step_kind, self.step_idle) for one in steps] if self.step_kind else steps

    def run(self) -> None:
        self._reset()
        self._clock_edge()
        self._start()
        edges = self._sweep()
        self._latencies()
        if self.strobes:
            self._slow_paces()
        else:
            self._paces(edges)
        if self.roles.latch:
            self._latch()
        self._illegal()
        if self.roles.index is not None:
            self._index()
        self._write()

    def _reset(self) -> None:
        """The level at which the reset port lets it count; if at none, that of a latch, or registers that begin at zero."""
        moved = self._moves()
        if max(moved.values()) < _FEWEST and self.roles.latch:
            self._invert_latch()
            moved = self._moves()
        if max(moved.values()) < _FEWEST and self.roles.latch:
            # Not while it is up, then: as it goes up.
            self._invert_latch()
            self.strobes = True
            moved = self._moves()
        for held in self.roles.constants:
            # An enable that its name does not tell.
            if max(moved.values()) < _FEWEST and held.width == 1:
                kept, other = self.roles, replace(held, value=1 - held.value)
                self._hold(tuple(other if one is held else one for one in kept.constants))
                moved = self._moves()
                if max(moved.values()) < _FEWEST:
                    self._hold(kept.constants)
        if max(moved.values()) < _FEWEST and self.design.language == "verilog":
            self.contract = replace(self.contract, start=replace(self.contract.start, zeroed=True))
            moved = self._moves()
            self.draft.doubts.append("registers have neither a reset nor initial values: it counts only if they are 0 at power-up")
        if max(moved.values()) < _FEWEST:
            text = "it never counts in slow motion: is an enable input held at the wrong level, or are the lines others than these?"
            raise InputError([Problem(str(self.design.sources[0]), 1, text)])
        self.reset_on = max(moved, key=lambda level: moved[level])

    def _hold(self, constants: tuple[Constant, ...]) -> None:
        self.roles = replace(self.roles, constants=constants)
        self.contract = replace(self.contract, constants=constants)

    def _invert_latch(self) -> None:
        assert self.roles.latch is not None
        latch = replace(self.roles.latch, active_low=not self.roles.latch.active_low)
        self.roles = replace(self.roles, latch=latch)
        self.contract = replace(self.contract, inputs=(Input(latch, "latch"),))

    def _latch(self) -> None:
        """How long after it is asked the port shows a count that has moved on meanwhile."""
        script = self.script()
        script.strobes = False
        script.firsts["latch"] = 0
        delays = []
        for way in (1, 1, 1, -1) * 4:
            for _ in range(self.every):
                script.step(way)
            script.mark("asked")
            script.toggles["latch"] += [script.now, script.now + GAP]
            script.wait(2 * GAP)
        (trace,) = self.play(script)
        for clock in script.marks["asked"]:
            moved = changes(self.main(trace), clock - 1, clock + GAP)
            if moved:
                delays.append(moved[0][0] - clock)
        if not delays or min(delays) != max(delays):
            self.draft.doubts.append("how long the latch takes could not be told")
        self.latency["inputs"] = Span(min(delays), min(delays)) if delays else Span(1, 1)
        if self.strobes:
            # Asked in every second clock it shows a clock late now and then.
            self.latency["count"] = Span(self.latency["count"].min, self.latency["count"].min)

    def _moves(self) -> dict[int, int]:
        """How often it counts in slow motion, for each level of the reset."""
        guess = 0 if self.roles.reset and is_low(self.roles.reset.name) else 1
        moved: dict[int, int] = {}
        for level in (guess, 1 - guess) if self.roles.reset else (1,):
            self.reset_on = level
            script = self.script().walk(12).walk(-8)
            (trace,) = self.play(script)
            series = self.main(trace)
            answers = [clock for clock, _ in changes(series, 20, int(script.now)) if value_at(series, clock) is not None]
            moved[level] = len(answers)
            if len(answers) >= _FEWEST:
                break
        return moved

    def _clock_edge(self) -> None:
        """Edges early and late in a clock: on the falling edge the early ones are answered a clock sooner."""
        if not self.roles.clock:
            self.draft.add("clock", "none", "named; times are ns")
            return
        spans = []
        for phase in (0.2, 0.7):
            script = self.script()
            script.now = int(script.now) + phase
            (trace,) = self.play(script.walk(16))
            spans.append(self._span(self.main(trace), script))
        early, late = spans
        falling = early.exact and late.exact and early.min + 1 == late.min
        if falling:
            self.contract = replace(self.contract, clock=replace(self.contract.clock, falling=True))
        rate = f"{{port: {self.roles.clock}, rate: {RATE_MHZ} MHz, edge: {'falling' if falling else 'rising'}}}"
        self.draft.add("clock", rate, "named; the edge is measured, the rate assumed")

    def _start(self) -> None:
        """What it shows after reset, with the lines at rest in each state."""
        scripts = [self.script(state).wait(2 * GAP) for state in A_LEADS_B]
        traces = probe(self.contract, self.simulator, self.folder, scripts, fresh=True)
        values = [value_at(self.main(trace), int(script.now)) for script, trace in zip(scripts, traces, strict=True)]
        moved = [
            bool(known_changes(self.main(trace), 20, int(script.now)))
            or (trace.error is not None and bool(known_changes(trace.error, 20, int(script.now))))
            for script, trace in zip(scripts, traces, strict=True)
        ]
        self.start_count = values[0] or 0
        self.rest_states = tuple(
            state for state, value, did in zip(A_LEADS_B, values, moved, strict=True) if value == values[0] and not did
        )
        if values[0] is None:
            self.draft.doubts.append("the count is X after reset: a register without reset or initial value")

    def _sweep(self) -> list[tuple[int, str, str, int]]:
        """Which states move the count, and which way."""
        script = self.script().walk(24).wait(GAP).walk(-24)
        (trace,) = self.play(script)
        series = self.main(trace)
        counted = []
        for clock, before, after, way in script.edges:
            moved = changes(series, clock - 1, clock + GAP - 1)
            if moved:
                counted.append((clock, before, after, way, moved))
        ups = [edge for edge in counted if edge[3] > 0]
        self.every = {24: 1, 12: 2, 6: 4}.get(len(ups), 0)
        if not self.every or len(ups) * 2 != len(counted):
            self.draft.doubts.append(f"of 24 states forward it counts {len(ups)}, and back {len(counted) - len(ups)}")
            self.every = self.every or 1
        if self.roles.steps and self.contract.step and len(self.roles.steps) > 1 and ups and trace.up is not None:
            # Named up, and told while A leads B: otherwise they change places.
            at = ups[2][0]
            if not changes(trace.up, at - 1, at + GAP - 1):
                up, down = (replace(one, name=name) for one, name in zip(reversed(self.roles.steps), ("up", "down"), strict=True))
                self.roles = replace(self.roles, steps=(up, down))
                self.contract = replace(self.contract, step=Step("pulse", (up, down)))
        if self.contract.count is not None and ups:
            was, became = value_at(series, ups[2][0] - 1), ups[2][4][-1][1]
            self.forward = "a-leads-b" if was is None or (became - was) % (1 << 32) == 1 else "b-leads-a"
        else:
            self.forward = "a-leads-b"
        entered = {edge[2] for edge in counted if (edge[3] > 0) == (self.forward == "a-leads-b")}
        left = {edge[1] for edge in counted if (edge[3] > 0) != (self.forward == "a-leads-b")}
        self.at = next((state for state in A_LEADS_B if state in entered), "00")
        if self.every > 1 and entered != left:
            self.draft.doubts.append("back and forth over one edge does not give the same count: it moves at another edge backward")
        return [edge[:4] for edge in counted]

    def _slow_paces(self) -> None:
        """Of a count that is seen only now and then: that it follows everything is assumed."""
        self.passes, self.rejects, self.bursts, self.shortest, self.filters = 1, 0, False, 1, False
        self.draft.doubts.append("its count is seen only as the latch is asked: that there is no filter is assumed")

    def _paces(self, edges: list[tuple[int, str, str, int]]) -> None:
        """The filter, the shortest state, the reset's length and what follows it."""
        _, before, after, _ = next(edge for edge in edges if edge[3] > 0)
        line = "a" if before[0] != after[0] else "b"
        pulses = try_pulses(self, before, line, self.latency["count"])
        if pulses.passes is None:
            self.draft.doubts.append(f"pulses of {LENGTHS[-1]} clocks do not always pass; that those of more do is assumed")
        self.passes, self.rejects, self.bursts = pulses.passes or LENGTHS[-1] + 1, pulses.rejects, pulses.bursts
        self.gap = max(2 * self.passes, pulses.latest) + 8
        shortest = shortest_state(self, self.gap, self.passes)
        if shortest is None:
            self.draft.doubts.append("not every state is counted, however long it lasts")
        self.shortest = shortest or 1
        # Pulses that end in a state too short to be counted need no filter to explain them.
        self.filters = self.rejects > 0 or self.passes > self.shortest
        if self.filters and not self.rejects:
            # What was let through may make what follows it come late.
            self.bursts = True
            late = pulses.latest - self.latency["count"].max
            self.latency = {name: replace(span, max=span.max + late) for name, span in self.latency.items()}
        if self.roles.reset is not None and self.rest_states:
            if self.roles.count is not None:
                self.asynchronous = reset_is_asynchronous(self, self.start_count)
                self.reset_for = reset_clocks(self, self.rest_states, self.start_count)
            settle = settle_clocks(self, self.rest_states, self.reset_for or 20, self.gap)
            # What moves just before the release is answered after it.
            self.settle = None if settle is None else max(settle, self.latency["count"].max + 1)

    def _latencies(self) -> None:
        """How long each output takes, over many edges at all phases."""
        rng = random.Random(1)  # noqa: S311  # phases, no secrets
        script = self.script()
        way = 1
        for _ in range(240):
            if rng.random() < 0.2:  # a reversal now and then
                way = -way
            script.step(way, GAP + rng.random())
        (trace,) = self.play(script)
        main = self.main(trace)
        self.latency["count"] = self._span(main, script)
        steps = trace.step if trace.step is not None else trace.up
        if trace.step is not None and trace.count is not None:
            self.latency["step"] = self._span(trace.step, script)
        sign = 1 if self.forward == "a-leads-b" else -1
        if trace.direction is not None and not self._direction(trace.direction, main, script, sign):
            # Of an enumeration, the first value may be none that it takes while it moves.
            right = next((one for one in self.roles.literals[1:] if self._direction_is(one, script, sign)), None)
            if right is None:
                doubt = "the direction is not the same for every count of one way, near the clock in which it moves"
                self.draft.doubts.append(doubt)
        if steps is not None:
            self.step_idle = value_at(steps, script.edges[0][0] - 1) or 0
            moves = changes(steps, 0, int(script.now))
            lasts = [then - now for (now, level), (then, _) in itertools.pairwise(moves) if level != self.step_idle]
            self.step_kind = "pulse" if lasts and max(lasts) == 1 else "toggle" if lasts and min(lasts) > GAP // 2 else "level"

    def _direction_is(self, literal: str, script: Script, sign: int) -> bool:
        """Whether an output that is an enumeration has this value going forward."""
        assert self.contract.direction is not None
        direction = replace(self.contract.direction, output=replace(self.contract.direction.output, literal=literal))
        self.contract = replace(self.contract, direction=direction)
        self.forward_literal = literal
        (trace,) = self.play(script)
        assert trace.direction is not None
        return self._direction(trace.direction, self.main(trace), script, sign) and self.forward_level == 1

    def _direction(self, direction: Series, main: Series, script: Script, sign: int) -> bool:
        """The level going forward, in which clock beside the count's, and whether it stays; whether it tells the way at all."""
        counted = [
            (answers[0][0], way * sign)
            for clock, _, _, way in script.edges
            if (answers := changes(main, clock - 1, clock + GAP - 1))
        ]
        self.direction_offset = None
        for offset in sorted(range(-8, 9), key=abs):
            told = {way: {value_at(direction, clock + offset) for clock, its in counted if its == way} for way in (1, -1)}
            if all(len(levels) == 1 for levels in told.values()) and told[1] != told[-1]:
                self.direction_offset, self.forward_level = offset, next(iter(told[1])) or 0
                break
        tells = self.direction_offset is not None
        if self.direction_offset is None:
            self.direction_offset, self.forward_level = 0, 1
        reversals = sum(1 for (_, one), (_, other) in itertools.pairwise(counted) if one != other)
        span = self._span(direction, script)
        still = len(direction.period) <= reversals + 4
        self.always = self.every == 1 and still and span.max - span.min <= 1 and span.max < GAP // 2
        at_count = self.latency["count"]
        self.latency["direction"] = (
            span if self.always else Span(at_count.min + self.direction_offset, at_count.max + self.direction_offset)
        )
        # A value of an enumeration that is taken backward is told as that of the other way.
        return tells and (self.forward_level == 1 or not self.roles.literals)

    @staticmethod
    def _span(series: Series, script: Script) -> Span:
        found = []
        for clock, _, _, _ in script.edges:
            answers = changes(series, clock - 1, clock + GAP - 1)
            if answers:
                found.append(answers[0][0] - clock)
        return Span(min(found), max(found)) if found else Span(0, GAP)

    def _illegal(self) -> None:
        """What both lines at once do to the count and the error output."""
        script = self.script()
        rng = random.Random(3)  # noqa: S311  # distances, no secrets
        for state in A_LEADS_B * 10:
            script.go_to(state).wait(2 * GAP + rng.randrange(SPREAD))
            script.mark("both")
            script.toggle("a", "b")
            script.wait(3 * GAP)
        (trace,) = self.play(script)
        marks = script.marks["both"]
        moved = [changes(self.main(trace), clock - 1, clock + 2 * GAP) for clock in marks]
        self.illegal_holds = not any(moved)
        if trace.error is None:
            return
        self.error_idle = value_at(trace.error, marks[0] - 1) or 0
        answers = [changes(trace.error, clock - 1, clock + 2 * GAP) for clock in marks]
        told = [one for one in answers if one]
        if not told:
            self.draft.doubts.append("the error output says nothing of any illegal transition")
        delays = [one[0][0] - clock for one, clock in zip(answers, marks, strict=True) if one]
        self.latency["error"] = Span(min(delays), max(delays)) if delays else self.latency["count"]
        lasts = [one[1][0] - one[0][0] for one in told if len(one) > 1]
        self.error_kind = "pulse" if lasts and max(lasts) == 1 else "sticky"
        if self.contract.error and self.contract.error.kind == "counter":
            self.error_kind = "counter"
            self.error_holds = len(told) == (1 << self.contract.error.output.width) - 1 < len(marks)
        elif self.error_kind == "pulse" and len(told) < len(marks):
            self.draft.doubts.append(f"only {len(told)} of {len(marks)} illegal transitions are reported")

    def _index(self) -> None:
        """In which states the index sets the count, and to what."""
        scripts = []
        for n, state in enumerate(A_LEADS_B):
            script = self.script()
            script.walk(24 + 4 * n).go_to(state).wait(GAP)
            script.mark("on")
            script.toggle("index")
            script.wait(2 * GAP)
            script.mark("off")
            script.toggle("index")
            scripts.append(script.wait(2 * GAP))
        hits, delays, values, self.index_edge = [], [], [], False
        for state, script, trace in zip(A_LEADS_B, scripts, self.play(*scripts), strict=True):
            if trace.count is None:
                continue
            on = script.marks["on"][0]
            answers = changes(trace.count, on - 1, on + 2 * GAP)
            if answers:
                hits.append(state)
                delays.append(answers[0][0] - on)
                values.append(answers[-1][1])
        self.index_states, self.index_value = hits, values[0] if values and len(set(values)) == 1 else None
        if delays:
            self.latency["index"] = Span(min(delays), max(delays))
            self._index_sense()

    def _index_sense(self) -> None:
        """Whether the index holds the count while it is active: moved on inside, or released from reset with it on."""
        inside = next((s for n, s in enumerate(A_LEADS_B) if {s, A_LEADS_B[(n + 1) % 4]} <= set(self.index_states)), None)
        scripts = []
        if inside is not None:
            script = self.script()
            script.walk(20).go_to(inside).wait(GAP)
            script.toggle("index")
            script.wait(2 * GAP)
            script.mark("moved")
            # All round if it acts everywhere, else to and fro.
            scripts.append(script.walk(4) if len(self.index_states) == len(A_LEADS_B) else script.walk(1).walk(-1))
        if self.start_count != self.index_value:
            script = self.script(self.index_states[0])
            script.firsts["index"] = 1
            script.mark("released")
            scripts.append(script.wait(GAP))
        outside = next((n for n, s in enumerate(A_LEADS_B) if s not in self.index_states), None)
        self.step_counts = False
        if outside is not None:
            # Moved into the index, both ways: a step that is counted shows as one off.
            for way in (1, -1):
                script = self.script()
                script.walk(20).go_to(A_LEADS_B[outside]).wait(GAP)
                script.toggle("index")
                script.wait(GAP)
                while script.state not in self.index_states:
                    script.step(way)
                script.mark("entered")
                scripts.append(script.wait(GAP))
        for script, trace in zip(scripts, self.play(*scripts) if scripts else [], strict=True):
            assert trace.count is not None
            if "entered" in script.marks:
                self.step_counts |= value_at(trace.count, int(script.now)) != self.index_value
            elif "moved" in script.marks:
                self.index_edge |= bool(changes(trace.count, script.marks["moved"][0], int(script.now)))
            else:
                self.index_edge |= value_at(trace.count, int(script.now)) != self.index_value

    # --- the file ---------------------------------------------------------------------------------------------------

    def _write(self) -> None:
        add, roles = self.draft.add, self.roles
        if roles.reset:
            active, kind = "high" if self.reset_on else "low", "sync" if self.asynchronous is False else "async"
            assumed = [word for word, value in (("its kind", self.asynchronous), ("the clocks", self.reset_for)) if value is None]
            add(
                "reset",
                f"{{port: {roles.reset.name}, active: {active}, kind: {kind}, clocks: {self.reset_for or 20}}}",
                f"measured; assumed: {' and '.join(assumed)}" if assumed else "measured; the fewest clocks that do",
            )
        else:
            add("reset", "none", "named")
        settle = max(8, self.passes + 2 * self.latency["count"].max) if self.settle is None else self.settle
        states = "any" if len(self.rest_states) == len(A_LEADS_B) else f"[{', '.join(f'{state!r}' for state in self.rest_states)}]"
        count = f"count: {self.start_count}, " if roles.count else ""
        how = "measured; settle is assumed" if self.settle is None else "measured"
        zeroed = ", power_up: zero" if self.contract.start.zeroed else ""
        add("start", f"{{{count}rest_states: {states}, settle: {settle}{zeroed}}}", how)
        a, b = (_line_text(line) for line in roles.lines)
        index = ""
        if roles.index:
            index = f", index: {_line_text(roles.index)}"
        add("lines", f"{{a: {a}, b: {b}{index}}}", "named")
        if roles.constants or roles.latch:
            low = ", active: low" if roles.latch and roles.latch.active_low else ""
            sense = ", sense: edge" if self.strobes else ""
            held = [f"{roles.latch.name}: {{role: latch{low}{sense}}}"] if roles.latch else []
            held += [
                f"{one.port}: {one.value}" if one.width == 1 else f"{one.port}: {{value: {one.value}, width: {one.width}}}"
                for one in roles.constants
            ]
            how = "assumed: held at these levels" if roles.constants else "named; when it acts is measured"
            add("inputs", f"{{{', '.join(held)}}}", how)
        self._write_outputs()
        if not self.illegal_holds:
            add("illegal", "{count: any}", "measured: the count moves")
        if roles.index and roles.count:
            self._write_index()
        if self.filters:
            bursts = ", bursts: open" if self.bursts else ""
            add("filter", f"{{rejects: {self.rejects}, passes: {self.passes}{bursts}}}", f"measured, to {LENGTHS[-1]} clocks")
        if self.shortest > 1:
            add("shortest_state", str(self.shortest), f"measured, to {LENGTHS[-1]} clocks")
        add(
            "latency",
            f"{{{', '.join(f'{name}: {_span_text(span)}' for name, span in self._told_latencies().items())}}}",
            "measured",
        )

    def _told_latencies(self) -> dict[str, Span]:
        main = "count" if self.roles.count else "step"
        told = {main: self.latency["count"]}
        if self.roles.direction and self.latency["direction"] != told[main]:
            told["direction"] = self.latency["direction"]
        if self.roles.count and self.roles.steps and self.latency["step"] != told[main]:
            told["step"] = self.latency["step"]
        if "inputs" in self.latency and self.latency["inputs"] != Span(1, 1):
            told["inputs"] = self.latency["inputs"]
        for name in ("error", "index"):
            if name in self.latency and self.latency[name] != told[main]:
                told[name] = self.latency[name]
        return told

    def _write_outputs(self) -> None:
        add, roles = self.draft.add, self.roles
        if roles.count:
            signed = "true" if roles.signed else "false"
            at = f', at: "{self.at}"' if self.every > 1 else ""
            add(
                "count",
                f"{{port: {_output_text(roles.count)}, width: {roles.count.width}, signed: {signed},"
                f" resolution: x{4 // self.every}{at}, forward: {self.forward}{self._overflow()}}}",
                "measured",
            )
        if roles.direction:
            valid = "always" if self.always else "with-count"
            forward = self.forward_literal if roles.literals else str(self.forward_level)
            add("direction", f"{{port: {_output_text(roles.direction)}, forward: {forward}, valid: {valid}}}", "measured")
        if roles.steps:
            active = ", active: low" if self.step_idle and self.step_kind != "toggle" else ""
            ports = ", ".join(f"{'port' if one.name == 'step' else one.name}: {_output_text(one)}" for one in roles.steps)
            add("step", f"{{{ports}, kind: {self.step_kind}{active}}}", "measured")
        if roles.error and self.error_kind == "counter":
            holds = ", overflow: hold" if self.error_holds else ""
            add("error", f"{{port: {_output_text(roles.error)}, kind: counter, width: {roles.error.width}{holds}}}", "measured")
        elif roles.error:
            active = ", active: low" if self.error_idle else ""
            add("error", f"{{port: {_output_text(roles.error)}, kind: {self.error_kind}{active}}}", "measured")

    def _overflow(self) -> str:
        """What the count does at its ends, if they can be reached in reasonable time."""
        assert self.contract.count is not None
        count = self.contract.count
        way = 1 if self.forward == "a-leads-b" else -1
        gap = max(2 * self.passes, self.latency["count"].max, self.shortest) + 4
        far = (count.size + 4) * self.every
        if far * gap > _FARTHEST_CLOCKS:
            self.draft.doubts.append("the count was not driven to its ends; that it wraps there is assumed")
            return ""
        up, down = self.script().walk(way * far, gap).wait(GAP), self.script().walk(-way * far, gap).wait(GAP)
        rising, falling = (
            [self.start_count, *(value for _, value in changes(self.main(trace), 24, int(script.now)))]
            for script, trace in zip((up, down), self.play(up, down), strict=True)
        )
        over = next(((one, other) for one, other in itertools.pairwise(rising) if other < one), None)
        if over is None:
            low, high = min(falling), max(rising)
            limits = f", lowest: {low}, highest: {high}" if (low, high) != (count.lowest, count.highest) else ""
            return f", overflow: hold{limits}"
        if over == (count.highest, count.lowest):
            return ""
        if over[1] == 0:
            return f", overflow: modulo, modulo: {over[0] + 1}"
        self.draft.doubts.append(f"the count goes from {over[0]} to {over[1]}, which no kind of overflow does")
        return ""

    def _write_index(self) -> None:
        states = self.index_states
        if not states:
            self.draft.doubts.append("the index line does nothing to the count in any state")
            return
        when = {name: {state[place] for state in states} for place, name in enumerate(("a", "b"))}
        gate = ", ".join(f"{name}: {next(iter(levels))}" for name, levels in when.items() if len(levels) == 1)
        expected = [
            s for s in A_LEADS_B if all(len(levels) > 1 or s[place] in levels for place, levels in enumerate(when.values()))
        ]
        if sorted(expected) != sorted(states) or self.index_value is None:
            self.draft.doubts.append(f"the index acts in the states {', '.join(states)}, which no levels of A and B tell")
        action = "zero" if not self.index_value else f"load, value: {self.index_value}"
        gated = f", when: {{{gate}}}" if gate else ""
        sense = ", sense: edge" if self.index_edge or self.step_counts else ""
        sense += ", step_together: counted" if self.step_counts else ""
        how = "measured" if sense else "measured; where nothing speaks against it, it is taken to act as a level"
        self.draft.add("index", f"{{action: {action}{gated}{sense}}}", how)


def _output_text(output: Output) -> str:
    parts = [
        one.port
        if one.high is None
        else f'"{one.port}[{one.high}]"'
        if one.high == one.low
        else f'"{one.port}[{one.high}:{one.low}]"'
        for one in output.slices
    ]
    return parts[0] if len(parts) == 1 else f"[{', '.join(parts)}]"


def _line_text(line: Port) -> str:
    name = line.name if line.bit is None else f'"{line.name}[{line.bit}]"'
    return f"{{port: {name}, active: low}}" if line.active_low else name


def _span_text(span: Span) -> str:
    return str(span.min) if span.exact else f"[{span.min}, {span.max}]"
