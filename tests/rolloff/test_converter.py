"""What one count does to the output at once: its price, and the end it sets to a window."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import pytest
from scipy.optimize import brentq

from realize.rolloff import PAIR_DAMPING, apply_rolloff, circumstances, proposal_for
from realize.transfer import TransferFunction
from tests.rolloff.designs import BAND_RAD_S, PID, SIGNALS, at, tight, ways_out, window

F = Fraction


def test_converter_step_of_a_biproper_result_is_its_gain_at_infinity_in_percent_of_the_span() -> None:
    around = circumstances(PID, **SIGNALS)
    price = proposal_for(PID, around, pole_rad_s=F(1000))
    assert price.converter_step_percent == tight(94.2 * 0.0005 / 2 * 100)


@pytest.mark.parametrize("placement", ["derivative", "whole"])
@pytest.mark.parametrize("damping", [F(1), PAIR_DAMPING])
def test_converter_step_with_a_pole_to_spare_is_what_bilinear_feeds_through(placement: str, damping: Fraction) -> None:
    around = circumstances(PID, period_s=F(1, 2000), **SIGNALS)
    price = proposal_for(PID, around, placement=placement, order=2, damping=damping, pole_rad_s=F(1500))
    assert price.converter_step_percent == tight(float(at(price.transfer, F(4000))) * 0.0005 / 2 * 100)


@pytest.mark.parametrize(
    "known",
    [
        {"input_per_count": F(1, 2000), "period_s": F(1, 2000)},
        {"output_span": F(2), "period_s": F(1, 2000)},
        {"input_per_count": F(1, 2000), "output_span": F(2)},
    ],
    ids=["no span", "no count", "no rate"],
)
def test_converter_step_is_unknown_without_signals_or_the_rate_it_needs(known: dict[str, Fraction]) -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S, **known)  # type: ignore[arg-type]
    assert proposal_for(PID, around, order=2).converter_step_percent is None


def test_converter_step_is_unknown_where_bilinear_has_no_feed_through() -> None:
    """A pole at s = 2/T goes to z = infinity."""
    growing = TransferFunction.from_polynomials([1, 0, 0], [1, -200])
    around = circumstances(growing, period_s=F(1, 100), input_per_count=F(1), output_span=F(1))
    assert proposal_for(growing, around, order=2).converter_step_percent is None


def test_window_ends_where_the_derivative_makes_one_count_reach_its_tolerance() -> None:
    """4.2 + 0.09 p times 0.0005/2 is 5 % at p = 195.8/0.09."""
    around = circumstances(PID, period_s=F(1, 2000), **SIGNALS)
    assert window(proposal_for(PID, around))[1] == tight(195.8 / 0.09)
    assert window(proposal_for(PID, around, placement="whole"))[1] == tight(200 / 0.09)


@pytest.mark.parametrize("placement", ["derivative", "whole"])
@pytest.mark.parametrize(("order", "damping"), [(2, F(1)), (2, PAIR_DAMPING), (3, F(1))])
def test_window_with_a_pole_to_spare_ends_where_the_bilinear_feed_through_reaches_its_tolerance(
    placement: str, order: int, damping: Fraction
) -> None:
    around = circumstances(PID, period_s=F(1, 20000), **SIGNALS)
    price = proposal_for(PID, around, placement=placement, order=order, damping=damping)

    def over(pole: float) -> float:
        return float(abs(at(apply_rolloff(PID, placement, order, damping, F(pole)), F(40000)))) - 200

    assert window(price)[1] == tight(min(40000, brentq(over, 100, 1e6, xtol=1e-9)))
    assert window(price)[1] < 40000


@pytest.mark.parametrize(("span", "high"), [(F(19), None), (F(21), 400.0)])
def test_a_filter_that_does_not_reach_the_count_decides_nothing_about_it(span: Fraction, high: float | None) -> None:
    """s^2 - 400 s vanishes at s = 2/T = 400, which leaves a gain of 1: 5 % of a span of 20."""
    blind = TransferFunction.from_polynomials([1, -400, 1], [1])
    around = circumstances(
        blind,
        period_s=F(1, 200),
        band_rad_s=F(1, 10),
        input_per_count=F(1),
        output_span=span,
        phase_budget_deg=F(60),
    )
    price = proposal_for(blind, around, order=3)
    assert (price.window_rad_s and price.window_rad_s[1]) == high


def test_a_count_that_is_never_too_much_sets_no_limit() -> None:
    """Even unfiltered the gain at s = 2/T = 4000 is 4.2 + 18/4000 + 360, below the 500 that reach 5 %."""
    around = circumstances(
        PID, period_s=F(1, 2000), band_rad_s=BAND_RAD_S, input_per_count=F("0.0002"), output_span=F(2)
    )
    assert window(proposal_for(PID, around, placement="whole", order=2))[1] == 4000


def test_a_derivative_against_the_proportional_part_needs_a_pole_between_two_ends() -> None:
    """-10 + p/10 within +-5 for p in [50, 150]."""
    opposed = TransferFunction.from_polynomials([F("0.1"), -10], [1])
    around = circumstances(
        opposed,
        band_rad_s=F(1),
        input_per_count=F(1),
        output_span=F(100),
        converter_step_tolerance_percent=F(5),
    )
    price = proposal_for(opposed, around, pole_rad_s=F(120))
    assert window(price) == (tight(100), tight(150))  # the zero at 100 lies above the lower end, 50
    slow = TransferFunction.from_polynomials([2, -10], [1])
    assert window(proposal_for(slow, circumstances(slow, **around_counts()))) == (tight(5), tight(7.5))


def around_counts() -> dict[str, Any]:
    return {"band_rad_s": F(1, 100), "input_per_count": F(1), "output_span": F(100)}


def test_a_proportional_part_that_is_too_much_by_itself_leaves_no_window() -> None:
    coarse = TransferFunction.from_polynomials([1, 10], [1])
    price = proposal_for(coarse, circumstances(coarse, **around_counts()))
    assert price.window_rad_s is None
    assert not price.within_window
    assert ways_out(price) == ["an input resolution of 0.25 per count or finer"]  # 5/(10 + 10)
