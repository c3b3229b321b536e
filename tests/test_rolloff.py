"""Roll-off: exact results, prices against complex arithmetic and closed forms, windows against root finders."""

from __future__ import annotations

import re
import tomllib
from fractions import Fraction
from math import atan, atan2, degrees, inf, pi, radians, sqrt, tan
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st
from scipy.optimize import brentq

from realize.errors import RealizeError
from realize.quantity import parse_quantity
from realize.rolloff import (
    PAIR_DAMPING,
    Circumstances,
    Proposal,
    apply_rolloff,
    circumstances,
    decimal_or_quotient,
    finite_figure,
    proposal_for,
    proposals,
    rolloff_toml,
    samples_per_band_period,
    split,
)
from realize.transfer import TransferFunction

F = Fraction

#: An invented servo for a roller gap: 4.2 + 18/s + 0.09 s.
PID = TransferFunction.from_polynomials([F("0.09"), F("4.2"), 18], [1, 0])
BAND_RAD_S = F(126)

#: Phases are compared after a handful of float operations on numbers of order one.
PHASE_TOLERANCE_DEG = 1e-9


def value(p: tuple[int, ...], s: Fraction) -> Fraction:
    return sum((F(c) * s ** (len(p) - 1 - i) for i, c in enumerate(p)), start=F(0))


def at(transfer: TransferFunction, s: Fraction) -> Fraction:
    return value(transfer.numerator, s) / value(transfer.denominator, s)


def response(transfer: TransferFunction, w: float) -> complex:
    s = 1j * w
    return complex(np.polyval(transfer.numerator, s) / np.polyval(transfer.denominator, s))


def lost_deg(transfer: TransferFunction, rolled: TransferFunction, w: float) -> float:
    return float(np.degrees(np.angle(response(transfer, w) / response(rolled, w))))


def tight(figure: float) -> Any:
    return pytest.approx(figure, rel=1e-9)


@st.composite
def improper(draw: st.DrawFn) -> TransferFunction:
    """An improper ratio of small integers, excess degree 1 to 3, poles and zeros anywhere but hidden ones."""
    excess = draw(st.integers(1, 3))
    d = draw(st.lists(st.integers(-20, 20), min_size=1, max_size=3).filter(lambda c: c[0] != 0))
    length = len(d) + excess
    n = draw(st.lists(st.integers(-20, 20), min_size=length, max_size=length).filter(lambda c: c[0] != 0))
    try:
        transfer = TransferFunction.from_polynomials(n, d)
    except RealizeError:
        assume(False)
    return transfer


poles = st.fractions(F(1, 50), 1000, max_denominator=50)
dampings = st.sampled_from([F(1), PAIR_DAMPING, F(1, 5)])
placements = st.sampled_from(["derivative", "whole"])


@st.composite
def settings_around(draw: st.DrawFn, transfer: TransferFunction) -> Circumstances:
    known = draw(st.booleans())
    return circumstances(
        transfer,
        period_s=draw(st.none() | st.fractions(F(1, 10**5), 1, max_denominator=10**5).filter(bool)),
        band_rad_s=draw(st.none() | st.fractions(F(1, 100), 100, max_denominator=100)),
        phase_budget_deg=F(draw(st.integers(1, 60))),
        input_per_count=draw(st.fractions(F(1, 10**5), F(1, 10), max_denominator=10**5)) if known else None,
        output_span=F(draw(st.integers(1, 100))) if known else None,
        method=draw(st.sampled_from(["auto", "bilinear", "forward-difference", "ramp-invariant"])),
    )


# ---- exact results -----------------------------------------------------------------------------------------


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
def test_result_tends_to_the_original_as_the_pole_goes_to_infinity(
    transfer: TransferFunction, placement: str
) -> None:
    s = F(11, 13)
    assume(value(transfer.denominator, s) != 0)
    errors = [
        abs(at(apply_rolloff(transfer, placement, 3, F(1), F(pole)), s) - at(transfer, s))
        for pole in (10**6, 10**12)
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


# ---- prices ------------------------------------------------------------------------------------------------


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


@pytest.mark.parametrize("pole", [F(200), F(1200), F(10**6)])
def test_gain_of_a_rising_biproper_result_is_its_limit_at_infinity(pole: Fraction) -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S)
    price = proposal_for(PID, around, pole_rad_s=pole)
    assert price.high_frequency_gain == tight(4.2 + 0.09 * float(pole))
    assert price.relative_degree == 0


