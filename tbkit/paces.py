"""How fast a decoder can be gone at: pulses, states that follow one another, resets and what comes after them.

Each experiment is played in every length that is asked about, and at random distances, so that a decoder which looks at its lines
only now and then is met everywhere in its own cycle. Lengths are clocks.
"""

from __future__ import annotations

import itertools
import random
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

from tbkit.contract import A_LEADS_B, Span
from tbkit.probe import GAP, Script, changes, value_at
from tbkit.trace import Series, Trace

LENGTHS = (*range(1, 41), 48, 56, 64, 80, 96, 128)
#: How often each experiment is repeated, and up to how many clocks lie more or less between.
TIMES, SPREAD = 40, 24


class Rig(Protocol):
    """What plays scripts on the decoder."""

    reset_on: int

    def script(self, state: str = "00") -> Script: ...

    def play(self, *scripts: Script) -> list[Trace]: ...

    def main(self, trace: Trace) -> Series: ...

    def steps(self, trace: Trace) -> list[Series]: ...


@dataclass(frozen=True, slots=True)
class Pulses:
    """What single pulses at rest do.

    Attributes:
        rejects: up to this length none is answered.
        passes: from this length on both edges of each are answered as quickly as edges are; None if no length is.
        latest: the slowest answer to the end of a pulse; as much as that of an edge where nothing delays it.
        bursts: whether pulses that are rejected one by one are answered where many follow one another.
    """

    rejects: int
    passes: int | None
    latest: int
    bursts: bool


def shortest_from(good: Sequence[bool], lengths: Sequence[int] = LENGTHS) -> int | None:
    """The length from which on all are good; None if the longest is not."""
    bad = next((n for n in range(len(good) - 1, -1, -1) if not good[n]), -1)
    return lengths[bad + 1] if bad + 1 < len(lengths) else None


def try_pulses(rig: Rig, state: str, line: str, latency: Span) -> Pulses:
    """Pulses on a ``line`` whose edges count in ``state``."""

    def train(width: int, gaps: Sequence[int]) -> Script:
        script = rig.script(state)
        for gap in gaps:
            script.mark("begin")
            script.toggles[line] += [script.now, script.now + width]
            script.wait(width + gap)
        return script.wait(GAP)

    rng = random.Random(1)  # noqa: S311  # distances, no secrets
    gap = 2 * latency.max + 8
    gaps = [gap + rng.randrange(SPREAD) for _ in range(TIMES)]
    scripts = [train(width, gaps) for width in LENGTHS]
    prompt, silent, latest = [], [], latency.max
    for width, script, trace in zip(LENGTHS, scripts, rig.play(*scripts), strict=True):
        answers = [changes(rig.main(trace), on - 1, on + width + gap - 1) for on in script.marks["begin"]]
        delays = [
            (one[0][0] - on, one[1][0] - on - width)
            for on, one in zip(script.marks["begin"], answers, strict=True)
            if len(one) == 2  # there and back
        ]
        quick = [latency.min <= there <= latency.max and latency.min <= back <= latency.max for there, back in delays]
        prompt.append(len(quick) == TIMES and all(quick))
        silent.append(not any(answers))
        latest = max([latest, *(back for _, back in delays)])
    rejects = next((LENGTHS[n - 1] if n else 0 for n, still in enumerate(silent) if not still), LENGTHS[-1])
    bursts = False
    if rejects:
        trains = [train(rejects, [gap] * 12) for gap in range(1, min(rejects, latency.max, 8) + 1)]
        bursts = any(
            bool(changes(rig.main(trace), script.marks["begin"][0], int(script.now)))
            for script, trace in zip(trains, rig.play(*trains), strict=True)
        )
    return Pulses(rejects, shortest_from(prompt), latest, bursts)


