"""What a run has exercised of what its contract declares."""

from __future__ import annotations

from collections import Counter

from contractgrid import GRID as PLAIN
from perclock import run as run_plain
from registers import run
from test_inputs import GRID, compiled

from tbkit.contract import Contract
from tbkit.exercised import declared, exercised
from tbkit.lineoracle import expect
from tbkit.regression import builtin_profiles


def seen(contract: Contract, *names: str) -> Counter[str]:
    total: Counter[str] = Counter()
    for name in names:
        stimulus = compiled(contract, name)
        if stimulus is not None:
            total.update(exercised(contract, stimulus, expect(contract, stimulus), run(contract, stimulus)))
    return total


def test_builtin_regression_exercises_everything() -> None:
    contract = GRID["all"]
    total = seen(contract, *(profile.name for profile in builtin_profiles()))
    assert [behaviour for behaviour in declared(contract) if not total[behaviour]] == []
    assert set(total) <= set(declared(contract))


def test_one_start_exercises_little() -> None:
    """It comes up in 00, goes forward and back: one reversal, no end of the count, no illegal transition."""
    contract = GRID["clear"]
    total = seen(contract, "start-00")
    some = {behaviour for behaviour in declared(contract) if total[behaviour]}
    assert {"motion forward", "motion backward", "reset released in 00"} <= some
    assert not some & {"upper end of the count", "illegal transition from 00", "reset released in 10", "clear-count input"}


def test_clear_in_the_clock_of_a_step() -> None:
    contract = GRID["clear"]
    total = seen(contract, "zero")
    # At rest once, in motion once, and twice at each of seven offsets; with no offset a step is lost to it each time.
    assert total["clear-count input"] == 16
    assert total["clear-count input in the clock of a step"] >= 2


def test_pulses_that_a_filter_rejects() -> None:
    contract, builds = PLAIN["filter-2"]
    stimulus = compiled(contract, "glitches-rejected")
    assert stimulus is not None
    total = exercised(contract, stimulus, expect(contract, stimulus), run_plain(contract, stimulus, builds[0]))
    assert total["pulse that the filter rejects"] > 50
    clean = compiled(contract, "transitions")
    assert clean is not None
    total = exercised(contract, clean, expect(contract, clean), run_plain(contract, clean, builds[0]))
    assert total["pulse that the filter rejects"] == 0
