"""Plant-input mapping: published numbers, and closed-loop poles at exactly ``exp(pT)``."""

from __future__ import annotations

from fractions import Fraction
from math import exp

import numpy as np
import pytest

from realize.algebra import polynomial as poly
from realize.algebra.rounding import FLOAT64
from realize.errors import Refused
from realize.loop import Plant, SampledLoop, held_plant, plant_input_mapped, step_figures
from realize.transfer import TransferFunction
from tests.loop.independent import Ratio
from tests.loop.loops import ratio, transfer

PI = transfer("2 3", "1 0")


@pytest.mark.parametrize(
    ("period", "gain", "zero", "pole"),
    [("1", 6.115706, 0.904837, 0.0817354), ("1/5", 9.123945, 0.980199, 0.800724)],
)
def test_antenna_servo_has_the_recomputed_values(period: str, gain: float, zero: float, pole: float) -> None:
    """Markazi & Hori, ACC 1992, on the antenna servo of Franklin, Powell & Workman (own values, recomputed)."""
    found = plant_input_mapped(transfer("10 1", "1 1"), Plant(transfer("1", "10 1 0")), Fraction(period)).pulse
    above, below = ratio(found)
    assert above == pytest.approx([gain, -gain * zero], abs=5e-6)
    assert below == pytest.approx([1, -pole], abs=5e-7)


_LOOPS = [
    pytest.param(PI, Plant(transfer("1", "1 2")), id="PI and lag"),
    pytest.param(PI, Plant(transfer("1", "1 2"), sensor=transfer("1", "0.1 1")), id="with sensor"),
    pytest.param(transfer("3 2", "0.1 1"), Plant(transfer("1", "1 1 0")), id="lead and integrating plant"),
    pytest.param(transfer("1", "0.2 1"), Plant(transfer("4", "1 3 4")), id="no integral"),
    pytest.param(transfer("1 2", "0.2 1 0"), Plant(transfer("1", "1 2")), id="controller cancels the plant"),
]


@pytest.mark.parametrize("period", ["1/20", "1/2"])
@pytest.mark.parametrize(("controller", "plant"), _LOOPS)
def test_closed_loop_poles_are_images_of_the_continuous_ones(
    controller: TransferFunction, plant: Plant, period: str
) -> None:
    """Every root of ``D + N`` has its image among the sampled loop's; the plant's own are the rest."""
    t = float(Fraction(period))
    design = plant_input_mapped(controller, plant, Fraction(period))
    held = held_plant(plant, Fraction(period), Fraction(0))
    loop = ratio(controller).times(ratio(plant.transfer)).times(ratio(plant.sensor))
    closed = _sum(loop.below, loop.above)
    sampled = ratio(design.pulse).times(ratio(held.pulse))
    polynomial = np.array(_sum(sampled.below, sampled.above))
    for pole in np.roots(closed):
        image = np.exp(pole * t)
        slope = np.polyval(np.polyder(polynomial), image)
        assert abs(np.polyval(polynomial, image) / slope) < 1e-6
    assert SampledLoop(design.pulse, held).verdict.is_stable


def _sum(a: list[float], b: list[float]) -> list[float]:
    return list(np.polyadd(a, b))


@pytest.mark.parametrize(("controller", "plant"), _LOOPS)
def test_the_steady_response_is_kept(controller: TransferFunction, plant: Plant) -> None:
    period = Fraction(1, 10)
    found = step_figures(
        SampledLoop(plant_input_mapped(controller, plant, period).pulse, held_plant(plant, period, Fraction(0)))
    )
    loop = ratio(controller).times(ratio(plant.transfer)).times(ratio(plant.sensor))
    steady = 1.0 if loop.below[-1] == 0 else loop.above[-1] / (loop.above[-1] + loop.below[-1])
    assert found is not None
    assert found.final == pytest.approx(steady / (plant.sensor.numerator[-1] / plant.sensor.denominator[-1]), rel=1e-9)


def test_an_integral_stays_exactly_at_one() -> None:
    design = plant_input_mapped(PI, Plant(transfer("1", "1 2")), Fraction(1, 10))
    assert [root.multiplicity for root in design.pulse.poles if root.value == 0] == [1]
    numerator, denominator = design.rounded(FLOAT64)
    assert len(numerator) == len(denominator)
    assert denominator[0] == 1


def test_poles_and_zeros_are_those_of_the_coefficients() -> None:
    design = plant_input_mapped(transfer("1", "0.2 1"), Plant(transfer("4", "1 3 4")), Fraction(1, 10)).pulse
    for roots, p in ((design.poles, design.denominator), (design.zeros, design.numerator)):
        shifted = Ratio([float(c) for c in poly.shift(poly.trimmed(p), Fraction(1))], [1.0])
        scale = abs(np.polyval(np.abs(shifted.above), 1.0))
        assert sum(root.count for root in roots) == len(shifted.above) - 1
        assert all(abs(shifted.at(root.value)) < 1e-12 * scale for root in roots)


def test_what_it_cancels_is_said() -> None:
    notes = plant_input_mapped(PI, Plant(transfer("1", "1 2")), Fraction(1, 10)).conversion.notes
    assert any("without compute delay" in note for note in notes)
    assert any("cancels the plant's modes" in note and "2 rad/s" in note for note in notes)
    both = plant_input_mapped(transfer("2 1 0.2", "0.1 1 0"), Plant(transfer("1", "1 1 0")), Fraction(1, 10))
    assert any("controller's own integral is lost" in note for note in both.conversion.notes)


@pytest.mark.parametrize(
    ("controller", "plant", "message"),
    [
        pytest.param(
            PI, Plant(transfer("1", "1 2"), Fraction(1, 100)), "needs a plant without dead time", id="dead time"
        ),
        pytest.param(PI, Plant(transfer("1 1", "1 2")), "does not answer at once", id="answers at once"),
        pytest.param(transfer("3", "1"), Plant(transfer("1", "1 -1")), "does not decay", id="growing plant"),
        pytest.param(transfer("3 1", "0.1 1"), Plant(transfer("1", "1 0 0")), "does not decay", id="two integrators"),
        pytest.param(
            transfer("1 0", "0.1 1"), Plant(transfer("1", "1 2")), "a zero at s = 0 leaves none", id="washout"
        ),
        pytest.param(
            transfer("9", "1"), Plant(transfer("1", "1 2 1 0")), "keeps the closed loop as it is", id="unstable"
        ),
        pytest.param(transfer("1 1", "1"), Plant(transfer("1", "1 2")), "the controller is improper", id="improper"),
    ],
)
def test_loops_it_does_not_fit_are_refused(controller: TransferFunction, plant: Plant, message: str) -> None:
    with pytest.raises(Refused) as refusal:
        plant_input_mapped(controller, plant, Fraction(1, 10))
    assert message in str(refusal.value)


def test_the_mapping_of_a_lag_under_gain_is_its_closed_form() -> None:
    """``G = 1/(s + 1)``, ``C = 3``: ``M = 3 (s + 1)/(s + 4)``, ``Cd = k (z - E)/(z - F - k (1 - E))``, k from z = 1."""
    t = 0.1
    e, f = exp(-t), exp(-4 * t)
    k = 0.75 * (1 - f) / (1 - e)
    found = ratio(plant_input_mapped(transfer("3", "1"), Plant(transfer("1", "1 1")), Fraction(1, 10)).pulse)
    assert found.above == pytest.approx([k, -k * e], rel=1e-13)
    assert found.below == pytest.approx([1, -f - k * (1 - e)], rel=1e-13)
