"""Contracts of every kind the decoder file can express, each with decoders that keep it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from types import MappingProxyType

from perclock import Build

from tbkit.contract import (
    A_LEADS_B,
    Clock,
    Contract,
    Count,
    Design,
    Direction,
    Error,
    Filter,
    Index,
    Input,
    Latency,
    Output,
    Port,
    Reset,
    Slice,
    Span,
    Start,
    Step,
)


def span(clocks: int | tuple[int, int]) -> Span:
    return Span(clocks, clocks) if isinstance(clocks, int) else Span(*clocks)


def contract(
    latency: int | tuple[int, int] = 2,
    *,
    name: str = "x",
    width: int | None = 8,
    signed: bool = True,
    every: int = 1,
    at: str = "00",
    a_leads: bool = True,
    overflow: str = "wrap",
    limits: tuple[int, int] | None = None,
    start: int = 0,
    rest: tuple[str, ...] = A_LEADS_B,
    settle: int = 8,
    reset: str = "async",
    reset_clocks: int = 4,
    direction: str = "with-count",
    forward_level: int = 1,
    step: bool = False,
    error: str = "pulse",
    clear: bool = False,
    illegal_moves: tuple[int, ...] | None = (0, 0, 0, 0),
    index: Index | None = None,
    filtering: Filter | None = None,
    shortest: int = 1,
    period_ps: int = 20_000,
    apart: Mapping[str, int | tuple[int, int]] = MappingProxyType({}),
) -> Contract:
    main = span(latency)
    low, high = (-(1 << (width - 1)), (1 << (width - 1)) - 1) if signed and width else (0, (1 << (width or 1)) - 1)
    if limits:
        low, high = limits
    others = {key: span(apart[key]) if key in apart else main for key in ("direction", "step", "error", "index")}
    return Contract(
        Path(name),
        Design("top", ()),
        Clock("clk", period_ps),
        Port("a"),
        Port("b"),
        Latency(main, **others, clear=span(apart.get("clear", 1))),
        Port("z"),
        None if reset == "none" else Reset(Port("rst"), reset == "async", reset_clocks),
        Start(start, rest, settle),
        (),
        (Input(Port("clr"), "clear-error"),) if clear else (),
        Count(Output("count", (Slice("n"),), width), signed, every, at, a_leads, overflow, low, high) if width else None,
        Direction(Output("direction", (Slice("dir"),)), forward_level, direction == "with-count") if direction else None,
        Step("pulse", (Output("step", (Slice("step"),)),)) if step else None,
        Error(Output("error", (Slice("err"),)), error) if error else None,
        illegal_moves,
        index,
        filtering or Filter(),
        shortest,
    )


def _grid() -> dict[str, tuple[Contract, tuple[Build, ...]]]:
    gated = Index(1, 1)
    plain = (Build(), Build(warm=2, idle="noise", by_state=False, seed=1))
    equal3 = (Build(depth=3), Build("free", warm=7, idle="noise", seed=2), Build(depth=3, warm=4, by_state=False, seed=3))
    equal5 = (Build(depth=5, warm=6), Build("free", seed=2))
    some: dict[str, tuple[Contract, tuple[Build, ...]]] = {}

    def add(name: str, made: Contract, *builds: Build) -> None:
        some[name] = (replace(made, file=Path(name)), builds or plain)

    # Widths, signs, ends of the range.
    add("w8", contract(2))
    add("w2-unsigned", contract(1, width=2, signed=False, direction="always"))
    add("w3-signed-step", contract(2, width=3, step=True))
    add("w4-start", contract(3, width=4, signed=False, start=13, reset="sync"))
    add("w16", contract(3, width=16, start=32760))
    add("w31", contract(3, width=31, start=-(1 << 30) + 3, reset="sync"))
    add("w32-unsigned", contract(2, width=32, signed=False, start=(1 << 32) - 9, step=True))
    add("w63-unsigned", contract(2, width=63, signed=False, start=(1 << 63) - 9))
    add("w64", contract(2, width=64, start=(1 << 63) - 20))
    add("w64-low", contract(2, width=64, start=-(1 << 63) + 4, direction="always"))
    add("w64-unsigned", contract(2, width=64, signed=False, start=4))
    add("hold", contract(2, width=5, overflow="hold", direction="always"))
    add("hold-limits", contract(1, width=8, overflow="hold", limits=(-7, 11), step=False, reset="none"))
    add("hold-unsigned", contract(2, width=4, signed=False, overflow="hold", start=3, reset="sync"))
    add("hold-index", contract(2, width=5, overflow="hold", index=gated))
    add("modulo-10", contract(2, width=4, signed=False, overflow="modulo", limits=(0, 9), start=3))
    add("modulo-16-index", contract(3, width=12, signed=False, overflow="modulo", limits=(0, 15), index=Index(0, 0)))
    add("modulo-3", contract(2, width=2, signed=False, overflow="modulo", limits=(0, 2), every=2, at="10"))
    # Resolutions.
    for at in A_LEADS_B:
        add(f"x1-{at}", contract(2, every=4, at=at, direction="always", a_leads=at in ("00", "10"), step=at == "11"))
        add(f"x2-{at}", contract(2, every=2, at=at, width=6, a_leads=at in ("00", "01"), reset="sync"))
    add("x1-with-count", contract(3, every=4, at="01", step=True))
    add("x1-index", contract(2, every=4, at="11", index=gated, width=6))
    add("b-leads", contract(2, a_leads=False, forward_level=0, index=Index(0, 1)))
    # Latencies.
    add("comb", contract(0, direction="always"))
    add("deep", contract(7, direction="always", step=True, width=9, apart={"error": 5}))
    add("range", contract((2, 4)), *plain, Build(vary=True, seed=4), Build(vary=True, idle="noise", warm=3, seed=5))
    add("range-always", contract((1, 3), direction="always", step=True, reset="sync"), *plain, Build(vary=True, seed=6))
    add(
        "range-3",
        contract((2, 4), shortest=3, index=gated, step=True),
        *plain,
        Build(vary=True, seed=7),
        Build(vary=True, wild=True, apart=True, seed=8),
    )
    add("separate", contract(4, step=True, apart={"error": 2, "direction": 5, "step": 3}), *plain, Build(idle="noise", seed=9))
    add("separate-sticky", contract(4, error="sticky", clear=True, apart={"error": 6, "direction": 3, "clear": 2}))
    add("direction-loose", contract(3, apart={"direction": (1, 3)}), Build(), Build(vary=True, seed=10), Build(seed=11))
    add("index-late", contract(3, shortest=2, index=gated, apart={"index": 4}), *plain, Build(late_leave=True, idle="noise"))
    add("index-late-edge", contract(2, shortest=4, index=Index(edge=True), width=5, apart={"index": 5}, direction="always"))
    add("index-early", contract(5, shortest=3, index=Index(1, 0), apart={"index": 3}))
    add("index-loose", contract(3, index=gated, apart={"index": (3, 4)}), Build(), Build(seed=1), Build(seed=2))
    add(
        "index-loose-2",
        contract(3, index=gated, shortest=2, step=True, apart={"index": (3, 4)}),
        *(Build(vary=True, apart=True, seed=seed) for seed in range(3)),
    )
    # Index.
    add("index-any", contract(2, index=Index(), width=7))
    add("index-edge", contract(2, index=Index(edge=True), width=7, reset="sync"))
    add("index-edge-11", contract(2, index=Index(1, 1, edge=True), width=16, step=True), *plain, Build(step_at_zero=False))
    add("index-00", contract(2, index=Index(0, 0), start=5), *plain, Build(warm=5, seed=3))
    add("index-a", contract(2, index=Index(a=1), direction="always", reset="none"))
    add("index-b-edge", contract(2, index=Index(b=0, edge=True), start=-3))
    # Filters.
    add("filter-3", contract(5, filtering=Filter(2, 3), index=gated), *equal3)
    add("filter-3-sticky", contract(5, filtering=Filter(2, 3), error="sticky", clear=True, direction="always"), *equal3)
    add("filter-5", contract(6, filtering=Filter(4, 5), width=6, reset="none"), *equal5)
    add("filter-5-x1", contract(7, filtering=Filter(4, 5), every=4, at="10", index=Index(), shortest=2), *equal5)
    add("filter-2", contract(1, filtering=Filter(1, 2), step=True, width=None), Build(depth=2, warm=2))
    add(
        "grey-1-4",
        contract(6, filtering=Filter(1, 4)),
        *(Build(depth=depth, warm=3, seed=depth) for depth in (2, 3, 4)),
        *(Build("free", seed=seed) for seed in range(6)),
    )
    add(
        "grey-range",
        contract((5, 7), filtering=Filter(0, 3), shortest=2, index=Index(0, 1), direction="always", step=True),
        Build(depth=2),
        *(Build("free", vary=True, wild=True, seed=seed) for seed in range(6)),
    )
    add("grey-hold", contract(3, filtering=Filter(1, 3), overflow="hold", width=4), *(Build("free", seed=s) for s in range(5)))
    add(
        "grey-sticky",
        contract(3, filtering=Filter(1, 3), error="sticky", clear=True, apart={"error": 4}),
        Build(depth=2),
        *(Build("free", seed=s, set_wins=bool(s % 2)) for s in range(5)),
    )
    add(
        "integrating-3",
        contract(5, filtering=Filter(2, 3, bursts_open=True), index=Index(1, 0)),
        Build("integrating", 3),
        Build("integrating", 3, warm=5, seed=1),
        Build(depth=3),
    )
    add("integrating-6", contract(9, filtering=Filter(5, 6, bursts_open=True), direction="always"), Build("integrating", 6))
    add(
        "poll-4",
        contract((1, 4), filtering=Filter(0, 4), shortest=4, step=True, direction="always"),
        *(Build("poll", 4, seed=seed) for seed in range(4)),
    )
    add(
        "poll-3-sticky",
        contract((2, 4), filtering=Filter(0, 3), shortest=3, error="sticky", clear=True, reset="none", apart={"clear": (1, 3)}),
        *(Build("poll", 3, seed=seed) for seed in range(3)),
    )
    add(
        "dead-time-5",
        contract((2, 6), shortest=5, filtering=Filter(0, 5, bursts_open=True)),
        Build("dead-time", 5),
        Build("dead-time", 5, warm=3, seed=1),
    )
    # A line that is late by its dead time must not be overtaken by the other one, hence the shortest state.
    add(
        "dead-time-3",
        contract((1, 3), shortest=3, filtering=Filter(0, 3, bursts_open=True), index=Index(1, 1)),
        Build("dead-time", 3),
    )
    add("majority", contract(4, filtering=Filter(1, 2, bursts_open=True), index=Index(0, 0)), Build("majority", 2, warm=4))
    # What follows an illegal transition.
    add("any", contract(2, illegal_moves=None), *plain, Build(seed=5))
    add("moves", contract(2, illegal_moves=(2, -1, 0, 1), direction="always"))
    add("moves-range", contract((2, 4), illegal_moves=(-1, 1, 1, -1), step=True), Build(vary=True), Build())
    add("any-index", contract(2, illegal_moves=None, index=gated, direction="always", step=False))
    add("no-error", contract(2, error="", direction=""))
    add("sticky", contract(2, error="sticky"), *plain, Build(warm=8, seed=4))
    add("sticky-clear", contract(2, error="sticky", clear=True, reset="none"), *plain, Build(set_wins=False))
    add("sticky-range", contract((2, 4), error="sticky", clear=True, apart={"clear": (0, 3)}), *plain, Build(vary=True, seed=4))
    # Start.
    add("no-reset", contract(2, reset="none"))
    add("rest-00", contract(2, rest=("00",)), Build(from_rest=True), Build(from_rest=True, seed=1))
    add("rest-11-none", contract(2, rest=("11",), reset="none"), Build(from_rest=True), Build(from_rest=True, seed=1))
    add("rest-filter", contract(4, rest=("00",), filtering=Filter(1, 2)), Build(depth=2, from_rest=True))
    add("rest-two", contract(2, rest=("10", "01")), Build(warm=3))
    add("settle-0", contract(1, settle=0), Build(), Build(idle="noise", seed=1))
    add("settle-20", contract(2, settle=20, reset_clocks=9, reset="sync"), Build(warm=20), Build(warm=11, seed=1))
    # Speed.
    add("slow-2", contract(2, shortest=2), *plain, Build(wild=True, seed=3))
    add("slow-4", contract((1, 4), shortest=4, step=True), *plain, Build(wild=True, vary=True, seed=3))
    add("slow-3-x2", contract(3, shortest=3, every=2, at="11", direction="always"), *plain, Build(wild=True, seed=3))
    # Steps only, and other clocks.
    add("step-only", contract(2, width=None, step=True))
    add("step-only-b", contract((1, 2), width=None, step=True, a_leads=True, direction="always"), Build(vary=True), Build())
    add("step-bare", contract(1, width=None, step=True, direction="", error=""))
    add("fast-clock", contract(2, period_ps=8))
    add("odd-clock", contract(2, period_ps=14_705_882, index=gated))
    return some


GRID = _grid()
