"""Findings: what was found wrong, each of one kind."""

from __future__ import annotations

from dataclasses import dataclass

#: Every kind of finding and what it says.
KINDS = {
    "count-lost": "the lines moved and the count did not follow",
    "count-extra": "the count moved although the lines gave no cause",
    "count-wrong": "the count moved to a wrong value",
    "direction-wrong": "the direction output contradicts the motion",
    "step-wrong": "a step pulse is missing, or came without cause",
    "error-missed": "an illegal transition was not reported",
    "error-false": "an error was reported although every transition was legal",
    "error-stuck": "the error stayed when it should have ended",
    "index-missed": "the index did not act",
    "index-false": "the index acted although it gave no cause",
    "input-wrong": "an input that sets the count did not act as declared",
    "capture-wrong": "the captured count is not the count at the index",
    "late": "an output changed rightly, but later than the declared latency",
    "early": "an output changed rightly, but earlier than the declared latency",
    "roll-over-wrong": "the count went wrong where it passes an end of its range or a power of two",
    "start-up-count": "the count after reset is not the declared one",
    "unknown-level": "an output is X or Z after reset",
    "no-response": "the output never changed in the whole profile",
}


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing wrong.

    Attributes:
        kind: a key of :data:`KINDS`.
        time_ps: when, in the profile's own (unfolded) time.
        clock: the clock period, as played.
        output: which output.
        expected, found: values, or words where there is no value.
        states: the line states around it; the transition concerned stands in brackets, ``?`` where a pulse may have passed or not.
    """

    kind: str
    time_ps: int
    clock: int
    output: str
    expected: int | str
    found: int | str
    states: str

    def __post_init__(self) -> None:
        if self.kind not in KINDS:
            raise ValueError(self.kind)


@dataclass(frozen=True, slots=True)
class Score:
    """The result of one profile.

    Attributes:
        comparisons: how many comparisons the contract allowed; the same for every simulator.
        worst_latency: clocks, the longest from a line change to the output change it caused; None if none was seen.
        open_clocks: clock periods in which the contract left the count open.
        findings: the first of each kind, in order of time.
        totals: how many there were of each kind.
    """

    comparisons: int
    worst_latency: int | None
    open_clocks: int
    findings: tuple[Finding, ...]
    totals: dict[str, int]
