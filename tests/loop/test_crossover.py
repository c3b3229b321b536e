"""The crossover a roll-off is chosen from, improper controllers included, and the pole that follows it."""

from __future__ import annotations

from fractions import Fraction
from math import sqrt

import pytest
from scipy.optimize import brentq

from realize.loop import Plant, highest_crossover_rad_s, settled_pole
from realize.quantity import round_significant
from realize.transfer import TransferFunction
from tests.loop.loops import ratio, transfer

PID = transfer("0.09 4.2 18", "1 0")
LIGHT, HEAVY = (Plant(transfer("2", f"{j} 1 0"), case=name) for j, name in (("0.2", "light"), ("0.8", "heavy")))


def _causal(pole: Fraction) -> TransferFunction:
    return TransferFunction.from_polynomials(PID.numerator, [PID.denominator[0] / pole, PID.denominator[0], 0])


def test_crossover_of_an_improper_controller_agrees_with_a_root_finder() -> None:
    controller, plant = ratio(PID), ratio(LIGHT.transfer)
    w = brentq(lambda x: abs(controller.at(1j * x) * plant.at(1j * x)) - 1, 1.0, 1e3, xtol=1e-12)
    assert highest_crossover_rad_s(PID, [LIGHT]) == pytest.approx(w, rel=1e-10)


def test_the_highest_case_counts() -> None:
    both = highest_crossover_rad_s(PID, [HEAVY, LIGHT])
    assert both == highest_crossover_rad_s(PID, [LIGHT])
    assert both != highest_crossover_rad_s(PID, [HEAVY])


def test_the_highest_crossover_counts() -> None:
    """``s/(s^2 + s/2 + 1)`` passes 1 twice: ``w^2 -+ (sqrt 3/2) w = 1``."""
    plant = Plant(transfer("1 0", "1 0.5 1"))
    expected = sqrt(3) / 4 + sqrt(3 / 16 + 1)
    assert highest_crossover_rad_s(transfer("1", "1"), [plant]) == pytest.approx(expected, rel=1e-14)


def test_a_loop_that_stays_below_one_has_no_crossover() -> None:
    assert highest_crossover_rad_s(transfer("1/2", "1"), [Plant(transfer("1", "1 1"))]) is None


def test_pole_and_crossover_settle_on_each_other() -> None:
    first = highest_crossover_rad_s(PID, [LIGHT, HEAVY])
    assert first is not None

    def pole_for(crossover: float) -> Fraction:
        return round_significant(Fraction(10 * crossover), 3)

    found = settled_pole(first, pole_for, _causal, [LIGHT, HEAVY])
    assert found.converged
    assert found.pole_rad_s == pole_for(found.crossover_rad_s)
    assert found.crossover_rad_s == highest_crossover_rad_s(_causal(found.pole_rad_s), [LIGHT, HEAVY])
    assert found.crossover_rad_s < first
    assert found.poles_rad_s[-1] == found.pole_rad_s


def test_a_pole_that_comes_back_is_reported_as_not_settled() -> None:
    """A rule that answers a low crossover with a high pole and the other way round goes in a circle."""
    low, high = (highest_crossover_rad_s(_causal(pole), [LIGHT]) for pole in (Fraction(30), Fraction(3000)))
    assert low is not None
    assert high is not None
    between = (low + high) / 2
    found = settled_pole(20.0, lambda w: Fraction(30 if w > between else 3000), _causal, [LIGHT])
    assert not found.converged
    assert len(found.poles_rad_s) == 2


def test_a_crossover_that_the_pole_removes_is_reported_as_not_settled() -> None:
    def faint(pole: Fraction) -> TransferFunction:
        return TransferFunction.from_polynomials([Fraction(1, 100)], [1 / pole, Fraction(1)])

    found = settled_pole(20.0, lambda w: Fraction(int(w)), faint, [Plant(transfer("1", "1 1"))])
    assert not found.converged
    assert found.crossover_rad_s == 20.0