@given(improper(), st.data())
def test_high_frequency_gain_is_the_highest_on_a_dense_grid(
    transfer: TransferFunction, data: st.DataObject
) -> None:
    around = circumstances(transfer, band_rad_s=F(2))
    assume(all(root.value.real != 0 or root.value.imag < 2 for root in transfer.poles))
    for price in proposals(transfer, around):
        grid = np.geomspace(2, 1e6 * float(price.pole_rad_s), 20000)
        s = 1j * grid
        n, d = (np.array(p, dtype=float) for p in (price.transfer.numerator, price.transfer.denominator))
        gains = np.abs(np.polyval(n, s) / np.polyval(d, s))
        assert price.high_frequency_gain is not None
        assert price.high_frequency_gain >= gains.max() * (1 - 1e-9)
        assert price.high_frequency_gain <= gains.max() * 1.02  # a grid point within 0.05 % of any peak


def test_high_frequency_gain_finds_a_peak_a_millionth_wide() -> None:
    """s + 1/(s^2 + 2e-6 s + 1) at w = 1: j + 1/(2e-6 j) = -499999 j, beside a filter that changes little."""
    resonant = TransferFunction.from_polynomials([1, F("2e-6"), 1, 1], [1, F("2e-6"), 1])
    price = proposal_for(resonant, circumstances(resonant, band_rad_s=F(1, 10)), pole_rad_s=F(10**5))
    assert price.high_frequency_gain == pytest.approx(499999, rel=1e-8)


@pytest.mark.parametrize(("band", "bounded"), [(F(2), False), (F(3), False), (F(4), True)])
def test_an_undamped_pair_in_or_above_the_band_edge_has_no_highest_gain(band: Fraction, bounded: bool) -> None:
    resonant = TransferFunction.from_polynomials([1, 1, 9, 10], [1, 0, 9])
    price = proposal_for(resonant, circumstances(resonant, band_rad_s=band), pole_rad_s=F(100))
    assert (price.high_frequency_gain is not None) is bounded


def test_a_gain_beyond_double_range_is_no_figure_rather_than_an_overflow() -> None:
    huge = TransferFunction.from_polynomials([10**400, 1], [1])
    price = proposal_for(huge, circumstances(huge, input_per_count=F(1), output_span=F(1)))
    assert price.high_frequency_gain is None
    assert price.converter_step_percent is None


def test_converter_step_of_a_biproper_result_is_its_gain_at_infinity_in_percent_of_the_span() -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S, input_per_count=F("0.0005"), output_span=F(2))
    price = proposal_for(PID, around, pole_rad_s=F(1000))
    assert price.converter_step_percent == tight(94.2 * 0.0005 / 2 * 100)


@pytest.mark.parametrize("placement", ["derivative", "whole"])
@pytest.mark.parametrize("damping", [F(1), PAIR_DAMPING])
def test_converter_step_with_a_pole_to_spare_is_what_bilinear_feeds_through(
    placement: str, damping: Fraction
) -> None:
    around = circumstances(
        PID, period_s=F(1, 2000), band_rad_s=BAND_RAD_S, input_per_count=F("0.0005"), output_span=F(2)
    )
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


# ---- windows -----------------------------------------------------------------------------------------------


def window(proposal: Proposal) -> tuple[float, float]:
    assert proposal.window_rad_s is not None
    low, high = proposal.window_rad_s
    return low, inf if high is None else high


@pytest.mark.parametrize(("order", "angle_deg"), [(1, 6), (2, 3), (3, 2)])
def test_window_on_the_whole_starts_where_each_pole_takes_its_share_of_the_budget(
    order: int, angle_deg: int
) -> None:
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
def test_every_pole_from_the_low_end_up_stays_within_budget(
    transfer: TransferFunction, budget: int, band: int
) -> None:
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


def test_window_ends_where_the_derivative_makes_one_count_reach_its_tolerance() -> None:
    """4.2 + 0.09 p times 0.0005/2 is 5 % at p = 195.8/0.09."""
    around = circumstances(
        PID, period_s=F(1, 2000), band_rad_s=BAND_RAD_S, input_per_count=F("0.0005"), output_span=F(2)
    )
    assert window(proposal_for(PID, around))[1] == tight(195.8 / 0.09)
    assert window(proposal_for(PID, around, placement="whole"))[1] == tight(200 / 0.09)


@pytest.mark.parametrize("placement", ["derivative", "whole"])
@pytest.mark.parametrize(("order", "damping"), [(2, F(1)), (2, PAIR_DAMPING), (3, F(1))])
def test_window_with_a_pole_to_spare_ends_where_the_bilinear_feed_through_reaches_its_tolerance(
    placement: str, order: int, damping: Fraction
) -> None:
    around = circumstances(
        PID, period_s=F(1, 20000), band_rad_s=BAND_RAD_S, input_per_count=F("0.0005"), output_span=F(2)
    )
    price = proposal_for(PID, around, placement=placement, order=order, damping=damping)

    def over(pole: float) -> float:
        return float(abs(at(apply_rolloff(PID, placement, order, damping, F(pole)), F(40000)))) - 200

    assert window(price)[1] == tight(min(40000, brentq(over, 100, 1e6, xtol=1e-9)))
    assert window(price)[1] < 40000


