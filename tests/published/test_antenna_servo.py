"""The antenna pointing servo of Franklin, Powell & Workman, Digital Control of Dynamic Systems.

Source and provenance: ``fixtures/published/antenna_servo.json``. Tolerances: half a unit in the last printed
place. The closed loop is stepped here in rationals, so the overshoot is that of the coefficients alone.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from fractions import Fraction
from itertools import islice
from typing import Any

import numpy as np
import pytest

from realize.algebra import polynomial as poly
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction

Make = Callable[..., TransferFunction]

#: The loop has passed its first peak (at 3.6 s) well before this time.
_HORIZON_S = 8

#: 60 digits: enough for sums of 40 terms, and short enough to stay fast.
_SHORT = 10**60


def _plant(make: Make, period_s: Fraction) -> PulseTransferFunction:
    return discretize(make("1/(s*(10*s + 1))"), period_s, "step-invariant").pulse


def _controller(make: Make, period_s: Fraction, method: str) -> PulseTransferFunction:
    return discretize(make("(10*s + 1)/(s + 1)"), period_s, method).pulse


def _cases() -> list[Any]:
    return [pytest.param(index, id=f"T = {period}") for index, period in enumerate(("1 s", "0.2 s"))]


def _closed_loop(
    plant: PulseTransferFunction, controller: PulseTransferFunction
) -> tuple[poly.Rationals, poly.Rationals]:
    forward = poly.multiply(poly.trimmed(plant.numerator), poly.trimmed(controller.numerator))
    return forward, poly.add(poly.multiply(plant.denominator, controller.denominator), forward)


def _step_response(numerator: poly.Rationals, denominator: poly.Rationals) -> Iterator[Fraction]:
    """``y[0], y[1], ...`` of a ratio in descending powers of z for a unit step at k = 0."""
    padded = (Fraction(0),) * (len(denominator) - len(numerator)) + numerator
    past: list[Fraction] = []
    while True:
        fed = sum(padded[: len(past) + 1], Fraction(0))
        y = fed - sum((a * v for a, v in zip(denominator[1:], reversed(past), strict=False)), Fraction(0))
        past.append(Fraction(round(y / denominator[0] * _SHORT), _SHORT))
        yield past[-1]


def _overshoot_percent(plant: PulseTransferFunction, controller: PulseTransferFunction) -> Fraction:
    response = _step_response(*_closed_loop(plant, controller))
    return 100 * (max(islice(response, int(_HORIZON_S / plant.period_s))) - 1)


@pytest.mark.parametrize("index", _cases())
def test_held_plant_has_the_printed_gain_zero_and_pole(
    index: int, transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    case = published("antenna_servo")["cases"][index]
    plant = _plant(transfer, Fraction(case["period_s"]))
    assert agrees(plant.gain, case["plant_gain"])
    assert agrees(plant.gain, case["book"]["plant_gain"])
    assert agrees(1 + plant.zeros[0].value.real, case["plant_zero"])
    assert plant.poles[0].value == 0
    assert agrees(1 + plant.poles[1].value.real, case["plant_pole"])


@pytest.mark.parametrize("index", _cases())
def test_mapped_controller_has_the_printed_gain_zero_and_pole(
    index: int, transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    case = published("antenna_servo")["cases"][index]
    controller = _controller(transfer, Fraction(case["period_s"]), "pole-zero-mapped")
    assert agrees(controller.gain, case["mapped"]["gain"])
    assert agrees(controller.gain, case["book"]["mapped_gain"])
    assert agrees(1 + controller.zeros[0].value.real, case["mapped"]["zero"])
    assert agrees(1 + controller.poles[0].value.real, case["mapped"]["pole"])


def test_bilinear_controller_at_one_second_is_7_z_minus_19_over_3_by_z_minus_one_third(transfer: Make) -> None:
    """Printed as 7 (z - .904762)/(z - .333333); by hand, s = 2(z - 1)/(z + 1) gives 7 (z - 19/21)/(z - 1/3)."""
    controller = _controller(transfer, Fraction(1), "bilinear")
    assert controller.numerator == (Fraction(7), Fraction(-19, 3))
    assert controller.denominator == (Fraction(1), Fraction(-1, 3))


@pytest.mark.parametrize("index", _cases())
def test_sampled_loop_overshoots_by_the_printed_amount(
    index: int, transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    case = published("antenna_servo")["cases"][index]
    period_s = Fraction(case["period_s"])
    controller = _controller(transfer, period_s, "pole-zero-mapped")
    assert agrees(_overshoot_percent(_plant(transfer, period_s), controller), case["mapped"]["overshoot_percent"])


def test_bilinear_loop_at_one_second_overshoots_less_than_the_mapped_one(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    printed = published("antenna_servo")["cases"][0]["bilinear"]["overshoot_percent"]
    controller = _controller(transfer, Fraction(1), "bilinear")
    assert agrees(_overshoot_percent(_plant(transfer, Fraction(1)), controller), printed)


def test_mapped_loop_at_one_second_has_the_printed_damping_ratio(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    case = published("antenna_servo")["cases"][0]
    _, denominator = _closed_loop(_plant(transfer, Fraction(1)), _controller(transfer, Fraction(1), "pole-zero-mapped"))
    # The mapped zero cancels the plant's pole: its root is real, the pair is the loop's.
    roots = np.roots([float(c) for c in denominator])
    s = np.log(roots[np.argmax(roots.imag)])
    assert agrees(float(-s.real / abs(s)), case["mapped"]["damping_ratio"])
