"""Exact numbers as text, and figures out of reach."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.rolloff import decimal_or_quotient, finite_figure

F = Fraction


@pytest.mark.parametrize(
    ("number", "text"),
    [
        (F(0), "0"),
        (F(12500), "12500"),
        (F("-0.00025"), "-0.00025"),
        (F(1, 3), "1/3"),
        (F(10**30), "1" + "0" * 30),
        (F(1, 2**40), "0.0000000000009094947017729282379150390625"),
    ],
)
def test_numbers_are_written_exactly(number: Fraction, text: str) -> None:
    assert decimal_or_quotient(number) == text
    assert F(text) == number


def test_a_figure_beyond_double_range_is_none() -> None:
    assert (finite_figure(F(10**400)), finite_figure(F(1, 4))) == (None, 0.25)
