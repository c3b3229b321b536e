"""scipy.signal as a second reference, at low order and moderate rates, where it is accurate.

It works in doubles throughout. Its numerator is the difference of two characteristic polynomials, so the error
is an absolute one: a few units of 2^-53 of the largest coefficient of the denominator times the gain.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import pi
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from scipy import signal

from realize.algebra.expression import evaluate_constant
from realize.algebra.rounding import FLOAT64
from realize.methods import discretize
from realize.transfer import TransferFunction

Make = Callable[..., TransferFunction]
Floats = npt.NDArray[np.float64]

#: Roundings that scipy's road of n = 2 states adds up: the matrix exponential (a few dozen products of its
#: scaling and squaring), two characteristic polynomials, one difference.
_ROUNDINGS = 64
_UNIT = 2.0**-53

_DESIGNS = [
    "1/(s + 1)",
    "(s + 3)/(s + 1)",
    "1/((s + 1)*(s + 3))",
    "(s + 2)/(s^2 + 2*s + 5)",
    "(2*s^2 + s + 1)/(s^2 + 3*s + 7)",
    "4/(s^2 + 4)",
    "(s + 1)/s^2",
]


def _coefficients(transfer: TransferFunction) -> tuple[Floats, Floats]:
    return np.array(transfer.numerator, dtype=float), np.array(transfer.denominator, dtype=float)


def _ours(
    transfer: TransferFunction, period_s: Fraction, method: str, at: Fraction | None = None
) -> tuple[Floats, Floats]:
    numerator, denominator = discretize(transfer, period_s, method, at).rounded(FLOAT64)
    return np.array(numerator), np.array(denominator)


def _reach(numerator: Floats, denominator: Floats) -> float:
    gain = max(1.0, float(np.abs(numerator).max()))
    return _ROUNDINGS * _UNIT * float(np.abs(denominator).max()) * gain


def _same(ours: tuple[Floats, Floats], theirs: tuple[Any, Any]) -> None:
    for mine, other in zip(ours, theirs, strict=True):
        padded = np.concatenate([np.zeros(len(mine) - np.size(other)), np.ravel(other)])
        assert np.abs(mine - padded).max() <= _reach(*ours)


@pytest.mark.parametrize("text", _DESIGNS)
@pytest.mark.parametrize(
    ("method", "name", "alpha"),
    [
        ("step-invariant", "zoh", None),
        ("ramp-invariant", "foh", None),
        ("forward-difference", "euler", None),
        ("backward-difference", "backward_diff", None),
        ("bilinear", "bilinear", None),
        ("blended-difference", "gbt", 7 / 8),
    ],
)
def test_method_agrees_with_scipy(text: str, method: str, name: str, alpha: float | None, transfer: Make) -> None:
    g = transfer(text)
    numerator, denominator, _ = signal.cont2discrete(_coefficients(g), 0.25, method=name, alpha=alpha)
    _same(_ours(g, Fraction(1, 4), method), (numerator, denominator))


@pytest.mark.parametrize("text", ["1/(s + 1)", "1/((s + 1)*(s + 3))", "(s + 2)/(s^2 + 2*s + 5)"])
def test_impulse_invariant_agrees_with_scipy_less_half_the_first_sample(text: str, transfer: Make) -> None:
    """scipy keeps the whole jump ``T g(0+)``: half of it times the denominator is the difference."""
    g, period_s = transfer(text), 0.25
    numerator, denominator, _ = signal.cont2discrete(_coefficients(g), period_s, method="impulse")
    jump = period_s * float(g.gain) if g.relative_degree == 1 else 0.0
    ours = _ours(g, Fraction(1, 4), "impulse-invariant")
    _same(ours, (np.ravel(numerator) - jump / 2 * denominator, denominator))


@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_prewarped_analog_butterworth_is_scipys_digital_one(order: int, transfer: Make) -> None:
    """A digital Butterworth filter is the bilinear image of an analog one, exact at its cut-off."""
    rate_hz, cutoff_hz = 1000, 120
    w = evaluate_constant(f"2*pi*{cutoff_hz}", {}, "cutoff")
    numerator, denominator = signal.butter(order, 2 * pi * cutoff_hz, analog=True)
    analog = TransferFunction.from_polynomials(
        [Fraction(float(c)) for c in np.atleast_1d(numerator)], [Fraction(float(c)) for c in denominator]
    )
    ours = _ours(analog, Fraction(1, rate_hz), "bilinear-prewarped", w)
    _same(ours, signal.butter(order, cutoff_hz, fs=rate_hz))


@pytest.mark.parametrize("text", [*_DESIGNS, "1/(s^2 + 2*s + 5)^2"])
def test_bilinear_agrees_with_scipys_polynomial_road(text: str, transfer: Make) -> None:
    g = transfer(text)
    numerator, denominator = signal.bilinear(*_coefficients(g), fs=4)
    _same(_ours(g, Fraction(1, 4), "bilinear"), (numerator, denominator))


@pytest.mark.parametrize("text", _DESIGNS)
def test_step_response_of_the_step_invariant_image_is_scipys_at_the_samples(text: str, transfer: Make) -> None:
    """scipy steps the continuous system by its own matrix exponential: errors add up over 40 samples."""
    g = transfer(text)
    numerator, denominator = _ours(g, Fraction(1, 4), "step-invariant")
    times = 0.25 * np.arange(40)
    _, continuous = signal.step(signal.lti(*_coefficients(g)), T=times)
    sampled = signal.lfilter(numerator, denominator, np.ones(40))
    assert np.abs(sampled - continuous).max() <= 40 * _reach(numerator, denominator) * np.abs(continuous).max()
