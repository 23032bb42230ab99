"""What the contract allows for one stimulus, as the line oracle hands it to the scoreboard.

Periods are clock periods (see :mod:`tbkit.stimulus`); an output that changes at clock edge n has its new value from
period n on, counted so that latency 0 means the same period as the cause.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Int64s = npt.NDArray[np.int64]
Bools = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Events:
    """Changes of the filtered lines in order of time, one for each period in which something changed.

    Attributes:
        period: int64[n], when the lines show it.
        before, after: int64[n], the state AB as 2·A + B.
        moved: int64[n], +1, -1 or 0 states in the decoder's forward sense; 0 also for an illegal transition.
        step: int64[n], by how much the count moves.
        illegal: bool[n], both lines changed at once.
        sets: bool[n], the index or an input sets the count here.
        to: int64[n], where it does: to what, a step in the same clock included.
        by_input: bool[n], it is an input that does, which answers as fast as the count does.
        enters_index: bool[n], the index becomes active here.
        leaves_index: bool[n], the index has stopped being active here.
        open: bool[n], the contract leaves open what happens here, and with it the position; an event whose lines do not
            change only says that something may happen.
    """

    period: Int64s
    before: Int64s
    after: Int64s
    moved: Int64s
    step: Int64s
    illegal: Bools
    sets: Bools
    to: Int64s
    by_input: Bools
    enters_index: Bools
    leaves_index: Bools
    open: Bools

    def __len__(self) -> int:
        return len(self.period)


@dataclass(frozen=True, slots=True)
class Epoch:
    """A stretch in which the contract ties every change to an event.

    Attributes:
        begin, end: periods; changes after ``begin`` and up to ``end`` are compared.
        first, last: the events ``first:last`` belong to it; those that may answer after ``end`` need not be seen.
        base: the count at ``begin``: ``start`` (the contract's start count), ``carry`` (as the events up to here make it)
            or ``adopt`` (whatever is seen, if it is one of ``allowed``).
        allowed: counts, or None for any.
    """

    begin: int
    end: int
    first: int
    last: int
    base: str
    allowed: tuple[int, ...] | None = None


@dataclass(frozen=True, slots=True)
class Hold:
    """Levels an output must keep: from period ``begin[i]`` up to before ``end[i]`` it is ``level[i]``.

    ``event[i]`` is the event that brought the level (-1: none did).
    """

    begin: Int64s
    end: Int64s
    level: Int64s
    event: Int64s


@dataclass(frozen=True, slots=True)
class Expectation:
    """Everything the line oracle says about a run.

    Attributes:
        events: what the lines do.
        epochs: where the count is tied to events (the step, in a decoder without count).
        step_epochs, error_epochs, index_epochs: where the step, the error and the index's own output are.
        direction: levels of a direction output that is always valid.
        sticky_error: levels of a sticky error.
        open_periods: clock periods in which the count is not compared.
        answered: int64[n], when a count that is read through a latch is shown anew; None: it always is.
    """

    events: Events
    epochs: tuple[Epoch, ...]
    step_epochs: tuple[Epoch, ...]
    error_epochs: tuple[Epoch, ...]
    index_epochs: tuple[Epoch, ...]
    direction: Hold | None
    sticky_error: Hold | None
    open_periods: int
    answered: Int64s | None = None
