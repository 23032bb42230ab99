"""Inputs and index actions: the oracles against decoders written as registers, right ones and faulty ones."""

from __future__ import annotations

import os
from collections import Counter
from dataclasses import replace
from pathlib import Path

import pytest
from contractgrid import contract
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from registers import run

from tbkit.contract import Contract, Index, Input, Output, Port, Slice, Span
from tbkit.errors import UnfitError
from tbkit.findings import KINDS, Score
from tbkit.inputs import acts
from tbkit.lineoracle import expect
from tbkit.profile import Action, Disturbance, Drive, Encoder, Illegal, IndexMark, Move, Press, Profile, Rest, Walk, Where
from tbkit.regression import builtin_profiles
from tbkit.scoreboard import judge
from tbkit.shaftoracle import rests
from tbkit.stimulus import Stimulus, compile_stimulus
from tbkit.units import parse

SOAK = os.environ.get("TBKIT_SOAK") == "1"
PROFILES = {profile.name: profile for profile in builtin_profiles()}


def of(latency: int = 3, by_input: int = 1, index: Index | None = None, roles: tuple[Input, ...] = (), **more: object) -> Contract:
    made = contract(latency, index=index, error="", **more)  # type: ignore[arg-type]
    return replace(made, inputs=roles, latency=replace(made.latency, inputs=Span(by_input, by_input)))


def role(name: str, **more: object) -> Input:
    return Input(Port(name.replace("-", "_")), name, **more)  # type: ignore[arg-type]


def out(width: int = 1) -> Output:
    return Output("index", (Slice("captured"),), width)


CLEAR, LOAD = role("clear-count"), role("preload", value=-77)
GRID = {
    "clear": of(roles=(CLEAR,)),
    "clear-late": of(2, 2, roles=(CLEAR,)),
    "clear-edge": of(roles=(role("clear-count", edge=True),)),
    "clear-edge-counts": of(4, 2, roles=(role("clear-count", edge=True, counts_last=True),), step=True),
    "load": of(roles=(LOAD,), direction="always", step=True),
    "load-modulo": of(roles=(replace(LOAD, value=9),), overflow="modulo", limits=(0, 11), signed=False, width=8),
    "enable": of(roles=(role("enable"),), step=True),
    "enable-late": of(1, 3, roles=(role("enable"),), direction="always"),
    "all": of(3, 2, index=Index(1, 1), roles=(CLEAR, LOAD, role("enable"), role("arm")), step=True),
    "index-load": of(2, index=Index(0, 1, value=50)),
    "index-load-edge": of(2, index=Index(1, 1, edge=True, value=-100, counts_last=True), step=True),
    "index-latch": of(2, index=Index(action="latch", output=out(8))),
    "index-pulse": of(2, index=Index(0, None, action="pulse", output=out())),
    "arm": of(2, index=Index(1, 1), roles=(role("arm"),)),
    "arm-edge": of(2, 3, index=Index(1, 0, edge=True), roles=(role("arm"),)),
    "arm-once": of(2, index=Index(1, 1, edge=True), roles=(role("arm-once"),)),
    "arm-once-late": of(2, 4, index=Index(0, 1, edge=True, value=9), roles=(role("arm-once"), CLEAR), direction="always"),
    "arm-once-no-reset": of(2, index=Index(1, 1, edge=True, value=40), roles=(role("arm-once"),), reset="none"),
    "arm-once-pulse": of(2, index=Index(None, 1, action="pulse", output=out()), roles=(role("arm-once"),)),
    "latch": of(3, roles=(role("latch"),), direction="always"),
    "latch-edge": of(4, 2, roles=(role("latch", edge=True), CLEAR), direction="", step=True),
    "latch-all": of(
        3, index=Index(1, 1), roles=(role("latch"), CLEAR, LOAD, role("enable"), role("arm")), direction="always", width=5
    ),
    "latch-hold": of(2, roles=(role("latch", edge=True),), direction="", overflow="hold", limits=(-5, 9)),
    "arm-latch": of(3, index=Index(1, 1, action="latch", output=out(8)), roles=(role("arm"),)),
}


def judged(made: Contract, stimulus: Stimulus, fault: str = "", seed: int = 0) -> Score:
    expectation = expect(made, stimulus)
    events = expectation.events
    doubtful = events.period[events.illegal | events.open] * stimulus.period_ps
    return judge(made, stimulus, expectation, rests(made, stimulus, doubtful), run(made, stimulus, fault, seed))


def compiled(made: Contract, name: str, seed: int = 1) -> Stimulus | None:
    try:
        return compile_stimulus(PROFILES[name], made, seed, 60_000)
    except UnfitError:
        return None


INPUT_PROFILES = ("zero", "preload", "disable", "disarm", "arm")


def test_one_input_does_not_close_what_another_leaves_open() -> None:
    """Where the count's latency has a range, which steps a clear meets is open, whether the index is armed besides or not."""
    made = of((2, 4), index=Index(1, 1, edge=True), roles=(CLEAR, role("arm-once")), apart={"index": 2})  # type: ignore[arg-type]
    alone = replace(made, inputs=(CLEAR,))
    pressed = {"zero": [(100, 103)], "arm": [(200, 201)], "reset": [(0, 4)]}
    opens = [acts(one, lambda deed: pressed.get(deed, []), [], [], 1000).opens for one in (alone, made)]
    assert len(opens[0]) == 1
    assert opens[0] == opens[1]


@pytest.mark.parametrize("name", GRID)
def test_right(name: str) -> None:
    played = 0
    for profile in PROFILES:
        stimulus = compiled(GRID[name], profile)
        if stimulus is not None:
            score = judged(GRID[name], stimulus)
            assert score.findings == (), (profile, score.totals)
            assert score.comparisons > 0
            played += 1
    assert played > 20


