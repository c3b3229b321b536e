"""The highest gain from the band edge up, against limits, dense grids and closed forms."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize.rolloff import circumstances, proposal_for, proposals
from realize.transfer import TransferFunction
from tests.rolloff.designs import BAND_RAD_S, PID, improper, tight

F = Fraction


@pytest.mark.parametrize("pole", [F(200), F(1200), F(10**6)])
def test_gain_of_a_rising_biproper_result_is_its_limit_at_infinity(pole: Fraction) -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S)
    price = proposal_for(PID, around, pole_rad_s=pole)
    assert price.high_frequency_gain == tight(4.2 + 0.09 * float(pole))
    assert price.relative_degree == 0


@given(improper(), st.data())
def test_high_frequency_gain_is_the_highest_on_a_dense_grid(transfer: TransferFunction, data: st.DataObject) -> None:
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
