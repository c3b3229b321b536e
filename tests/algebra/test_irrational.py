"""pi and square roots against mpmath at 450 digits, and against their own squares."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.algebra.irrational import pi, square_root

F = Fraction
PROMISED = F(1, 10**400)

positive = st.fractions(min_value=F(1, 10**9), max_value=10**9, max_denominator=10**9)


def test_pi_is_right_to_400_digits() -> None:
    with mpmath.workdps(450):
        reference = F(int(mpmath.floor(mpmath.pi * mpmath.mpf(10) ** 440)), 10**440)
    assert abs(pi() - reference) < PROMISED


@given(positive)
@example(F(2))
@example(F(1, 3))
@example(F(10**400))
@example(F(1, 10**400))
@example(F(7 * 10**399))
def test_a_square_root_squared_is_right_to_400_digits(value: Fraction) -> None:
    # (r (1 + e))^2 = v (1 + 2e + e^2)
    assert abs(square_root(value) ** 2 - value) < 2 * PROMISED * value


@pytest.mark.parametrize("exponent", [60001, -60001])
def test_size_does_not_cost_digits(exponent: int) -> None:
    value = F(2) ** exponent
    assert abs(square_root(value) ** 2 - value) < 2 * PROMISED * value


@given(st.fractions(min_value=0, max_denominator=10**9))
@example(F(0))
@example(F(10**200, 7**100))
def test_the_root_of_a_rational_square_is_exact(value: Fraction) -> None:
    assert square_root(value**2) == value


def test_a_negative_radicand_is_refused() -> None:
    with pytest.raises(ValueError, match="nonnegative"):
        square_root(F(-1))
