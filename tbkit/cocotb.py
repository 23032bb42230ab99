"""For those who have cocotb tests of their own: an encoder to drive any handles, and a scoreboard to watch any outputs.

    from tbkit.cocotb import EncoderDriver, Scoreboard

    scoreboard = Scoreboard(dut, "traverse.yaml")       # before the reset is released
    encoder = EncoderDriver(dut.a, dut.b, lines=500, clock=dut.clk)
    await encoder.move("2 rev", "600 rpm", accel="50 rev/s2")
    await scoreboard.assert_right()

The expectation is that of ``tbkit verify``: what the contract in the decoder file allows for the levels that the decoder
samples. The clock must run evenly, at the rate that the decoder file tells.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import cocotb
import numpy as np
from cocotb.clock import Clock
from cocotb.simtime import get_sim_time
from cocotb.triggers import ReadOnly, Timer

from tbkit.contract import Contract, Output, Port, Slice
from tbkit.contract_file import read_contract
from tbkit.encoder import LINES, Edges, Line
from tbkit.errors import UnfitError
from tbkit.findings import Score
from tbkit.lineoracle import expect
from tbkit.motion import Crossings, Int64s
from tbkit.profile import Action, Disturbance, Dither, Encoder, Move, Profile, Rest
from tbkit.profile_file import read_profile
from tbkit.render import driven
from tbkit.scoreboard import judge
from tbkit.shaftoracle import rests
from tbkit.stimulus import CLEARANCE_PS, DRIVES, SIGNALS, Stimulus, Unfold, compile_stimulus, lay_out
from tbkit.trace import Series, as_trace, compressed
from tbkit.units import Scale, parse

#: How many findings an assertion tells.
_TOLD = 5


def _now_ps() -> int:
    return round(get_sim_time("ps"))


def _handle(dut: Any, name: str) -> Any:
    """A port by its name, or part of a record.

    Raises:
        LookupError: it is not there.
    """
    found = dut
    for part in name.split("."):
        if not hasattr(found, part):
            msg = f"{dut._name} has no port {name!r}, which the decoder file names"  # noqa: SLF001  # cocotb's only name
            raise LookupError(msg)
        found = getattr(found, part)
    return found


def _level(handle: Any, bit: int | None) -> int:
    """The level of a line; unknown counts as 0."""
    value = handle.value if bit is None else handle.value[bit]
    return int(value) if value.is_resolvable else 0


def contract_of(decoder: str | Path | Contract) -> Contract:
    """The contract in a decoder file.

    Raises:
        InputError: with every problem of the file.
    """
    return decoder if isinstance(decoder, Contract) else read_contract(Path(decoder))


class _Pin:
    """A one-bit input that is written: a port, or a bit of a vector. ``vectors`` keeps what was written to each of these."""

    def __init__(self, handle: Any, bit: int | None, *, active_low: bool, vectors: dict[int, Any]) -> None:
        self.handle, self.bit, self.low, self.vectors = handle, bit, active_low, vectors

    def write(self, level: int) -> None:
        level ^= self.low
        if self.bit is None:
            self.handle.value = level
        else:
            # What is read back within a time step is not yet what was written in it.
            value = self.vectors.setdefault(id(self.handle), self.handle.value)
            value[self.bit] = level
            self.handle.value = value


class EncoderDriver:
    """An incremental encoder on three handles: each call moves the shaft on from where it stands.

    A line that is a bit of a vector is given as ``(dut.ab, 1)``.

    What an encoder with hysteresis remembers is forgotten between calls.

    ``lines`` are cycles a revolution, ``pitch`` the length of a cycle of a linear encoder (such as ``20 um``); ``encoder`` has its
    tolerances. With ``clock`` edges keep away from its active edges, as those of ``tbkit verify`` do. Handles of lines that are
    low while active are inverted with ``active_low``.
    """

    def __init__(
        self,
        a: Any,
        b: Any,
        index: Any = None,
        *,
        lines: int | None = None,
        pitch: str | None = None,
        encoder: Encoder | None = None,
        clock: Any = None,
        active_low: bool = False,
        seed: int = 1,
    ) -> None:
        vectors: dict[int, Any] = {}
        self._pins = {
            name: _Pin(*(given if isinstance(given, tuple) else (given, None)), active_low=active_low, vectors=vectors)
            for name, given in (("a", a), ("b", b), ("index", index))
            if given is not None
        }
        given = encoder or Encoder()
        self.encoder = replace(
            given, lines=lines if lines is not None else given.lines, pitch=parse(pitch, "length") if pitch else given.pitch
        )
        self._clock = clock
        self._seed = seed
        self._calls = 0
        self._disturbances: tuple[Disturbance, ...] = ()
        self._place: Fraction | None = None
        self._edge_ps = self._half_ps = self._period_ps = 0
        for name, level in zip(("a", "b"), self.encoder.start, strict=True):
            self._pins[name].write(int(level))
        if index is not None:
            self._pins["index"].write(0)

    def disturb(self, *disturbances: Disturbance) -> None:
        """What goes wrong in every call from now on; none: nothing."""
        self._disturbances = disturbances

    async def move(self, by: str, speed: str, *, accel: str | None = None, jerk: str | None = None) -> None:
        """Move over a distance, as the action ``move`` of a profile does.

        Raises:
            ValueError: a text is no such quantity.
            UnfitError: a unit has no meaning for this encoder, or the move cannot be done.
        """
        bounds = (parse(accel, "acceleration") if accel else None, parse(jerk, "jerk") if jerk else None)
        await self.act(Move(parse(by, "distance"), parse(speed, "speed"), *bounds))

    async def rest(self, time: str) -> None:
        """Stand still."""
        await self.act(Rest(parse(time, "time")))

    async def dither(self, every: str, times: int, over: str = "1 states") -> None:
        """Rock to and fro, one way taking ``every``."""
        await self.act(Dither(parse(over, "distance"), parse(every, "time"), times))

    async def act(self, *actions: Action) -> None:
        """Play actions of a profile, one after another.

        Raises:
            UnfitError: a unit has no meaning for this encoder, or an action cannot be done.
        """
        self._calls += 1
        profile = Profile(Path(), f"call {self._calls}", "", (), None, actions, self.encoder, self._disturbances)
        await self._play(profile)

    async def play(self, profile: str | Path | Profile) -> None:
        """Play the motion and the disturbances of a profile, with this encoder's line count where it tells none.

        Raises:
            InputError: with every problem of the file.
            UnfitError: something in it needs a decoder file.
        """
        read = profile if isinstance(profile, Profile) else read_profile(Path(profile))
        lines = read.encoder.lines if read.encoder.lines is not None else self.encoder.lines
        await self._play(replace(read, encoder=replace(read.encoder, lines=lines)))

    async def _play(self, profile: Profile) -> None:
        scale = Scale.of(None, profile.encoder.lines, profile.encoder.pitch)
        seed = profile.seed if profile.seed is not None else self._seed
        scenario = lay_out(profile, scale, seed, 0, place=self._place)
        self._place = Fraction(float(scenario.motion.to_states[-1]))
        await self._find_clock()
        begin_ps = _now_ps()
        lines = scenario.disturbed.lines
        levels = {name: lines[name].first for name in self._pins}
        for line, pin in self._pins.items():
            pin.write(levels[line])
        for time, name in sorted((time, line) for line in self._pins for time in lines[line].toggles_ps.tolist()):
            if (wait := self._away(begin_ps + time) - _now_ps()) > 0:
                await Timer(wait, "ps")
            levels[name] ^= 1
            self._pins[name].write(levels[name])
        if (wait := begin_ps + scenario.motion.end_ps - _now_ps()) > 0:
            await Timer(wait, "ps")

    async def _find_clock(self) -> None:
        """Learn when active clock edges come, by watching two."""
        if self._clock is None or self._period_ps:
            return
        await self._clock.value_change
        first = _now_ps()
        await self._clock.value_change
        second = _now_ps()
        await self._clock.value_change
        self._edge_ps, self._period_ps = first, _now_ps() - first
        self._half_ps = second - first

    def _away(self, time_ps: int) -> int:
        """A time kept away from clock edges, within its clock."""
        if not self._period_ps:
            return time_ps
        phase = (time_ps - self._edge_ps) % self._period_ps
        begin, end = (0, self._half_ps) if phase < self._half_ps else (self._half_ps, self._period_ps)
        return time_ps - phase + min(max(phase, begin + CLEARANCE_PS), end - CLEARANCE_PS)


class Scoreboard:
    """Watches the lines, the inputs acted on and the outputs of a decoder, and holds them against its contract.

    Make it before the reset is released. It watches the ports that the decoder file names on ``dut``; ``handles`` gives others
    by those names.
    """

    def __init__(self, dut: Any, decoder: str | Path | Contract, handles: dict[str, Any] | None = None) -> None:
        self.contract = contract_of(decoder)
        if self.contract.clock.tick:
            msg = "a decoder with a tick is watched by `tbkit verify` only"
            raise UnfitError(msg)
        given = handles or {}

        def find(name: str) -> Any:
            return given[name] if name in given else _handle(dut, name)

        self._find: Callable[[str], Any] = find
        self._start_ps = _now_ps()
        self._lines = {signal: _LineLog(self._find(port.name), port.bit, inverted) for signal, port, inverted in self._inputs()}
        self._outputs = {output.name: _OutputLog(output, self._find) for output in self.contract.outputs}
        self._tasks = [cocotb.start_soon(log.watch(part)) for log in self._outputs.values() for part in log.handles]
        self._tasks += [cocotb.start_soon(log.watch()) for log in self._lines.values()]

    def _inputs(self) -> list[tuple[str, Port, bool]]:
        """(signal, port, whether its port is up while the signal is down)."""
        return [(text.lstrip("~").removeprefix("line_"), port, text.startswith("~")) for port, text in driven(self.contract)]

    async def check(self) -> Score:
        """What was seen so far against the contract; wait until the outputs have come to rest before.

        Raises:
            ValueError: nothing was compared.
        """
        period_ps = self.contract.clock.period_ps
        origin_ps = await self._origin(period_ps)
        periods = (_now_ps() - origin_ps) // period_ps
        none = np.zeros(0, dtype=np.int64)
        lines = {name: log.line(origin_ps) for name, log in self._lines.items()}
        still = Line(0, none)
        every = {name: lines.get(name, still) for name in SIGNALS}
        ideal = Edges(
            {name: every[name] for name in LINES}, Crossings(none, none, none.astype(bool)), 0.5, (), exact_index=False, lost_ps=0
        )
        zero = np.zeros(1, dtype=np.int64)
        stimulus = Stimulus(
            "live", 0, period_ps, {name: every[name] for name in LINES}, {name: every[name] for name in DRIVES},
            ideal, 0, 0, periods, Unfold(zero, zero), power_up=False,
        )  # fmt: skip
        score = _score(self.contract, stimulus, {name: log.series(origin_ps, period_ps) for name, log in self._outputs.items()})
        if score.comparisons == 0:
            msg = "nothing was compared; make the scoreboard before the reset is released, and let the lines move after it"
            raise ValueError(msg)
        return score

    async def assert_right(self) -> Score:
        """As :meth:`check`.

        Raises:
            AssertionError: the decoder was found wrong; the text tells the first findings.
            ValueError: nothing was compared.
        """
        score = await self.check()
        if score.findings:
            shown = [
                f"  {one.kind} at clock {one.clock}: {one.output} expected {one.expected}, found {one.found}; lines AB {one.states}"
                for one in score.findings[:_TOLD]
            ]
            totals = ", ".join(f"{kind} x{many}" for kind, many in score.totals.items())
            raise AssertionError("\n".join([f"the decoder is wrong: {totals}", *shown]))
        return score

    async def _origin(self, period_ps: int) -> int:
        """A time at or before the start at which a clock period begins."""
        clock = self.contract.clock
        if not clock.port:
            return self._start_ps
        handle = self._find(clock.port)
        await (handle.falling_edge if clock.falling else handle.rising_edge)
        now_ps = _now_ps()
        return now_ps - -(-(now_ps - self._start_ps) // period_ps) * period_ps


class _LineLog:
    """The levels of an input, as it is watched."""

    def __init__(self, handle: Any, bit: int | None, inverted: bool) -> None:
        self.handle, self.bit, self.inverted = handle, bit, int(inverted)
        self.first = _level(handle, bit) ^ self.inverted
        self.changes: list[tuple[int, int]] = []

    async def watch(self) -> None:
        while True:
            await self.handle.value_change
            await ReadOnly()
            self.changes.append((_now_ps(), _level(self.handle, self.bit) ^ self.inverted))

    def line(self, origin_ps: int) -> Line:
        level, toggles = self.first, []
        for time, new in self.changes:
            if new != level:
                level = new
                toggles.append(time - origin_ps)
        return Line(self.first, np.array(toggles, dtype=np.int64))


class _OutputLog:
    """The values of an output, as it is watched."""

    def __init__(self, output: Output, find: Callable[[str], Any]) -> None:
        if output.literal:
            msg = f"the output {output.name!r} is an enumeration, which cocotb does not show; use `tbkit verify`"
            raise UnfitError(msg)
        self.output = output
        self.parts = [(find(one.port), one) for one in output.slices]
        self.handles = list({id(handle): handle for handle, _ in self.parts}.values())
        self.seen: list[tuple[int, int, bool]] = [(_now_ps(), *self._read())]

    def _read(self) -> tuple[int, bool]:
        value, unknown = 0, False
        for handle, one in self.parts:
            bits, width, bad = _bits_of(handle, one, self.output.width)
            value, unknown = value << width | bits, unknown or bad
        return (value ^ 1 if self.output.active_low else value), unknown

    async def watch(self, handle: Any) -> None:
        while True:
            await handle.value_change
            await ReadOnly()
            self.seen.append((_now_ps(), *self._read()))

    def series(self, origin_ps: int, period_ps: int) -> Series:
        period = np.maximum((np.array([time for time, *_ in self.seen], dtype=np.int64) - origin_ps) // period_ps, 0)
        last = np.flatnonzero(np.append(period[1:] != period[:-1], True))
        value = np.array([value - (1 << 64) if value >= 1 << 63 else value for _, value, _ in self.seen], dtype=np.int64)
        return compressed(period[last], value[last], np.array([bad for *_, bad in self.seen])[last])


def _bits_of(handle: Any, one: Slice, width: int) -> tuple[int, int, bool]:
    """(value, width, whether it is unknown) of a slice; of a whole port its width is that of the output."""
    value = handle.value
    if isinstance(value, int):
        return value % (1 << width), width, False
    text = str(value)
    if one.high is not None and one.low is not None:
        text = text[len(text) - 1 - one.high : len(text) - one.low]
    if set(text) <= {"0", "1"}:
        return int(text, 2), len(text), False
    return 0, len(text), True


def _score(contract: Contract, stimulus: Stimulus, series: dict[str, Series]) -> Score:
    expectation = expect(contract, stimulus)
    events = expectation.events
    doubtful: Int64s = events.period[events.illegal | events.open] * stimulus.period_ps
    return judge(contract, stimulus, expectation, rests(contract, stimulus, doubtful), as_trace(contract, series))


async def verify_profile(dut: Any, decoder: str | Path | Contract, profile: str | Path | Profile, seed: int = 1) -> Score:
    """Play a profile as ``tbkit verify`` does, clock and reset included, edge by edge, and check it with both oracles.

    The ports that the decoder file names must not be driven by anything else. Constants of the decoder file are driven too.

    Raises:
        InputError: with every problem of a file.
        UnfitError: the profile needs something that the decoder does not have.
        ValueError: nothing was compared.
    """
    contract = contract_of(decoder)
    if contract.clock.tick:
        msg = "a decoder with a tick is played by `tbkit verify` only"
        raise UnfitError(msg)
    read = profile if isinstance(profile, Profile) else read_profile(Path(profile))
    stimulus = compile_stimulus(read, contract, seed)
    if stimulus.power_up and contract.reset is None and _now_ps() > 0:
        msg = f"the profile {read.name!r} begins at power-up; without a reset it can only be the first thing that is played"
        raise UnfitError(msg)
    for constant in contract.constants:
        _handle(dut, constant.port).value = constant.value
    pins: dict[str, _Pin] = {}
    vectors: dict[int, Any] = {}
    for port, text in driven(contract):
        signal = text.lstrip("~").removeprefix("line_")
        pins[signal] = _Pin(_handle(dut, port.name), port.bit, active_low=text.startswith("~"), vectors=vectors)
    lines = {**stimulus.lines, **stimulus.drives}
    clock = _clock(dut, contract)
    for name, pin in pins.items():
        pin.write(lines[name].first)
    await Timer(stimulus.period_ps, "ps")
    start_ps = _now_ps()

    def find(name: str) -> Any:
        return _handle(dut, name)

    logs = {output.name: _OutputLog(output, find) for output in contract.outputs}
    tasks = [cocotb.start_soon(log.watch(handle)) for log in logs.values() for handle in log.handles]
    if clock is not None:
        tasks.append(cocotb.start_soon(_start_later(clock, stimulus.period_ps, high=not contract.clock.falling)))
    toggles = sorted((time, name) for name in pins for time in lines[name].toggles_ps.tolist())
    levels = {name: lines[name].first for name in pins}
    for time, name in toggles:
        if (wait := start_ps + time - _now_ps()) > 0:
            await Timer(wait, "ps")
        levels[name] ^= 1
        pins[name].write(levels[name])
    await Timer(start_ps + stimulus.periods * stimulus.period_ps - _now_ps(), "ps")
    if clock is not None:
        clock.stop()
    for task in tasks:
        task.cancel()
    score = _score(contract, stimulus, {name: log.series(start_ps, stimulus.period_ps) for name, log in logs.items()})
    if score.comparisons == 0:
        msg = "nothing was compared: the contract leaves everything open that this profile does"
        raise ValueError(msg)
    return score


def _clock(dut: Any, contract: Contract) -> Clock | None:
    """The clock, not running, at its idle level."""
    if not contract.clock.port:
        return None
    period_ps, falling = contract.clock.period_ps, contract.clock.falling
    handle = _handle(dut, contract.clock.port)
    handle.value = int(falling)
    return Clock(handle, period_ps, "ps", period_high=period_ps - period_ps // 2 if falling else period_ps // 2)


async def _start_later(clock: Clock, period_ps: int, *, high: bool) -> None:
    """Start the clock so that its active edges fall at whole periods from now on."""
    await Timer(period_ps, "ps")
    clock.start(start_high=high)
