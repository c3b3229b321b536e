"""The loops that are compared with the second road: one for every kind of trouble."""

from __future__ import annotations

from fractions import Fraction
from typing import Any, NamedTuple

import pytest

from realize.loop import Margins, Plant
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.loop.independent import Figures, Ratio

#: What margins, crossovers and sensitivity peaks are promised to.
RELATIVE = 1e-6


def near(value: float | None) -> Any:
    """Within what is promised; nothing is near None but None."""
    return None if value is None else pytest.approx(value, rel=RELATIVE)


def assert_margins(found: Margins, expected: Figures) -> None:
    """Compare every figure of a stable loop with the second road."""
    assert found.crossovers_rad_s == pytest.approx(expected.crossovers, rel=RELATIVE)
    assert found.gain_margin == near(expected.gain_raise)
    assert found.gain_reduction_margin == near(expected.gain_cut)
    assert found.phase_margin_deg == near(expected.phase_margin_deg)
    assert found.maximum_sensitivity == near(expected.maximum_sensitivity)


def transfer(above: str, below: str) -> TransferFunction:
    """From coefficients in descending powers, written with blanks between them."""
    return TransferFunction.from_polynomials(*([Fraction(c) for c in text.split()] for text in (above, below)))


def ratio(g: TransferFunction | PulseTransferFunction) -> Ratio:
    """In floating point."""
    return Ratio([float(c) for c in g.numerator], [float(c) for c in g.denominator])


class Case(NamedTuple):
    """A controller, a plant, and how they are sampled."""

    name: str
    controller: TransferFunction
    plant: Plant
    period_s: Fraction
    compute_delay_s: Fraction

    @property
    def loop_ratio(self) -> Ratio:
        """``C P H`` without the dead time."""
        return ratio(self.controller).times(ratio(self.plant.transfer)).times(ratio(self.plant.sensor))

    @property
    def seen_ratio(self) -> Ratio:
        """``P H`` without the dead time."""
        return ratio(self.plant.transfer).times(ratio(self.plant.sensor))


def _case(
    name: str, controller: str, plant: str, period: str, delay: str, dead: str = "0", sensor: str = "1/1"
) -> Case:
    control, process, behind = (transfer(*text.split("/", 1)) for text in (controller, plant, sensor))
    return Case(name, control, Plant(process, Fraction(dead), behind), Fraction(period), Fraction(delay))


#: Controller, plant, period, compute delay, dead time and sensor; every loop is stable in every form.
LOOPS = (
    _case("lag with dead time", "1.2 0.8/1 0", "1/2 1", "0.25", "0.25", "0.35"),
    _case("integrating plant, sensor", "0.8 2/0.04 1", "1/0.5 1 0", "0.05", "0.05", "0", "1/0.05 1"),
    _case("unstable plant", "2/1", "3/0.1 0.9 -1", "0.02", "0.01", "0.05"),
    _case("lightly damped mode near Nyquist", "0.4 0.3/1 0", "625/1 1.5 625.5 625", "0.1", "0.05"),
    _case("non-minimum-phase plant", "0.6 0.5/1 0", "-0.5 1/0.2 1.2 1", "0.1", "0.1"),
    _case("double integrator, fractional delay", "1 0.3/0.3 1", "1/1 0 0", "0.1", "0.03"),
    _case(
        "third-order controller, fourth-order plant",
        "0.02 0.8 0.3/0.001 0.07 1 0",
        "2/0.01 0.17 1.16 2 1",
        "0.05",
        "0.05",
    ),
    _case("conditionally stable", "2 4 2/0.0004 0.04 1", "1/1 0 0 0", "0.01", "0.004", "0.02"),
    _case("sensor with a gain", "0.5 1/1 0", "3/0.5 1.5 1", "0.1", "0.04", "0.06", "0.5/0.02 1"),
    _case("dead time of many samples", "0.3 0.35/1 0", "0.9/0.4 1", "0.02", "0.01", "1.5"),
)
