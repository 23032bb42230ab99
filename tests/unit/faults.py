"""Faults that a per-clock decoder can be given, the contracts in which each is one, and the findings that name it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from perclock import Build

from tbkit.contract import Contract

COUNTING = {"count-lost", "count-extra", "count-wrong", "roll-over-wrong"}
INDEXING = {"index-missed", "index-false"}


@dataclass(frozen=True)
class Fault:
    """``kinds``: findings of which at least one must come; ``applies``: whether the contract forbids it at all."""

    kinds: frozenset[str]
    applies: Callable[[Contract, Build], bool]


def _x4(contract: Contract, _: Build) -> bool:
    return contract.states_per_count == 1


def _count(contract: Contract, _: Build) -> bool:
    return contract.count is not None


def _exact(contract: Contract, build: Build) -> bool:
    return not build.vary and build.filtering != "poll" and _outputs(contract) and contract.latency.count.exact


def _outputs(contract: Contract) -> bool:
    return contract.count is not None or contract.step is not None


def _direction(contract: Contract, _: Build) -> bool:
    return contract.direction is not None


def _error(contract: Contract, _: Build) -> bool:
    return contract.error is not None


def _pulse(contract: Contract, build: Build) -> bool:
    return _error(contract, build) and contract.error is not None and not contract.error.sticky


def _sticky(contract: Contract, build: Build) -> bool:
    return _error(contract, build) and not _pulse(contract, build)


def _index(contract: Contract, _: Build) -> bool:
    return contract.index is not None


def _gate(contract: Contract, _: Build) -> bool:
    return contract.index is not None and not contract.index.edge and (contract.index.a, contract.index.b) != (None, None)


def _step(contract: Contract, _: Build) -> bool:
    return contract.step is not None


def _narrow(contract: Contract) -> bool:
    return contract.count is not None and contract.count.width <= 9


def _reset(contract: Contract, _: Build) -> bool:
    return contract.reset is not None and len(contract.start.rest_states) == 4


def _equal(contract: Contract, build: Build) -> bool:
    return build.filtering == "equal" and contract.filter.passes == contract.filter.rejects + 1 > 1 and _outputs(contract)


def _overflow(how: str) -> Callable[[Contract, Build], bool]:
    return lambda contract, _: contract.count is not None and contract.count.overflow == how and _narrow(contract)


def _fault(kinds: set[str], applies: Callable[[Contract, Build], bool]) -> Fault:
    return Fault(frozenset(kinds), applies)


FAULTS = {
    "lost-on-reversal": _fault({"count-lost", "step-wrong"}, _x4),
    "extra-on-reversal": _fault({"count-wrong", "roll-over-wrong"}, lambda c, b: _count(c, b) and _x4(c, b)),
    "lost-transition": _fault({"count-lost", "step-wrong", "roll-over-wrong"}, _x4),
    "lost-once": _fault({"count-lost", "roll-over-wrong"}, lambda c, b: _count(c, b) and _x4(c, b)),
    "by-two": _fault(
        {"count-wrong", "roll-over-wrong", "count-extra"}, lambda c, b: _count(c, b) and _x4(c, b) and c.count.size > 4
    ),
    "not-mirrored": _fault({"count-lost", "count-extra", "roll-over-wrong"}, lambda c, b: _count(c, b) and not _x4(c, b)),
    "backwards": _fault({"count-wrong", "roll-over-wrong"}, lambda c, b: _count(c, b) and c.count.size > 2),
    "swapped": _fault({*COUNTING, "direction-wrong"}, _count),
    "never": _fault({"no-response", "error-missed"}, lambda c, _: _outputs(c)),
    "later": _fault({"late"}, _exact),
    "earlier": _fault({"early"}, lambda c, b: _exact(c, b) and c.latency.count.min > c.filter.passes - 1),
    "skewed-lines": _fault({"late", *COUNTING, "step-wrong", "error-missed"}, _exact),
    "filter-deeper": _fault({"count-lost", "late", "step-wrong"}, _equal),
    "filter-shallower": _fault(
        {"count-extra", "step-wrong"}, lambda c, b: _equal(c, b) and c.latency.count.exact and c.filter.rejects > 0
    ),
    "illegal-counts": _fault(
        {"count-extra", "roll-over-wrong"}, lambda c, b: _count(c, b) and c.illegal_holds and c.count.size > 2
    ),
    "roll-over-early": _fault({"roll-over-wrong"}, _overflow("wrap")),
    "wrap-holds": _fault({"roll-over-wrong"}, lambda c, b: _overflow("wrap")(c, b) or _overflow("modulo")(c, b)),
    "hold-wraps": _fault({"roll-over-wrong"}, _overflow("hold")),
    "modulo-off": _fault({"roll-over-wrong", "count-wrong"}, _overflow("modulo")),
    "start-wrong": _fault({"start-up-count"}, lambda c, b: _count(c, b) and c.start.count != c.count.highest),
    "false-count-after-reset": _fault(
        {"count-extra", "roll-over-wrong", "start-up-count"}, lambda c, b: _reset(c, b) and _count(c, b)
    ),
    "false-error-after-reset": _fault({"error-false", "error-stuck"}, lambda c, b: _reset(c, b) and _error(c, b)),
    "reset-keeps-count": _fault({"start-up-count"}, lambda c, b: _reset(c, b) and _count(c, b)),
    "reset-keeps-error": _fault({"error-false", "error-stuck"}, lambda c, b: _reset(c, b) and _sticky(c, b)),
    "unknown": _fault({"unknown-level"}, _count),
    "direction-transition": _fault({"direction-wrong"}, lambda c, b: _direction(c, b) and _x4(c, b)),
    "direction-inverted": _fault({"direction-wrong"}, _direction),
    "direction-stuck": _fault({"direction-wrong"}, _direction),
    "direction-after-reversal": _fault({"direction-wrong"}, lambda c, b: _direction(c, b) and _x4(c, b)),
    "direction-late": _fault(
        {"late", "direction-wrong"}, lambda c, b: _direction(c, b) and not c.direction.with_count and _exact(c, b)
    ),
    "step-missing": _fault({"step-wrong"}, lambda c, b: _step(c, b) and _x4(c, b)),
    "step-double": _fault({"step-wrong"}, _step),
    "step-extra": _fault({"step-wrong"}, lambda c, b: _step(c, b) and c.illegal_holds),
    "error-never": _fault({"error-missed"}, _error),
    "error-in-one-state": _fault({"error-missed"}, _error),
    "error-second-missed": _fault({"error-missed"}, _pulse),
    "error-on-reversal": _fault({"error-false"}, _error),
    "error-always": _fault({"error-false", "error-stuck"}, _error),
    "error-late": _fault({"late"}, lambda c, b: _error(c, b) and c.latency.error.exact),
    "error-early": _fault(
        {"early", "error-false"}, lambda c, b: _error(c, b) and c.latency.error.exact and c.latency.error.min > c.filter.passes - 1
    ),
    "error-stuck": _fault({"error-stuck"}, _pulse),
    "error-long": _fault({"error-stuck"}, _pulse),
    "not-sticky": _fault({"error-missed"}, _sticky),
    "clear-ignored": _fault({"error-stuck"}, lambda c, _: c.input("clear-error") is not None),
    "index-never": _fault({"index-missed"}, _index),
    "index-ungated": _fault({"index-false", "index-missed", "count-lost"}, _gate),
    "index-without-line": _fault({"index-false"}, _gate),
    "index-inverted": _fault({*INDEXING}, lambda c, b: _index(c, b) and not c.index.edge),
    "index-late-state": _fault({*INDEXING}, _index),
    "index-drift": _fault({"count-lost", "index-missed", "roll-over-wrong"}, lambda c, b: _index(c, b) and not c.index.edge),
}
