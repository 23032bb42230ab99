"""Verifies one decoder: every stage from profiles to results, in order."""

from __future__ import annotations

import shutil
import tempfile
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np

from tbkit import bench, regression
from tbkit.contract import Contract
from tbkit.errors import SimulatorError, UnfitError
from tbkit.exercised import declared, exercised
from tbkit.findings import Finding, Score
from tbkit.lineoracle import expect
from tbkit.profile import Profile
from tbkit.scoreboard import judge
from tbkit.shaftoracle import rests
from tbkit.simulators import Simulator
from tbkit.stimulus import MOST_PERIODS, Stimulus, compile_stimulus
from tbkit.trace import read_trace

#: Told the stage, and how much of it is done if that can be counted.
Progress = Callable[[str, int | None], None]


@dataclass(frozen=True, slots=True)
class ProfileResult:
    """The result of one profile.

    ``verdict``: ``pass``, ``fail``, ``left-out`` (``reason`` says why), ``empty`` (it compared nothing) or ``not-run`` (the
    simulator failed first). ``undetectable``: what it did that no decoder of A and B could notice, in words.
    ``exercised``: how often it did what the contract declares (see :mod:`tbkit.exercised`).
    """

    name: str
    verdict: str
    seed: int
    edges: int = 0
    clocks: int = 0
    score: Score | None = None
    reason: str = ""
    undetectable: tuple[str, ...] = ()
    exercised: dict[str, int] = field(default_factory=dict)

    @property
    def findings(self) -> tuple[Finding, ...]:
        return self.score.findings if self.score else ()

    @property
    def comparisons(self) -> int:
        return self.score.comparisons if self.score else 0


@dataclass(frozen=True, slots=True)
class Results:
    """The result of one decoder on one simulator; ``failure`` is the simulator's, if it failed."""

    simulator: Simulator
    profiles: tuple[ProfileResult, ...]
    failure: SimulatorError | None

    def exercised(self, contract: Contract) -> dict[str, int]:
        """How often the whole run did each thing that the contract declares."""
        total: Counter[str] = Counter()
        for profile in self.profiles:
            total.update(profile.exercised)
        return {behaviour: total[behaviour] for behaviour in declared(contract)}

    @property
    def verdict(self) -> str:
        """``fail`` beats ``error`` beats ``pass``: a fault that was seen is a fault, whatever else went wrong."""
        verdicts = {profile.verdict for profile in self.profiles}
        if "fail" in verdicts:
            return "fail"
        if self.failure or "empty" in verdicts or "pass" not in verdicts:
            return "error"
        return "pass"


@dataclass(frozen=True, slots=True)
class Plan:
    """What will be played: the stimuli, and the profiles that are left out with the reason."""

    stimuli: tuple[Stimulus, ...]
    left_out: tuple[ProfileResult, ...]


def plan(contract: Contract, profiles: Sequence[Profile], seed: int) -> Plan:
    """Compile every profile for the decoder; those it cannot take are left out."""
    stimuli: list[Stimulus] = []
    left_out: list[ProfileResult] = []
    for profile in profiles:
        builtin = profile.file.parent.name == regression.__name__.rpartition(".")[2]
        try:
            stimuli.append(compile_stimulus(profile, contract, seed, regression.MOST_PERIODS if builtin else MOST_PERIODS))
        except UnfitError as reason:
            left_out.append(ProfileResult(profile.name, "left-out", seed, reason=str(reason)))
    return Plan(tuple(stimuli), tuple(left_out))


def score(contract: Contract, stimulus: Stimulus, trace_file: Path) -> tuple[Score, Counter[str]]:
    """Hold one trace against both oracles; also what it has exercised."""
    expectation = expect(contract, stimulus)
    events = expectation.events
    doubtful = events.period[events.illegal | events.open] * stimulus.period_ps
    trace = read_trace(trace_file, contract, stimulus.period_ps, stimulus.periods)
    result = judge(contract, stimulus, expectation, rests(contract, stimulus, doubtful.astype(np.int64)), trace)
    return result, exercised(contract, stimulus, expectation, trace)


def verify(contract: Contract, planned: Plan, simulator: Simulator, out: Path, progress: Progress) -> Results:
    """Play a plan on one simulator and judge it.

    The files of a run are taken away again unless the simulator failed.

    Raises:
        SimulatorError: the decoder would not build.
    """
    progress(f"building the bench for {simulator}", None)
    ready = bench.build(contract, simulator, out)
    (out / "run").mkdir(exist_ok=True)
    # A folder of its own, since another run of the same decoder may be under way.
    folder = Path(tempfile.mkdtemp(prefix=f"{contract.file.stem}-{simulator.name}-", dir=out / "run"))
    many = f"{len(planned.stimuli)} profile{'s' * (len(planned.stimuli) != 1)}"
    played = bench.play(ready, contract, planned.stimuli, folder, lambda done: progress(f"playing {many} on {simulator}", done))
    results: list[ProfileResult] = []
    failure = played.failure
    for n, stimulus in enumerate(planned.stimuli):
        progress(f"judging {many}", n)
        try:
            results.append(_judged(contract, stimulus, played.traces.get(n)))
        except SimulatorError as error:
            failure = failure or error
            results.append(replace(_unjudged(stimulus), reason=str(error)))
    if failure is None:
        shutil.rmtree(folder)
    return Results(simulator, (*results, *planned.left_out), failure)


def _judged(contract: Contract, stimulus: Stimulus, trace_file: Path | None) -> ProfileResult:
    if trace_file is None:
        return _unjudged(stimulus)
    result, seen = score(contract, stimulus, trace_file)
    verdict = "fail" if result.findings else "pass"
    judged = replace(_unjudged(stimulus), verdict=verdict, score=result, reason="", exercised=dict(seen))
    if result.comparisons == 0 and not result.findings:
        reason = "nothing was compared: the contract leaves everything open that this profile does"
        return replace(judged, verdict="empty", reason=reason)
    return judged


def _unjudged(stimulus: Stimulus) -> ProfileResult:
    common = (stimulus.name, "not-run", stimulus.seed, stimulus.edges, stimulus.periods)
    return ProfileResult(*common, reason="the simulator failed before its end", undetectable=stimulus.undetectable)
