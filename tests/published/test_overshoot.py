"""Closed-form overshoot of the second-order system.

Source: any control textbook, ``100 exp(-pi z/sqrt(1 - z^2))`` % at ``t = pi/(wn sqrt(1 - z^2))``; figures from
memory, recomputed. Tolerance: half a unit in the fourth printed decimal, and the closed form to 1e-9.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import exp, pi, sqrt

import pytest

from realize.algebra.expression import evaluate_constant
from realize.checks import Check, ContinuousReference, Signals, Tolerances, run_checks
from realize.methods import discretize
from realize.transfer import TransferFunction

_PRINTED = {
    "0.1": "72.9248",
    "0.2": "52.6621",
    "0.3": "37.2326",
    "0.4": "25.3827",
    "0.5": "16.3034",
    "0.6": "9.4780",
    "0.7": "4.5988",
    "1/sqrt(2)": "4.3214",
    "0.8": "1.5165",
    "0.9": "0.1524",
}

#: Peaks are promised to 1e-9 of the final value, that is 1e-7 %.
_PROMISED_PERCENT = 1e-7

Make = Callable[..., TransferFunction]


def _overshoot(make: Make, damping: str, period_s: Fraction, method: str) -> Check:
    transfer = make("9/(s^2 + 6*damping*s + 9)", damping=damping)
    reference = ContinuousReference(transfer, period_s, Fraction(9))
    pulse = discretize(transfer, period_s, method).pulse
    checks = run_checks(reference, pulse, "exact", Tolerances({}), Signals())
    return next(check for check in checks if check.check == "step overshoot")


def _figure(value: object) -> float:
    assert isinstance(value, float)
    return value


@pytest.mark.parametrize(("damping", "printed"), _PRINTED.items())
@pytest.mark.parametrize("period_s", [Fraction(1, 100), Fraction(1, 10)], ids=str)
def test_true_peak_is_the_closed_form_whatever_the_sampling(
    damping: str, printed: str, period_s: Fraction, transfer: Make, agrees: Callable[..., bool]
) -> None:
    """The peak of the continuous response lies between samples, and is found there."""
    reference = _figure(_overshoot(transfer, damping, period_s, "step-invariant").reference)
    z = float(evaluate_constant(damping, {}, "damping"))
    assert agrees(reference, printed)
    assert reference == pytest.approx(100 * exp(-pi * z / sqrt(1 - z * z)), abs=_PROMISED_PERCENT)


@pytest.mark.parametrize("damping", ["0.1", "0.5", "0.8"])
def test_sampled_peak_never_exceeds_the_true_one_and_misses_little(damping: str, transfer: Make) -> None:
    """Step invariance puts samples on the curve, at most T/2 beside its peak.

    There ``|y''| <= wn^2`` times the final value: at most ``(wn T/2)^2/2`` of it is missed, 1.125 % at wn T = 0.3.
    """
    check = _overshoot(transfer, damping, Fraction(1, 10), "step-invariant")
    missed = _figure(check.reference) - _figure(check.obtained)
    assert 0 <= missed <= 1.125
    assert check.verdict == "within"
