"""Roots followed from point to point: the least total distance, by trying every pairing."""

from __future__ import annotations

from itertools import permutations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.schedule.following import followed

PARTS = st.integers(-20, 20)
NUMBERS = st.builds(complex, PARTS, PARTS)


@st.composite
def two_rows(draw: st.DrawFn) -> tuple[list[complex], list[complex]]:
    count = draw(st.integers(0, 5))
    rows = st.lists(NUMBERS, min_size=count, max_size=count)
    return draw(rows), draw(rows)


def cost(before: list[complex], after: list[complex], order: tuple[int, ...] | list[int]) -> float:
    return sum(abs(after[j] - old) for old, j in zip(before, order, strict=True))


@given(two_rows())
def test_no_pairing_moves_the_roots_less(rows: tuple[list[complex], list[complex]]) -> None:
    before, after = rows
    found = followed(before, after)
    assert sorted(found) == list(range(len(before)))
    least = min(cost(before, after, order) for order in permutations(range(len(before))))
    assert cost(before, after, found) == pytest.approx(least, abs=1e-9)


def test_one_root_gives_way_where_two_would_have_the_same() -> None:
    assert followed([0j, 1 + 0j], [1 + 0j, 3 + 0j]) == [0, 1]
    assert followed([0j, 1 + 0j, 2 + 0j], [2 + 0j, 1 + 0j, 9 + 0j]) == [1, 0, 2]