@pytest.mark.parametrize(("span", "high"), [(F(19), None), (F(21), 400.0)])
def test_a_filter_that_does_not_reach_the_count_decides_nothing_about_it(
    span: Fraction, high: float | None
) -> None:
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


# ---- the automatic pole ------------------------------------------------------------------------------------


@given(improper(), st.data())
def test_proposals_are_proper_ordered_and_honest(transfer: TransferFunction, data: st.DataObject) -> None:
    around = data.draw(settings_around(transfer))
    found = proposals(transfer, around)
    excess = -transfer.relative_degree
    shapes = {(order, F(1)) for order in (excess, excess + 1)} | ({(2, PAIR_DAMPING)} if excess <= 2 else set())
    assert {(p.placement, p.order, p.damping) for p in found} == {
        (placement, *shape) for placement in ("derivative", "whole") for shape in shapes
    }
    ranks = [(not p.within_window, p.order, p.placement == "whole", p.damping != 1) for p in found]
    assert ranks == sorted(ranks)
    for price in found:
        assert price.relative_degree >= 0
        assert price.within_window is (price.window_rad_s is not None)
        if price.window_rad_s is not None:
            low, high = window(price)
            assert low * (1 - 1e-9) <= price.pole_rad_s <= high * (1 + 1e-9)
            assert price.phase_lost_deg is None or price.phase_lost_deg <= around.phase_budget_deg + F(1, 10**6)
            if price.converter_step_percent is not None:
                assert price.converter_step_percent <= 5 * (1 + 1e-6)


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


# ---- ways out ----------------------------------------------------------------------------------------------


def ways_out(price: Proposal) -> list[str]:
    return [reason.removeprefix("way out: ") for reason in price.reasons if reason.startswith("way out: ")]


def numbers(text: str) -> list[Fraction]:
    return [F(number) for number in re.findall(r"(?:at least|resolution of) ([0-9.]+)", text)]


def test_an_empty_window_at_too_low_a_rate_names_the_rate_and_the_phase() -> None:
    """The whole of PID needs 1200 rad/s = 2/T, so 600 Hz; 2/T = 1000 rad/s loses atan(0.126) = 7.18 deg."""
    around = circumstances(PID, period_s=F(1, 500), band_rad_s=BAND_RAD_S)
    price = proposal_for(PID, around, placement="whole")
    assert ways_out(price) == [
        "a rate of at least 600 Hz, the band staying at 20.054 Hz",
        "a phase budget of at least 7.19 deg",
    ]


def test_an_empty_window_at_too_coarse_a_count_names_resolution_and_phase() -> None:
    """At 1200 rad/s the gain is 108: 5 % of a span of 2 takes 0.1/108 = 0.000925 per count."""
    around = circumstances(PID, band_rad_s=BAND_RAD_S, input_per_count=F("0.001"), output_span=F(2))
    price = proposal_for(PID, around, placement="whole")
    assert ways_out(price) == [
        "an input resolution of 0.000925 per count or finer",
        "a phase budget of at least 6.47 deg",  # atan(126 * 0.09/100)
    ]


def test_a_band_above_the_fastest_pole_leaves_no_phase_budget_as_a_way_out() -> None:
    around = circumstances(PID, period_s=F(1, 40), band_rad_s=BAND_RAD_S)
    (way,) = ways_out(proposal_for(PID, around, placement="whole"))
    assert way.startswith("a rate of at least 600 Hz")


@given(st.integers(1, 2000), st.integers(1, 500), st.integers(1, 400), placements, st.integers(1, 3))
def test_every_way_out_opens_the_window_and_a_percent_less_does_not(
    rate: int, band: int, count: int, placement: str, order: int
) -> None:
    known: dict[str, Any] = {"band_rad_s": F(band), "output_span": F(2)}
    here = circumstances(PID, period_s=F(1, rate), input_per_count=F(count, 10**4), **known)
    price = proposal_for(PID, here, placement=placement, order=order)
    assert bool(ways_out(price)) is (price.window_rad_s is None)
    for way in ways_out(price):
        needed = dict(zip(re.findall(r"rate|resolution|phase", way), numbers(way), strict=True))

        def opened(slack: Fraction, needed: dict[str, Fraction] = needed) -> bool:
            around = here._replace(
                period_s=1 / (needed["rate"] * (1 - slack)) if "rate" in needed else here.period_s,
                input_per_count=needed.get("resolution", here.input_per_count),
                phase_budget_deg=needed.get("phase", here.phase_budget_deg) * (1 - slack),
            )
            return proposal_for(PID, around, placement=placement, order=order).window_rad_s is not None

        assert opened(F(0))
        assert len(needed) > 1 or "resolution" in needed or not opened(F(3, 100))


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


