"""Phase lost at the band edge against complex arithmetic, and where it reaches the budget against root finders."""

from __future__ import annotations

from fractions import Fraction
from math import atan, atan2, degrees, inf, radians, sqrt, tan
from typing import Any

import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st
from scipy.optimize import brentq

from realize.rolloff import PAIR_DAMPING, apply_rolloff, circumstances, proposal_for, proposals
from realize.transfer import TransferFunction
from tests.rolloff.designs import (
    BAND_RAD_S,
    PHASE_TOLERANCE_DEG,
    PID,
    dampings,
    improper,
    lost_deg,
    placements,
    poles,
    response,
    tight,
    window,
)

F = Fraction


@pytest.mark.parametrize(
    ("order", "damping", "expected_deg"),
    [
        (1, F(1), lambda x: degrees(atan(x))),
        (2, F(1), lambda x: 2 * degrees(atan(x))),
        (5, F(1), lambda x: 5 * degrees(atan(x))),
        (2, F(1, 4), lambda x: degrees(atan2(x / 2, 1 - x * x))),
    ],
)
@pytest.mark.parametrize("pole", [F(40), F(126), F(3000)])
def test_filter_on_the_whole_loses_its_own_phase(
    order: int, damping: Fraction, expected_deg: Any, pole: Fraction
) -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S)
    proposal = proposal_for(PID, around, placement="whole", order=order, damping=damping, pole_rad_s=pole)
    assert proposal.phase_lost_deg == pytest.approx(expected_deg(126 / float(pole)), abs=PHASE_TOLERANCE_DEG)


def test_a_pair_costs_hardly_more_phase_than_one_pole_with_the_same_delay() -> None:
    """Delay times frequency 0.1 each: atan(0.1) = 5.711 deg, atan2(0.1, 1 - 0.1^2/2) = 5.739 deg (recomputed)."""
    around = circumstances(PID, band_rad_s=F(1))
    one = proposal_for(PID, around, placement="whole", pole_rad_s=F(10))
    exact_damping = F(1 / sqrt(2))
    pair = proposal_for(PID, around, placement="whole", order=2, damping=exact_damping, pole_rad_s=F(10 * sqrt(2)))
    assert one.phase_lost_deg == pytest.approx(degrees(atan(0.1)), abs=PHASE_TOLERANCE_DEG)
    assert pair.phase_lost_deg == pytest.approx(degrees(atan2(0.1, 0.995)), abs=PHASE_TOLERANCE_DEG)
    assert (round(one.phase_lost_deg or 0, 3), round(pair.phase_lost_deg or 0, 3)) == (5.711, 5.739)


@given(improper(), placements, st.integers(0, 2), dampings, poles, st.integers(1, 50))
def test_phase_lost_is_the_phase_between_the_two_responses(
    transfer: TransferFunction, placement: str, more: int, damping: Fraction, pole: Fraction, band: int
) -> None:
    order = more - transfer.relative_degree
    around = circumstances(transfer, band_rad_s=F(band))
    price = proposal_for(
        transfer,
        around,
        placement=placement,
        order=order,
        damping=damping if order == 2 else F(1),
        pole_rad_s=pole,
    )
    here, there = response(transfer, band), response(price.transfer, band)
    assume(abs(here) > 1e-6 and abs(there) > 1e-6)
    assert price.phase_lost_deg is not None
    turned = (price.phase_lost_deg - lost_deg(transfer, price.transfer, band)) / 360
    assert turned == pytest.approx(round(turned), abs=1e-8)


def test_phase_lost_is_undefined_where_the_transfer_function_is_zero_at_the_band_edge() -> None:
    notch = TransferFunction.from_polynomials([1, 0, 25, 0], [1, 2])
    price = proposal_for(notch, circumstances(notch, band_rad_s=F(5)), pole_rad_s=F(50))
    assert price.phase_lost_deg is None
    assert price.window_rad_s == (5.0, None)
    assert any("zero at the band edge" in reason for reason in price.reasons)


@pytest.mark.parametrize(("order", "angle_deg"), [(1, 6), (2, 3), (3, 2)])
def test_window_on_the_whole_starts_where_each_pole_takes_its_share_of_the_budget(order: int, angle_deg: int) -> None:
    price = proposal_for(PID, circumstances(PID, band_rad_s=BAND_RAD_S), placement="whole", order=order)
    assert window(price) == (tight(126 / tan(radians(angle_deg))), inf)


@pytest.mark.parametrize("damping", [PAIR_DAMPING, F(1, 10)])
@pytest.mark.parametrize("budget", [1, 6, 80])
def test_window_of_a_pair_starts_where_the_pair_takes_the_budget(damping: Fraction, budget: int) -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S, phase_budget_deg=F(budget))
    price = proposal_for(PID, around, placement="whole", order=2, damping=damping)
    z = float(damping)
    x = brentq(lambda x: degrees(atan2(2 * z * x, 1 - x * x)) - budget, 1e-6, 1 - 1e-12, xtol=1e-15)
    assert window(price)[0] == tight(126 / x)


@pytest.mark.parametrize(("order", "damping"), [(1, F(1)), (2, F(1)), (2, PAIR_DAMPING), (3, F(1))])
def test_window_of_the_derivative_starts_where_the_real_responses_part_by_the_budget(
    order: int, damping: Fraction
) -> None:
    price = proposal_for(PID, circumstances(PID, band_rad_s=BAND_RAD_S), order=order, damping=damping)

    def excess(pole: float) -> float:
        return lost_deg(PID, apply_rolloff(PID, "derivative", order, damping, F(pole)), 126) - 6

    assert window(price)[0] == tight(brentq(excess, 300, 30000, xtol=1e-9))


@given(improper(), st.integers(1, 60), st.integers(1, 100))
@example(TransferFunction.from_polynomials([1, -20, 1], [1]), 6, 1)  # C nearly cancels at w = 1
def test_every_pole_from_the_low_end_up_stays_within_budget(transfer: TransferFunction, budget: int, band: int) -> None:
    around = circumstances(transfer, band_rad_s=F(band), phase_budget_deg=F(budget))
    for price in proposals(transfer, around):
        if price.phase_lost_deg is None:
            continue
        for factor in (1, 1.1, 2, 10, 1000):
            pole = F(window(price)[0] * factor)
            again = proposal_for(
                transfer,
                around,
                placement=price.placement,
                order=price.order,
                damping=price.damping,
                pole_rad_s=pole,
            )
            assert again.phase_lost_deg is not None
            assert again.phase_lost_deg <= budget + 1e-6


def test_budget_holds_for_every_faster_pole_where_the_loss_comes_and_goes() -> None:
    """1 - s at w = 1 loses atan(x) + atan(1 - x) - 45 deg, x = 1/p: 0 at x = 0 and 1, 8.1 deg at x = 1/2.

    With tan(51 deg) = 1/(1 - x (1 - x)) for 6 deg, poles from 1 to 1.34 and from 3.91 up are within.
    """
    opposed = TransferFunction.from_polynomials([-1, 1], [1])
    around = circumstances(opposed, band_rad_s=F(1))
    x = (1 - sqrt(1 - 4 * (1 - 1 / tan(radians(51))))) / 2
    assert window(proposal_for(opposed, around))[0] == tight(1 / x)
    assert proposal_for(opposed, around, pole_rad_s=F("1.2")).phase_lost_deg == tight(
        degrees(atan(1 / 1.2) + atan(1 - 1 / 1.2)) - 45
    )
