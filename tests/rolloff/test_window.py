"""The ends of a window against closed forms, and the pole that is taken in between."""

from __future__ import annotations

from fractions import Fraction
from math import atan, degrees, inf, pi, radians, tan

import pytest

from realize.rolloff import circumstances, proposal_for, samples_per_band_period
from realize.transfer import TransferFunction
from tests.rolloff.designs import BAND_RAD_S, PHASE_TOLERANCE_DEG, PID, tight, window

F = Fraction


@pytest.mark.parametrize(
    ("n", "d", "low"),
    [
        ([1, 500], [1], 500.0),
        ([1, 600, 250000], [1], 500.0),
        ([F(1, 10**9), 0, 1], [1], 31622.776601683793),
    ],
    ids=["a real zero", "a pair of zeros by its natural frequency", "undamped zeros, sqrt(1e9)"],
)
def test_window_starts_no_lower_than_the_highest_zero(n: list[Fraction | int], d: list[int], low: float) -> None:
    transfer = TransferFunction.from_polynomials(n, d)
    price = proposal_for(transfer, circumstances(transfer, band_rad_s=F(1)))
    assert window(price) == (tight(low), inf)
    assert "the highest zero" in price.reasons[0]


def test_window_starts_no_lower_than_the_band_edge() -> None:
    """-s/10 + 1, w = 20: at p = 20 the phase goes from that of 1 - 2j to that of 1 - 2j/(1 + j) = -j: 26.6 deg."""
    opposed = TransferFunction.from_polynomials([F(-1, 10), 1], [1])
    price = proposal_for(opposed, circumstances(opposed, band_rad_s=F(20), phase_budget_deg=F(50)))
    assert window(price)[0] == tight(20)
    assert "the band edge" in price.reasons[0]


@pytest.mark.parametrize(
    ("method", "high"),
    [
        ("auto", 4000.0),
        ("bilinear", 4000.0),
        ("bilinear-prewarped", 4000.0),
        ("blended-difference", 4000.0),
        ("forward-difference", 2000.0),
        ("backward-difference", inf),
        ("step-invariant", inf),
        ("ramp-invariant", inf),
        ("impulse-invariant", inf),
        ("pole-zero-mapped", inf),
    ],
)
def test_window_ends_where_the_method_begins_to_ring(method: str, high: float) -> None:
    around = circumstances(PID, period_s=F(1, 2000), band_rad_s=BAND_RAD_S, method=method)
    price = proposal_for(PID, around)
    assert window(price)[1] == high
    assert method in price.reasons[1]


def test_window_has_no_upper_end_without_a_rate() -> None:
    price = proposal_for(PID, circumstances(PID, band_rad_s=BAND_RAD_S))
    assert window(price)[1] == inf
    assert "no limit without a rate" in price.reasons[1]


@pytest.mark.parametrize(
    ("band", "pole"),
    [(F(100), F(952)), (F(1), F("9.52")), (F(1, 1000), F("0.00952")), (F(10**6), F(9520000))],
)
def test_automatic_pole_is_the_low_end_rounded_up_to_three_digits(band: Fraction, pole: Fraction) -> None:
    """1/tan(6 deg) = 9.5144."""
    differentiator = TransferFunction.from_polynomials([1, 0], [1])
    assert proposal_for(differentiator, circumstances(differentiator, band_rad_s=band)).pole_rad_s == pole


def test_a_low_end_of_three_digits_is_taken_as_it_is() -> None:
    transfer = TransferFunction.from_polynomials([1, 700], [1])
    assert proposal_for(transfer, circumstances(transfer, band_rad_s=F(1))).pole_rad_s == 700


def test_a_window_too_narrow_for_three_digits_gets_as_many_as_it_needs() -> None:
    """At 5049 Hz and a band of rate/30 one pole on the whole may lie between 10061 and 10098 rad/s only."""
    differentiator = TransferFunction.from_polynomials([1, 0], [1])
    around = circumstances(differentiator, period_s=F(1, 5049))
    price = proposal_for(differentiator, around)
    assert price.pole_rad_s == F(10070)
    assert price.within_window


def test_an_empty_window_still_has_a_proposal_at_its_low_end() -> None:
    around = circumstances(PID, period_s=F(1, 500), band_rad_s=BAND_RAD_S)
    price = proposal_for(PID, around, placement="whole")
    assert price.pole_rad_s == 1200
    assert (price.window_rad_s, price.within_window) == (None, False)
    assert "the window is empty" in " ".join(price.reasons)


def test_a_pole_below_the_band_edge_is_priced_and_named() -> None:
    price = proposal_for(PID, circumstances(PID, band_rad_s=BAND_RAD_S), placement="whole", pole_rad_s=F(63))
    assert price.phase_lost_deg == pytest.approx(degrees(atan(2)), abs=PHASE_TOLERANCE_DEG)
    assert not price.within_window
    assert "below the band edge" in price.reasons[-1]


@pytest.mark.parametrize(
    ("order", "damping", "expected"),
    [(1, F(1), pi / tan(radians(6))), (2, F(1), pi / tan(radians(3)))],
)
def test_one_pole_needs_a_thirtieth_of_the_rate_and_two_a_sixtieth(
    order: int, damping: Fraction, expected: float
) -> None:
    needed = samples_per_band_period(order, damping, circumstances(PID))
    assert needed == tight(expected)
    assert round(expected / 30) == order
    differentiator = TransferFunction.from_polynomials([1, 0], [1])
    for share, exists in ((F(101, 100), True), (F(99, 100), False)):
        period = 2 * F(pi) / (F(expected) * share)
        around = circumstances(differentiator, period_s=period, band_rad_s=F(1))
        assert (proposal_for(differentiator, around, order=order).window_rad_s is not None) is exists


def test_methods_without_a_limit_need_no_rate_above_the_band() -> None:
    assert samples_per_band_period(1, F(1), circumstances(PID, method="ramp-invariant")) is None
