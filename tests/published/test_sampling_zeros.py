"""Zeros that sampling adds.

Source: K. J. Astrom, P. Hagander, J. Sternby, Zeros of sampled systems, Automatica 20(1):31-38, 1984 (statement
read in a later chapter that cites it). Polynomials and figures from memory, recomputed.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import factorial

import pytest

from realize.algebra import polynomial as poly
from realize.methods import discretize
from realize.transfer import TransferFunction

Make = Callable[..., TransferFunction]

#: The polynomials of Euler and Frobenius, numerators of the step-invariant ``1/s^n`` times ``n!/T^n``.
_EULER_FROBENIUS: dict[int, tuple[int, ...]] = {
    1: (1,),
    2: (1, 1),
    3: (1, 4, 1),
    4: (1, 11, 11, 1),
    5: (1, 26, 66, 26, 1),
}

#: Their roots as printed.
_LIMITS: dict[int, tuple[str, ...]] = {
    2: ("-1.0000",),
    3: ("-3.7321", "-0.2679"),
    4: ("-9.8990", "-1.0000", "-0.1010"),
    5: ("-23.2039", "-2.3225", "-0.4306", "-0.0431"),
}


def _zeros(transfer: TransferFunction, period_s: Fraction) -> list[float]:
    pulse = discretize(transfer, period_s, "step-invariant").pulse
    return sorted(1 + root.value.real for root in pulse.zeros for _ in range(root.multiplicity))


@pytest.mark.parametrize("n", _EULER_FROBENIUS)
@pytest.mark.parametrize("period_s", [Fraction(1), Fraction(1, 3)], ids=str)
def test_sampled_chain_of_integrators_has_the_euler_frobenius_numerator(
    n: int, period_s: Fraction, transfer: Make
) -> None:
    pulse = discretize(transfer(f"1/s^{n}"), period_s, "step-invariant").pulse
    assert pulse.numerator == (0, *(c * period_s**n / factorial(n) for c in _EULER_FROBENIUS[n]))


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_ramp_invariant_chain_of_integrators_has_the_next_euler_frobenius_numerator(n: int, transfer: Make) -> None:
    """``T^n B_(n+1)(z)/((n+1)! (z - 1)^n)``, the triangle hold of ``1/s^n`` (Madwed 1950)."""
    period_s = Fraction(2, 5)
    pulse = discretize(transfer(f"1/s^{n}"), period_s, "ramp-invariant").pulse
    assert pulse.numerator == tuple(c * period_s**n / factorial(n + 1) for c in _EULER_FROBENIUS[n + 1])
    assert pulse.denominator == poly.power((Fraction(1), Fraction(-1)), n)


@pytest.mark.parametrize("n", _LIMITS)
def test_zeros_of_a_chain_are_the_printed_ones(n: int, transfer: Make, agrees: Callable[..., bool]) -> None:
    for zero, printed in zip(_zeros(transfer(f"1/s^{n}"), Fraction(1)), _LIMITS[n], strict=True):
        assert agrees(zero, printed)


@pytest.mark.parametrize("text", ["(s + 2)/((s + 1)^2*(s + 3)*(s^2 + s + 4))", "(s + 2)/(s^2*(s^2 + 5)*(s + 1))"])
def test_excess_zeros_tend_to_the_printed_limits_and_the_own_zero_to_its_image(
    text: str, transfer: Make, half_unit: Callable[[str], Fraction]
) -> None:
    """Relative degree 4. The distance shrinks in proportion to T: each tenth of a period takes a tenth of it."""
    limits = [float(z) for z in _LIMITS[4]]

    def distances(period_s: Fraction) -> list[float]:
        *excess, own = _zeros(transfer(text), period_s)
        assert own == pytest.approx(1 - 2 * float(period_s), abs=10 * float(period_s) ** 2)
        return [abs(z - limit) / abs(limit) for z, limit in zip(excess, limits, strict=True)]

    # The limits themselves are printed with an error of half a unit in the last place.
    printed = [float(half_unit(z)) / abs(float(z)) for z in _LIMITS[4]]
    for coarse, fine, error in zip(distances(Fraction(1, 10)), distances(Fraction(1, 1000)), printed, strict=True):
        assert fine <= coarse / 50 + error


@pytest.mark.parametrize(
    ("text", "period_s"),
    [("1/(s + 1)^3", "1.8399"), ("6*(1 - s)/((s + 2)*(s + 3))", "1.2485")],
    ids=["triple lag", "right half plane zero"],
)
def test_zero_crosses_the_unit_circle_at_the_printed_period(
    text: str, period_s: str, transfer: Make, half_unit: Callable[[str], Fraction]
) -> None:
    """Fast sampling puts a zero of ``1/(s + 1)^3`` outside; slow sampling pulls a right half plane zero in."""
    reach = half_unit(period_s)
    outermost = [abs(_zeros(transfer(text), Fraction(period_s) + side * reach)[0]) for side in (-1, 1)]
    assert outermost[0] > 1 > outermost[1]
