"""The table of step-invariant pairs, its closed forms evaluated apart from the code under test.

Source: K. J. Astrom, B. Wittenmark, Computer-Controlled Systems, table of zero-order-hold equivalents; closed
forms from memory, recomputed. At T = 1/2, a = 1, b = 2, c = 1/2 they are compared with eight decimals; at every
period with the closed form in 80 digits, rounded to a double: both sides must then be the same double.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

import mpmath
import pytest

from realize.algebra.rounding import FLOAT64
from realize.methods import discretize
from realize.transfer import TransferFunction

Make = Callable[..., TransferFunction]

#: Numerators and denominators without their leading 1, in descending powers of z.
Pair = tuple[tuple[Any, ...], tuple[Any, ...]]

_MP = mpmath.mp.clone()
_MP.dps = 80
_A, _B, _C = _MP.mpf(1), _MP.mpf(2), _MP.mpf(1) / 2


def _lag(T: Any) -> Pair:
    e = _MP.exp(-_A * T)
    return (1 - e,), (-e,)


def _lag_and_integrator(T: Any) -> Pair:
    a, e = _A, _MP.exp(-_A * T)
    return ((a * T - 1 + e) / a, (1 - e - a * T * e) / a), (-(1 + e), e)


def _double_lag(T: Any) -> Pair:
    a, e = _A, _MP.exp(-_A * T)
    return (1 - e * (1 + a * T), e * (e + a * T - 1)), (-2 * e, e**2)


def _washed_out_double_lag(T: Any) -> Pair:
    e = _MP.exp(-_A * T)
    return (T * e, -T * e), (-2 * e, e**2)


def _two_lags(T: Any) -> Pair:
    a, b, e, f = _A, _B, _MP.exp(-_A * T), _MP.exp(-_B * T)
    b1 = (b * (1 - e) - a * (1 - f)) / (b - a)
    b2 = (a * (1 - f) * e - b * (1 - e) * f) / (b - a)
    return (b1, b2), (-(e + f), e * f)


def _two_lags_with_zero(T: Any) -> Pair:
    a, b, c, e, f = _A, _B, _C, _MP.exp(-_A * T), _MP.exp(-_B * T)
    b1 = (f - e + (1 - f) * c / b - (1 - e) * c / a) / (a - b)
    b2 = c / (a * b) * e * f + (b - c) * e / (b * (a - b)) + (c - a) * f / (a * (a - b))
    return (b1, b2), (-(e + f), e * f)


def _oscillator(T: Any) -> Pair:
    damping = _MP.mpf(1) / 2
    w = _MP.sqrt(1 - damping**2)
    decay, cosine, sine = _MP.exp(-damping * T), _MP.cos(w * T), _MP.sin(w * T)
    b1 = 1 - decay * (cosine + damping * sine / w)
    b2 = decay**2 + decay * (damping * sine / w - cosine)
    return (b1, b2), (-2 * decay * cosine, decay**2)


_ROWS: dict[str, tuple[Callable[[Any], Pair], tuple[str, ...]]] = {
    "1/(s + 1)": (_lag, ()),
    "1/(s*(s + 1))": (_lag_and_integrator, (".10653066", ".09020401")),
    "1/(s + 1)^2": (_double_lag, (".09020401", ".06461411")),
    "s/(s + 1)^2": (_washed_out_double_lag, (".30326533", "-.30326533")),
    "2/((s + 1)*(s + 2))": (_two_lags, (".15481812", ".09390194")),
    "(s + 1/2)/((s + 1)*(s + 2))": (_two_lags_with_zero, (".27735575", "-.21517573")),
    "1/(s^2 + s + 1)": (_oscillator, (".10440547", ".08828134")),
}


@pytest.mark.parametrize("text", [text for text, (_, printed) in _ROWS.items() if printed])
def test_numerator_at_half_a_second_has_the_known_eight_decimals(
    text: str, transfer: Make, agrees: Callable[..., bool]
) -> None:
    numerator, _ = discretize(transfer(text), Fraction(1, 2), "step-invariant").rounded(FLOAT64)
    for value, printed in zip(numerator[1:], _ROWS[text][1], strict=True):
        assert agrees(value, printed)


@pytest.mark.parametrize("period_s", [Fraction(1, 2), Fraction(1, 1000), Fraction(1, 10**6), Fraction(5)], ids=str)
@pytest.mark.parametrize("text", _ROWS)
def test_coefficients_are_the_closed_form_rounded_once(text: str, period_s: Fraction, transfer: Make) -> None:
    numerator, denominator = discretize(transfer(text), period_s, "step-invariant").rounded(FLOAT64)
    T = _MP.mpf(period_s.numerator) / period_s.denominator
    b, a = _ROWS[text][0](T)
    assert numerator == (0.0, *map(float, b))
    assert denominator == (1.0, *map(float, a))


@pytest.mark.parametrize("period_s", [Fraction(1), Fraction(1, 7), Fraction(3, 1000)], ids=str)
@pytest.mark.parametrize(
    ("order", "shape", "factor"), [(1, (1,), 1), (2, (1, 1), 2), (3, (1, 4, 1), 6)], ids=["1/s", "1/s^2", "1/s^3"]
)
def test_chains_of_integrators_are_exact(
    order: int, shape: tuple[int, ...], factor: int, period_s: Fraction, transfer: Make
) -> None:
    pulse = discretize(transfer(f"1/s^{order}"), period_s, "step-invariant").pulse
    assert pulse.numerator == (0, *(c * period_s**order / factor for c in shape))
    assert [(root.value, root.multiplicity) for root in pulse.poles] == [(0, order)]
