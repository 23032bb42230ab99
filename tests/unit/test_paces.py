"""The length from which on an experiment goes well."""

from __future__ import annotations

import pytest

from tbkit.paces import shortest_from


@pytest.mark.parametrize(
    ("good", "expected"),
    [
        ([True, True, True], 1),
        ([False, True, True], 2),
        # One that goes well by chance proves nothing about those after it.
        ([True, False, True], 5),
        ([True, True, False], None),
    ],
)
def test_shortest_from(good: list[bool], expected: int | None) -> None:
    assert shortest_from(good, (1, 2, 5)) == expected
