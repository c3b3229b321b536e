"""The exact part of a roll-off: parts put back together, and the filter's own formula at rational points."""

from __future__ import annotations

from fractions import Fraction

from hypothesis import assume, given
from hypothesis import strategies as st

from realize.rolloff import apply_rolloff, split
from realize.transfer import TransferFunction
from tests.rolloff.designs import PID, at, dampings, improper, placements, poles, value

F = Fraction


@given(improper())
def test_split_puts_the_parts_back_together_and_leaves_a_strictly_proper_rest(
    transfer: TransferFunction,
) -> None:
    parts = split(transfer)
    s = F(7, 3)
    rest = value(parts.remainder, s) / value(parts.denominator, s)  # type: ignore[arg-type]
    assert value(parts.improper, s) + parts.constant + rest == at(transfer, s)  # type: ignore[arg-type]
    assert len(parts.remainder) < len(parts.denominator)
    assert parts.improper[-1] == 0


@given(improper(), placements, st.integers(1, 4), dampings, poles)
def test_result_differs_from_the_original_by_what_the_filter_withholds(
    transfer: TransferFunction, placement: str, order: int, damping: Fraction, pole: Fraction
) -> None:
    damping = damping if order == 2 else F(1)
    s = F(11, 13)
    assume(value(transfer.denominator, s) != 0)
    lag = pole**2 / (s**2 + 2 * damping * pole * s + pole**2) if order == 2 else (pole / (s + pole)) ** order
    parts = split(transfer)
    reached = value(parts.improper, s) if placement == "derivative" else at(transfer, s)  # type: ignore[arg-type]
    rolled = apply_rolloff(transfer, placement, order, damping, pole)
    assert at(rolled, s) == at(transfer, s) - reached * (1 - lag)


@given(improper(), placements)
def test_result_tends_to_the_original_as_the_pole_goes_to_infinity(transfer: TransferFunction, placement: str) -> None:
    s = F(11, 13)
    assume(value(transfer.denominator, s) != 0)
    errors = [
        abs(at(apply_rolloff(transfer, placement, 3, F(1), F(pole)), s) - at(transfer, s)) for pole in (10**6, 10**12)
    ]
    assert errors[1] <= errors[0] * F(11, 10) / 10**6


@given(improper(), placements, st.integers(0, 2))
def test_integrators_and_low_frequency_gain_stay(transfer: TransferFunction, placement: str, more: int) -> None:
    rolled = apply_rolloff(transfer, placement, more - transfer.relative_degree, F(1), F(37, 2))
    assume(transfer.zeros_minus_poles_at_origin <= 0)
    assert rolled.zeros_minus_poles_at_origin == transfer.zeros_minus_poles_at_origin
    assert rolled.low_frequency_gain == transfer.low_frequency_gain


def test_derivative_placement_leaves_proportional_and_integral_parts_alone() -> None:
    rolled = apply_rolloff(PID, "derivative", 1, F(1), F(1200))
    expected = TransferFunction.from_polynomials(  # (4.2 s + 18)(s + 1200) + 0.09 * 1200 s^2, over s (s + 1200)
        [F("4.2") + 108, 18 + F("4.2") * 1200, 18 * 1200], [1, 1200, 0]
    )
    assert (rolled.numerator, rolled.denominator) == (expected.numerator, expected.denominator)