def test_every_input_profile_is_played() -> None:
    fitting = Counter(profile for made in GRID.values() for profile in INPUT_PROFILES if compiled(made, profile))
    assert set(fitting) == set(INPUT_PROFILES)


@pytest.mark.parametrize(
    ("name", "fault", "kinds"),
    [
        ("clear", "inputs-ignored", {"input-wrong"}),
        ("clear", "inputs-late", {"late", "input-wrong"}),
        ("clear", "step-kept", {"input-wrong", "count-extra", "count-wrong"}),
        ("clear-edge-counts", "step-lost", {"input-wrong", "count-lost", "count-wrong", "count-extra"}),
        ("load", "inputs-ignored", {"input-wrong"}),
        ("load", "inputs-late", {"late", "input-wrong"}),
        ("load-modulo", "inputs-late", {"late", "input-wrong"}),
        ("enable", "enable-ignored", {"count-extra"}),
        ("enable", "enable-late", {"count-extra", "count-lost"}),
        ("enable-late", "enable-late", {"count-extra", "count-lost"}),
        ("arm", "always-armed", {"index-false"}),
        ("arm-once", "always-armed", {"index-false"}),
        ("arm-once", "armed-for-ever", {"index-false"}),
        ("arm-once-pulse", "armed-for-ever", {"index-false"}),
        ("latch", "latch-open", {"early", "count-extra"}),
        ("latch", "latch-late", {"late", "count-lost"}),
        ("latch-edge", "latch-late", {"late", "count-lost"}),
        ("latch-edge", "latch-transparent", {"count-extra"}),
        ("latch-all", "inputs-ignored", {"input-wrong"}),
        ("arm-latch", "always-armed", {"index-false"}),
        ("index-latch", "latch-transparent", {"index-false", "capture-wrong"}),
        ("index-load-edge", "step-lost", {"count-wrong", "index-missed", "count-lost"}),
    ],
)
def test_faults(name: str, fault: str, kinds: set[str]) -> None:
    """Each fault is found by the built-in regression, by a kind that says what it is."""
    found: Counter[str] = Counter()
    for profile in PROFILES:
        stimulus = compiled(GRID[name], profile)
        if stimulus is not None:
            found.update(judged(GRID[name], stimulus, fault).totals)
    assert set(found) & kinds, found
    assert set(found) <= set(KINDS)


# ---- random motion and presses

SPEEDS = st.sampled_from(["0.1 states/dwell", "0.3 states/dwell", "0.7 states/dwell", "1 states/dwell"]).map(
    lambda text: parse(text, "speed")
)
DEEDS = st.sampled_from(["zero", "preload", "disable", "disarm", "arm"])
TIMES = st.sampled_from(["1 clocks", "2 clocks", "5 clocks", "3 dwell", "2 settle"]).map(lambda text: parse(text, "time"))
ACTIONS = st.lists(
    st.one_of(
        st.builds(Rest, TIMES),
        st.builds(Move, st.integers(-20, 20).filter(bool).map(lambda n: parse(f"{n} states", "distance")), SPEEDS),
        st.builds(
            Walk,
            st.just(parse("30 states", "distance")),
            st.just(parse("0.1 states/dwell", "speed")),
            SPEEDS,
            st.just(1),
            st.just(6),
        ),
        st.builds(Illegal, TIMES, st.just(1)),
        st.builds(Drive, DEEDS, TIMES, st.one_of(st.none(), SPEEDS)),
        st.builds(Drive, st.just("reset"), st.just(parse("6 clocks", "time")), st.one_of(st.none(), SPEEDS)),
    ),
    min_size=1,
    max_size=6,
)
PRESSES: st.SearchStrategy[Disturbance] = st.builds(
    Press,
    DEEDS,
    TIMES,
    st.integers(-4, 4).map(lambda n: parse(f"{n} clocks", "time")),
    st.lists(st.integers(1, 40), min_size=1, max_size=4).map(lambda some: Where("edges", numbers=tuple(some))),
    st.booleans(),
)
MARKS = st.builds(
    IndexMark,
    st.sampled_from(["90 deg", "180 deg", "360 deg"]).map(lambda text: parse(text, "angle")),
    st.sampled_from(["0 deg", "90 deg", "180 deg", "270 deg"]).map(lambda text: parse(text, "angle")),
)
ENCODERS = st.builds(Encoder, st.sampled_from([2, 3, 8]), st.sampled_from(["00", "10", "11", "01"]), st.one_of(st.none(), MARKS))


@settings(
    max_examples=5000 if SOAK else 200,
    deadline=None,
    database=None,
    derandomize=not SOAK,
    suppress_health_check=list(HealthCheck),
)
@given(
    name=st.sampled_from(sorted(GRID)),
    seed=st.integers(0, 10**6),
    motion=ACTIONS,
    disturb=st.lists(PRESSES, max_size=3),
    encoder=ENCODERS,
)
def test_random(name: str, seed: int, motion: list[Action], disturb: list[Disturbance], encoder: Encoder) -> None:
    made = GRID[name]
    deeds = {"zero": "clear-count", "preload": "preload", "disable": "enable", "disarm": "arm", "arm": "arm-once"}
    has = {"reset", *(deed for deed, of_role in deeds.items() if made.input(of_role))}
    actions = tuple(action for action in motion if not isinstance(action, Drive) or action.signal in has)
    presses = tuple(press for press in disturb if isinstance(press, Press) and press.signal in has)
    profile = Profile(Path("x.yaml"), "x", "", (), None, (*actions, Rest(parse("2 settle", "time"))), encoder, presses)
    try:
        stimulus = compile_stimulus(profile, made, seed, 50_000)
    except UnfitError:
        return
    assert judged(made, stimulus, seed=seed).findings == ()