def shortest_state(rig: Rig, gap: int, passes: int) -> int | None:
    """How long a state must last between two that last long, for both of its edges to count; ``gap`` is long.

    There and back again is a pulse of one line, and below ``passes`` an affair of the filter. None if even the longest that is
    tried is not enough.
    """
    rng = random.Random(2)  # noqa: S311  # distances, no secrets
    rests = [rng.randrange(SPREAD) for _ in range(TIMES // 2)]

    def pairs(state: str, length: int) -> Script:
        script = rig.script().go_to(state).wait(GAP)
        script.mark("begin")
        for more in rests:
            # On, on back, and there and back again.
            for first, second in ((1, 1), (-1, -1), (1, -1)):
                script.step(first, length)
                script.step(second, gap + more)
                script.mark("end")
        return script

    def outcome(script: Script, trace: Trace) -> list[tuple[int | None, int, int, int]]:
        """Where each pair has led, in how many changes, how many steps were told, and what the error output did meanwhile."""
        times = [script.marks["begin"][0], *script.marks["end"]]
        spans = [(one - 1, other - 1) for one, other in itertools.pairwise(times)]
        main, error, steps = rig.main(trace), trace.error, rig.steps(trace)
        base = value_at(main, times[0] - 1) or 0

        def gone(clock: int) -> int | None:
            """How far it has counted; where it stood before is an affair of what was played before."""
            value = value_at(main, clock)
            return None if value is None else value - base

        return [
            (
                gone(end),
                len(changes(main, begin, end)),
                sum(len(changes(one, begin, end)) for one in steps),
                len(changes(error, begin, end)) if error else 0,
            )
            for begin, end in spans
        ]

    lengths = (*LENGTHS, gap)
    scripts = [pairs(state, length) for length in lengths for state in A_LEADS_B]
    outcomes = [outcome(script, trace) for script, trace in zip(scripts, rig.play(*scripts), strict=True)]
    # The last, at length `gap`, is what the others should have done.
    good = []
    for n, length in enumerate(LENGTHS):
        pairs_of = zip(outcomes[4 * n : 4 * n + 4], outcomes[-4:], strict=True)
        kept = [m for m in range(len(outcomes[-1])) if length >= passes or m % 3 != 2]  # every third is there and back
        good.append(all(here[m] == there[m] for here, there in pairs_of for m in kept))
    return shortest_from(good)


def reset_is_asynchronous(rig: Rig, start_count: int) -> bool | None:
    """Whether the count is reset before the next clock edge; None if it is not seen to be reset."""
    script = rig.script().walk(9).wait(GAP)
    script.mark("on")
    script.toggle("reset")
    script.wait(GAP)
    (trace,) = rig.play(script)
    on = script.marks["on"][0]
    answers = [] if trace.count is None else changes(trace.count, on - 1, int(script.now))
    return answers[0][0] == on if answers and answers[-1][1] == start_count else None


def reset_clocks(rig: Rig, rest_states: Sequence[str], start_count: int) -> int | None:
    """How long a reset must last that comes after motion, together with other lines; None if no length is enough."""

    def one(state: str, length: int) -> Script:
        script = rig.script().walk(9).wait(GAP)
        script.mark("on")
        script.toggle("reset")
        script.toggle(*(name for name, old, new in zip(("a", "b"), script.state, state, strict=True) if old != new))
        script.wait(length)
        script.mark("off")
        script.toggle("reset")
        return script.wait(GAP)

    scripts = [one(state, length) for length in LENGTHS for state in rest_states]
    good = []
    for script, trace in zip(scripts, rig.play(*scripts), strict=True):
        on, end = script.marks["on"][0], int(script.now)
        alarmed = trace.error is not None and bool(changes(trace.error, on, end))
        good.append(value_at(rig.main(trace), end) == start_count and not alarmed)
    many = len(rest_states)
    return shortest_from([all(good[many * n : many * (n + 1)]) for n in range(len(LENGTHS))])


def settle_clocks(rig: Rig, rest_states: Sequence[str], clocks: int, gap: int) -> int | None:
    """How long after a reset of ``clocks`` the first edge must wait to be counted; ``gap`` is between edges."""

    def one(state: str, way: int, wait: int) -> Script:
        return Script(rig.reset_on, state).begin(clocks, wait).walk(4 * way, gap).wait(GAP)

    ways = [(state, way) for state in rest_states for way in (1, -1)]
    waits = (0, *LENGTHS)
    scripts = [one(*way, wait) for wait in (*waits, GAP) for way in ways]
    # Each is held against the same motion begun late.
    values = [
        [value for _, value in changes(rig.main(trace), clocks, int(script.now))]
        for script, trace in zip(scripts, rig.play(*scripts), strict=True)
    ]
    many = len(ways)
    right = values[-many:]
    return shortest_from([values[many * n : many * (n + 1)] == right for n in range(len(waits))], waits)