# ---- what a design asks for --------------------------------------------------------------------------------


CUBIC = TransferFunction.from_polynomials([1, 0, 0, 0], [1])
DOUBLE = TransferFunction.from_polynomials([1, 0, 0], [1])
LAG = TransferFunction.from_polynomials([1, 2], [1, 3])
STEEP = TransferFunction.from_polynomials([1] * 33, [1] + [0] * 30 + [1])


@pytest.mark.parametrize(
    ("transfer", "asked", "where", "found", "allowed", "advice"),
    [
        (LAG, {}, "[rolloff]", "proper already (relative degree 0)", "for an improper", "remove the table"),
        (DOUBLE, {"order": 1}, "[rolloff] order", "exceeds the denominator's by 2", "at least 2", "order = 2"),
        (PID, {"order": 0}, "[rolloff] order", "exceeds the denominator's by 1", "at least 1", "order = 1"),
        (STEEP, {"order": 2}, "[rolloff] order", "2 poles on top of", "at most 32", "order = 1"),
        (PID, {"placement": "all"}, "[rolloff] placement", '"all"', '"derivative" or "whole"', "derivative"),
        (PID, {"damping": F("0.7")}, "[rolloff] damping", "0.7 with order 1", "a pair", "order = 2, or"),
        (CUBIC, {"damping": F("0.7")}, "[rolloff] damping", "0.7 with order 3", "a pair", "leave damping out"),
        (PID, {"order": 2, "damping": F(0)}, "[rolloff] damping", "0", "above 0", "damping = 0.7071"),
        (PID, {"order": 2, "damping": F(3, 2)}, "[rolloff] damping", "1.5", "at most 1", "damping = 0.7071"),
        (PID, {"pole_rad_s": F(-1, 3)}, "[rolloff] pole", "-1/3 rad/s", "above 0", 'pole = "auto"'),
    ],
)
def test_an_unfit_rolloff_is_refused_by_the_name_of_its_key(
    transfer: TransferFunction, asked: dict[str, Any], where: str, found: str, allowed: str, advice: str
) -> None:
    with pytest.raises(RealizeError) as refusal:
        proposal_for(transfer, circumstances(transfer), **asked)
    error = refusal.value
    assert error.where == where
    assert found in error.found
    assert allowed in error.allowed
    assert advice in error.advice
    assert error.exit_status == 2


@pytest.mark.parametrize("budget", [F(0), F(-6), F(90)])
def test_a_phase_budget_outside_a_quarter_turn_is_refused(budget: Fraction) -> None:
    with pytest.raises(RealizeError, match=r"\[rolloff\] phase_budget: -?\d+ deg") as refusal:
        circumstances(PID, phase_budget_deg=budget)
    assert refusal.value.allowed == "more than 0 deg and less than 90 deg"


def test_the_default_order_is_as_many_poles_as_make_it_proper() -> None:
    assert proposal_for(CUBIC, circumstances(CUBIC)).order == 3


def test_a_proper_transfer_function_gets_no_proposals() -> None:
    assert proposals(LAG, circumstances(LAG)) == ()


@given(improper(), st.data())
def test_pasted_lines_reproduce_the_proposal(transfer: TransferFunction, data: st.DataObject) -> None:
    around = data.draw(settings_around(transfer))
    for price in proposals(transfer, around):
        table = tomllib.loads(rolloff_toml(price), parse_float=F)["rolloff"]
        budget = parse_quantity(table.get("phase_budget", "6 deg"), "angle", "[rolloff]")
        again = proposal_for(
            transfer,
            around._replace(phase_budget_deg=budget),
            placement=table["placement"],
            order=table["order"],
            damping=F(table.get("damping", 1)),
            pole_rad_s=parse_quantity(table["pole"], "angular frequency", "[rolloff]"),
        )
        assert again == price


def test_pasted_lines_hold_the_table_in_full() -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S, phase_budget_deg=F("7.5"))
    price = proposal_for(PID, around, placement="whole", order=2, damping=PAIR_DAMPING, pole_rad_s=F("1999.25"))
    assert rolloff_toml(price).splitlines() == [
        "[rolloff]",
        'placement = "whole"',
        "order = 2",
        "damping = 0.7071",
        'pole = "1999.25 rad/s"',
        'phase_budget = "7.5 deg"',
    ]


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
