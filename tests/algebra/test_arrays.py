"""Distinct values, as numpy.unique gives them."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra.arrays import distinct


@given(st.lists(st.integers(-5, 5)))
def test_distinct_values_are_those_of_numpy(values: list[int]) -> None:
    array = np.array(values, dtype=np.float64)
    assert distinct(array).tolist() == np.unique(array).tolist()
