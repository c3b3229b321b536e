"""A number of Python counts as the decimal that Python prints for it, wherever it comes from."""

from __future__ import annotations

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import RealizeError
from realize.api.entries import Number, entry, exactly, row, text_of

doubles = st.floats(allow_nan=False, allow_infinity=False)


@given(doubles)
def test_a_double_counts_as_its_shortest_decimal_from_python_and_from_numpy(value: float) -> None:
    shortest = Fraction(Decimal(repr(value)))
    assert exactly(value, "x") == shortest
    assert exactly(np.float64(value), "x") == shortest
    assert exactly(np.array([value])[0], "x") == shortest
    # Nothing that two doubles could share.
    assert float(shortest) == value


@given(st.floats(allow_nan=False, allow_infinity=False, width=32))
def test_a_shorter_float_counts_as_the_shortest_decimal_that_tells_it_from_its_neighbours(value: float) -> None:
    short = np.float32(value)
    exact = exactly(short, "x")
    assert np.float32(float(exact)) == short
    # Nine digits tell all of them apart.
    assert exact == 0 or len(Decimal(exact.numerator).normalize().as_tuple().digits) <= 9 or exact.denominator > 1
    assert exactly(np.float32(0.1), "x") == Fraction(1, 10)


@pytest.mark.parametrize(
    ("given", "exact"),
    [
        (3, 3),
        (np.int8(-3), -3),
        (Fraction(1, 3), Fraction(1, 3)),
        (Decimal("0.10"), Fraction(1, 10)),
        ("1/3", Fraction(1, 3)),
        (-2.5, Fraction(-5, 2)),
        (np.float16(0.1), Fraction(1, 10)),
        (1e-30, Fraction(1, 10**30)),
        (-0.0, 0),
    ],
    ids=repr,
)
def test_numbers_of_every_kind_are_exact_and_read_back_from_their_text(given: Number, exact: Fraction) -> None:
    assert exactly(given, "x") == exact
    assert exactly(text_of(given, "x"), "x") == exact


@pytest.mark.parametrize(
    ("given", "found"),
    [
        (float("nan"), "nan, which is no finite number"),
        (np.float64("-inf"), "-inf, which is no finite number"),
        (Decimal("Infinity"), "nan, which is no finite number"),
        (True, "true"),
        (np.True_, "true"),
        (1j, "the complex number 0+1j"),
        (object(), "an object of type object"),
        (None, "an object of type NoneType"),
    ],
)
def test_what_is_no_finite_real_number_is_refused_by_its_place(given: Number, found: str) -> None:
    with pytest.raises(RealizeError) as refusal:
        exactly(given, "the place")
    assert (refusal.value.where, refusal.value.found) == ("the place", found)


def test_sequences_arrays_and_scalars_become_rows() -> None:
    assert row(np.array([1, 2]), "x") == row([1, 2], "x") == row((1, 2), "x") == [1, 2]
    assert row(5, "x") == row(np.array(5), "x") == [5]
    assert entry({"a": np.array([[0.5, 1]])}, "x") == {"a": [["0.5", "1.0"]]}
    assert entry(np.array([1 - 2j, 3]), "x") == [["1.0", "-2.0"], "3.0"]
