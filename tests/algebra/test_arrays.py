"""Distinct values and the median, as numpy gives them."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra.arrays import distinct, middle


@given(st.lists(st.integers(-5, 5)))
def test_distinct_values_are_those_of_numpy(values: list[int]) -> None:
    array = np.array(values, dtype=np.float64)
    assert distinct(array).tolist() == np.unique(array).tolist()


@given(st.lists(st.integers(-5, 5), min_size=1))
def test_the_middle_value_is_the_median_of_numpy(values: list[int]) -> None:
    array = np.array(values, dtype=np.float64)
    assert middle(array) == np.median(array)
