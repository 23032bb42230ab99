"""The contract: what a decoder file declares about a decoder, as frozen values.

Nothing here is guessed. Times are clocks unless a name ends in ``_ps``; levels are logical (1 = active), whatever the
polarity of the port.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

#: Name of the module that the tool puts around a decoder.
BENCH = "tbkit_bench"

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
    """The RTL: top module, source files in order, parameter values."""

    top: str
    sources: tuple[Path, ...]
    include_dirs: tuple[Path, ...] = ()
    parameters: tuple[tuple[str, int | str], ...] = ()


@dataclass(frozen=True, slots=True)
class Port:
    """A one-bit connection: a whole port, or one bit of a vector port; ``active_low`` inverts it."""

    name: str
    bit: int | None = None
    active_low: bool = False


@dataclass(frozen=True, slots=True)
class Clock:
    port: str
    period_ps: int
    falling: bool = False


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
    """

    count: int = 0
    rest_states: tuple[str, ...] = A_LEADS_B
    settle: int = 8


@dataclass(frozen=True, slots=True)
class Constant:
    """An input held at one value for the whole run."""

    port: str
    value: int
    width: int = 1


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

    port: str
    width: int
    signed: bool
    states_per_count: int
    at: str
    a_leads_forward: bool
    overflow: str
    lowest: int
    highest: int

    @property
    def size(self) -> int:
        """How many different counts there are."""
        return self.highest - self.lowest + 1


@dataclass(frozen=True, slots=True)
class Direction:
    """``with_count``: means something only when the count (or step) moves; otherwise it always tells the last motion."""

    port: str
    forward_level: int
    with_count: bool


@dataclass(frozen=True, slots=True)
class Error:
    """``sticky``: stays until cleared; otherwise one clock for each illegal transition."""

    port: Port
    sticky: bool


@dataclass(frozen=True, slots=True)
class Index:
    """The count becomes 0 by the index: while it is active (``edge``: once as it becomes so) with A and B at the given levels."""

    a: int | None = None
    b: int | None = None
    edge: bool = False


@dataclass(frozen=True, slots=True)
class Latency:
    """From the first active clock edge that sees the cause (number 1) to the edge at which the output changes."""

    count: Span
    direction: Span
    step: Span
    error: Span
    index: Span
    clear: Span

    @property
    def longest(self) -> int:
        return max(self.count.max, self.direction.max, self.step.max, self.error.max, self.index.max, self.clear.max)


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
    """Everything a decoder file says; ``file`` is where it was read."""

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
    clear_error: Port | None = None
    count: Count | None = None
    direction: Direction | None = None
    step: Port | None = None
    error: Error | None = None
    illegal_holds: bool = True
    index: Index | None = None
    filter: Filter = field(default_factory=Filter)
    shortest_state: int = 1
    timers: bool = False

    @property
    def states_per_count(self) -> int:
        """1 for x4, 2 for x2, 4 for x1; 1 for a decoder that gives steps only."""
        return self.count.states_per_count if self.count else 1

    @property
    def settle_clocks(self) -> int:
        """Clocks after the last edge by which every output is at rest."""
        return max(self.start.settle, self.filter.passes + self.latency.longest + 2)
