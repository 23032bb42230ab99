"""The contract: what a decoder file declares about a decoder, as frozen values.

Nothing here is guessed. Times are clocks unless a name ends in ``_ps``; levels are logical (1 = active), whatever the
polarity of the port.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

#: Name of the module that the tool puts around a decoder.
BENCH = "tbkit_bench"

#: What a profile does to an input, with the role of that input.
DEEDS = {
    "clear": "clear-error",
    "zero": "clear-count",
    "preload": "preload",
    "disable": "enable",
    "disarm": "arm",
    "arm": "arm-once",
}

#: What is called a clock of a decoder that has none.
NO_CLOCK_PS = 1000
#: The longest time, in clocks, in which the bench does not ask a count that is read through a latch.
LATCH_GAP = 4

#: Line states AB in the order in which A leads B.
A_LEADS_B = ("00", "10", "11", "01")


@dataclass(frozen=True, slots=True)
class Span:
    """An inclusive range of clocks."""

    min: int
    max: int

    @property
    def exact(self) -> bool:
        return self.min == self.max


@dataclass(frozen=True, slots=True)
class Design:
    """The RTL: top module, source files in order, parameter values; ``standard`` is that of VHDL sources, else empty."""

    top: str
    sources: tuple[Path, ...]
    include_dirs: tuple[Path, ...] = ()
    parameters: tuple[tuple[str, int | str], ...] = ()
    standard: str = ""

    @property
    def language(self) -> str:
        return "vhdl" if self.standard else "verilog"


@dataclass(frozen=True, slots=True)
class Port:
    """A one-bit connection: a whole port, or one bit of a vector port; ``active_low`` inverts it."""

    name: str
    bit: int | None = None
    active_low: bool = False


@dataclass(frozen=True, slots=True)
class Slice:
    """Bits ``high`` down to ``low`` of an output port; None: the whole port. ``port.element`` is part of a record."""

    port: str
    high: int | None = None
    low: int | None = None


@dataclass(frozen=True, slots=True)
class Output:
    """One output: ``width`` bits, the most significant slice first; ``active_low`` inverts a single bit.

    ``literal``: of an enumeration; the output is 1 while the port has that value.
    """

    name: str
    slices: tuple[Slice, ...]
    width: int = 1
    active_low: bool = False
    literal: str = ""


@dataclass(frozen=True, slots=True)
class Clock:
    """The clock of the decoder; ``period_ps`` is the time in which everything here is counted.

    Attributes:
        port: empty for a decoder without a clock, which does not see the periods.
        tick: an input that is up in the last of ``every`` clocks only, and without which the decoder does nothing: a period
            is then ``every`` clocks long.
    """

    port: str
    period_ps: int
    falling: bool = False
    tick: Port | None = None
    every: int = 1

    @property
    def edge_ps(self) -> int:
        """Time between active edges of the port."""
        return self.period_ps // self.every


@dataclass(frozen=True, slots=True)
class Reset:
    """``clocks`` is how long it must be asserted; ``asynchronous`` or not makes no difference to the stimulus."""

    port: Port
    asynchronous: bool
    clocks: int


@dataclass(frozen=True, slots=True)
class Start:
    """What holds after reset (after power-up if there is none).

    Attributes:
        count: the count.
        rest_states: AB states in which the lines may rest while that is so.
        settle: clocks after the release from which motion is followed.
        zeroed: registers are 0 at power-up, as in most FPGAs, also where the RTL does not say so.
    """

    count: int = 0
    rest_states: tuple[str, ...] = A_LEADS_B
    settle: int = 8
    zeroed: bool = False


@dataclass(frozen=True, slots=True)
class Constant:
    """An input held at one value for the whole run."""

    port: str
    value: int
    width: int = 1


@dataclass(frozen=True, slots=True)
class Input:
    """An input that the profile acts on.

    Attributes:
        role: ``clear-error``, ``clear-count`` and ``preload`` (the count becomes ``value``), ``enable`` (without it nothing is
            counted), ``arm`` (without it the index does nothing), ``arm-once`` (after it the index acts once) or ``latch`` (the
            count's port takes the count).
        edge: a clear, preload or latch acts once, as it is asserted, not for as long as it is.
        counts_last: a step in the same clock counts on from ``value`` instead of being lost.
        resyncs: an enable starts to count from the state in which it finds the lines; otherwise what it makes of a motion that
            it has not seen is its own business.
    """

    port: Port
    role: str
    value: int = 0
    edge: bool = False
    counts_last: bool = False
    resyncs: bool = True


@dataclass(frozen=True, slots=True)
class Count:
    """The count output.

    Attributes:
        states_per_count: 1 for x4, 2 for x2, 4 for x1.
        at: the state whose entry, going forward, moves an x1 or x2 count (x2: also the opposite state).
        a_leads_forward: whether the count goes up while A leads B.
        overflow: ``wrap``, ``hold`` (stops at the ends) or ``modulo``.
        lowest, highest: the ends of the count's range.
    """

    output: Output
    signed: bool
    states_per_count: int
    at: str
    a_leads_forward: bool
    overflow: str
    lowest: int
    highest: int

    @property
    def width(self) -> int:
        return self.output.width

    @property
    def size(self) -> int:
        """How many different counts there are."""
        return self.highest - self.lowest + 1


@dataclass(frozen=True, slots=True)
class Direction:
    """``with_count``: means something only when the count (or step) moves; otherwise it always tells the last motion."""

    output: Output
    forward_level: int
    with_count: bool


@dataclass(frozen=True, slots=True)
class Step:
    """Steps on one output, named ``step``, or on one for each way, named ``up`` and ``down``.

    ``kind``: a ``pulse`` of one clock, a ``toggle``, or a ``level`` that rises with each step and falls before the next.
    """

    kind: str
    outputs: tuple[Output, ...]


@dataclass(frozen=True, slots=True)
class Error:
    """How illegal transitions are told.

    Attributes:
        kind: a ``pulse`` of one clock for each, ``sticky`` (stays until cleared) or a ``counter``.
        wins: what a sticky error does when set and cleared at once: ``set``, ``clear`` or ``either``.
        holds: a counter stops at its end instead of wrapping.
    """

    output: Output
    kind: str
    wins: str = "either"
    holds: bool = False

    @property
    def sticky(self) -> bool:
        return self.kind == "sticky"


@dataclass(frozen=True, slots=True)
class Index:
    """What the index does: while it is active (``edge``: once as it becomes so) with A and B at the given levels.

    Attributes:
        action: ``set`` (the count becomes ``value``), ``latch`` (``output`` takes the count) or ``pulse`` (``output`` is up
            for one clock).
        counts_last: a step in the same clock counts on from ``value`` instead of being lost.
    """

    a: int | None = None
    b: int | None = None
    edge: bool = False
    action: str = "set"
    value: int = 0
    counts_last: bool = False
    output: Output | None = None


@dataclass(frozen=True, slots=True)
class Latency:
    """From the first active clock edge that sees the cause (number 1) to the edge at which the output changes.

    ``clear`` is that of a clear-error input, ``inputs`` that of all others.
    """

    count: Span
    direction: Span
    step: Span
    error: Span
    index: Span
    clear: Span
    inputs: Span = Span(1, 1)

    @property
    def longest(self) -> int:
        spans = (self.count, self.direction, self.step, self.error, self.index, self.clear, self.inputs)
        return max(span.max for span in spans)


@dataclass(frozen=True, slots=True)
class Filter:
    """Outside behaviour of the input filter, per line, in clocks.

    Attributes:
        rejects: pulses up to this length never pass.
        passes: pulses from this length on always pass.
        bursts_open: an integrating filter, which may add up pulses that follow one another closely.
    """

    rejects: int = 0
    passes: int = 1
    bursts_open: bool = False


@dataclass(frozen=True, slots=True)
class Contract:
    """Everything a decoder file says.

    Attributes:
        file: where it was read; ``places``: the lines of its keys.
        illegal_moves: by how much the count moves where both lines change at once, for each state 2·A + B before; None: anything.
    """

    file: Path
    design: Design
    clock: Clock
    a: Port
    b: Port
    latency: Latency
    index_line: Port | None = None
    reset: Reset | None = None
    start: Start = field(default_factory=Start)
    constants: tuple[Constant, ...] = ()
    inputs: tuple[Input, ...] = ()
    count: Count | None = None
    direction: Direction | None = None
    step: Step | None = None
    error: Error | None = None
    illegal_moves: tuple[int, ...] | None = (0, 0, 0, 0)
    index: Index | None = None
    filter: Filter = field(default_factory=Filter)
    shortest_state: int = 1
    timers: bool = False
    places: dict[str, int] = field(default_factory=dict, compare=False, repr=False)

    def input(self, role: str) -> Input | None:
        """The input with this role, if there is one."""
        return next((one for one in self.inputs if one.role == role), None)

    @property
    def illegal_holds(self) -> bool:
        """Whether the count stays where it is when both lines change at once."""
        return self.illegal_moves is not None and not any(self.illegal_moves)

    @property
    def main_latency(self) -> Span:
        """The count's latency, or that of the steps of a decoder without a count."""
        return self.latency.count if self.count else self.latency.step

    @property
    def outputs(self) -> tuple[Output, ...]:
        """Every output, in the order in which they are recorded."""
        found = [self.count.output] if self.count else []
        found += [self.direction.output] if self.direction else []
        found += self.step.outputs if self.step else ()
        found += [self.error.output] if self.error else []
        found += [self.index.output] if self.index and self.index.output else []
        return tuple(found)

    @property
    def states_per_count(self) -> int:
        """1 for x4, 2 for x2, 4 for x1; 1 for a decoder that gives steps only."""
        return self.count.states_per_count if self.count else 1

    @property
    def settle_clocks(self) -> int:
        """Clocks after the last edge by which every output is at rest."""
        asked = LATCH_GAP + self.latency.inputs.max if self.input("latch") else 0
        return max(self.start.settle, self.filter.passes + self.latency.longest + asked + 2)
