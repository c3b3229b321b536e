"""The plant as the sampled controller sees it, against published numbers and the sum of all aliases."""

from __future__ import annotations

from fractions import Fraction
from math import exp

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.irrational import pi
from realize.errors import Refused
from realize.loop import Plant, held_plant
from realize.loop.response import Sampled
from realize.methods import discretize
from realize.transfer import TransferFunction
from tests.loop.independent import alias_sum
from tests.loop.loops import LOOPS, Case, ratio, transfer

_STEEP = [case for case in LOOPS if case.plant.transfer.relative_degree + case.plant.sensor.relative_degree >= 2]


def test_double_integrator_with_fractional_delay_has_the_printed_matrices() -> None:
    """T = 1, delay 0.3: ``G0 = [0.245, 0.7]``, ``G1 = [0.255, 0.3]`` (Astrom & Wittenmark, from memory, recomputed).

    ``x+ = [[1, 1], [0, 1]] x + G0 u[k] + G1 u[k-1]``, output ``[1, 0]``:
    ``(G0_1 (z - 1) + G0_2) + (G1_1 (z - 1) + G1_2)/z`` over ``(z - 1)^2``.
    """
    held = held_plant(Plant(transfer("1", "1 0 0"), Fraction("0.3")), Fraction(1), Fraction(0))
    g0, g1 = (Fraction("0.245"), Fraction("0.7")), (Fraction("0.255"), Fraction("0.3"))
    assert held.whole == 1
    assert held.pulse.numerator == (g0[0], g0[1] - g0[0] + g1[0], g1[1] - g1[0])
    assert held.pulse.denominator == (Fraction(1), Fraction(-2), Fraction(1))


@given(st.fractions(min_value=0, max_value=3, max_denominator=50), st.fractions(min_value="1/100", max_value=5))
def test_held_integrator_follows_the_modified_z_transform(delay: Fraction, period: Fraction) -> None:
    """``1/s^2 -> mT/(z - 1) + T/(z - 1)^2`` (Jury 1958), times ``z - 1`` for the hold."""
    held = held_plant(Plant(transfer("1", "1 0"), delay), period, Fraction(0))
    m = held.whole - delay / period
    assert 0 <= m < 1
    assert held.pulse.numerator == (m * period, (1 - m) * period)


def test_held_lag_with_fractional_delay_has_its_closed_form() -> None:
    """``1/(s + a)``: what is left of a period acts at once, the rest a sample later."""
    held = held_plant(Plant(transfer("1", "1 2"), Fraction("0.07")), Fraction("0.1"), Fraction("0.1"))
    first = (1 - exp(-2 * 0.03)) / 2
    second = (exp(-2 * 0.03) - exp(-2 * 0.1)) / 2
    assert held.whole == 2
    assert [float(c) for c in held.pulse.numerator] == pytest.approx([first, second], rel=1e-14)


@pytest.mark.parametrize("case", LOOPS, ids=[case.name for case in LOOPS])
def test_without_delay_it_is_the_step_invariant_method(case: Case) -> None:
    plant, sensor = case.plant.transfer, case.plant.sensor
    chain = TransferFunction.from_polynomials(
        poly.multiply(plant.numerator, sensor.numerator), poly.multiply(plant.denominator, sensor.denominator)
    )
    held = held_plant(case.plant._replace(dead_time_s=Fraction(0)), case.period_s, Fraction(0))
    expected = discretize(chain, case.period_s, "step-invariant").pulse
    assert held.whole == 0
    for found, wanted in zip(held.pulse.numerator, expected.numerator, strict=True):
        assert abs(found - wanted) <= abs(wanted) / 10**60


def test_whole_samples_of_delay_only_shift() -> None:
    plant, period = Plant(transfer("1 3", "1 2 5")), Fraction(1, 8)
    none, two = (held_plant(plant, period, n * period) for n in (0, 2))
    assert two.pulse.numerator == none.pulse.numerator
    assert (none.whole, two.whole) == (0, 2)


@pytest.mark.parametrize("case", _STEEP, ids=[case.name for case in _STEEP])
def test_response_is_the_sum_of_all_aliases(case: Case) -> None:
    """The second road; two poles more than zeros and the hold leave 1e-10 beyond 20 000 aliases."""
    held = held_plant(case.plant, case.period_s, case.compute_delay_s)
    period = float(case.period_s)
    w = np.array([0.02, 0.3, 0.7, 0.95]) * np.pi / period
    log_gain, phase = Sampled(held.pulse).at(w)
    found = np.exp(log_gain + 1j * (phase - held.whole * period * w))
    expected = [alias_sum(case.seen_ratio, period, float(held.delay_s), x) for x in w]
    assert found == pytest.approx(np.array(expected), rel=1e-6)


def test_growth_beyond_a_double_is_refused() -> None:
    with pytest.raises(Refused) as refusal:
        held_plant(Plant(transfer("1", "1 -1000")), Fraction(1), Fraction(0))
    assert "grows by exp(1000) in one period" in str(refusal.value)


def test_a_mode_at_a_multiple_of_half_the_rate_is_named_as_lost() -> None:
    """Poles at ``-0.1 +- j pi`` differ by one sampling frequency at T = 1 s: both fall on ``z = -exp(-0.1)``."""
    below = [Fraction(1), Fraction("0.2"), Fraction("0.01") + pi() ** 2]
    plant = TransferFunction.from_polynomials([below[2]], below)
    held = held_plant(Plant(plant), Fraction(1), Fraction(0))
    assert any("pathological sampling" in note and "0.50025 Hz" in note for note in held.notes)
    assert not held_plant(Plant(plant), Fraction(9, 10), Fraction(0)).notes


def test_a_mode_cancelled_by_the_sensor_is_named() -> None:
    held = held_plant(Plant(transfer("1", "1 3 2"), sensor=transfer("1 2", "1 5")), Fraction(1, 10), Fraction(0))
    assert any("cancelled between plant and sensor" in note and "2 rad/s" in note for note in held.notes)


def test_held_plants_keep_the_gain_at_low_frequency_whatever_the_delay() -> None:
    for delay in ("0", "0.01", "0.1", "0.123"):
        held = held_plant(Plant(transfer("3 4", "1 2 8"), Fraction(delay)), Fraction(1, 10), Fraction(0))
        assert float(held.pulse.low_frequency_gain) == pytest.approx(0.5, rel=1e-15)


def test_the_unit_of_ratios_is_the_same_on_both_roads() -> None:
    case = LOOPS[1]
    assert case.seen_ratio.at(0.5j) == pytest.approx(
        ratio(case.plant.transfer).at(0.5j) * ratio(case.plant.sensor).at(0.5j), rel=1e-12
    )
