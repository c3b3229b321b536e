"""What the comparisons with published figures share.

Figures of ``fixtures/published`` are strings exactly as printed, so that a tolerance can follow from the number
of their digits. Frequency responses are evaluated here in 50-digit arithmetic, not by the code under test.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from decimal import Decimal
from fractions import Fraction
from math import log10
from pathlib import Path
from typing import Any

import mpmath
import pytest

from realize.algebra.expression import evaluate_constant, evaluate_transfer
from realize.transfer import PulseTransferFunction, TransferFunction

_PUBLISHED = Path(__file__).parents[2] / "fixtures" / "published"

#: Polynomials of order 6 with all roots within 1e-3 of z = 1 lose 20 digits when evaluated there.
_MP = mpmath.mp.clone()
_MP.dps = 50

Model = TransferFunction | PulseTransferFunction


def _transfer(text: str, **values: str) -> TransferFunction:
    exact = {name: evaluate_constant(value, {}, name) for name, value in values.items()}
    return TransferFunction.from_polynomials(*evaluate_transfer(text, exact, "transfer"))


def _half_unit(printed: str) -> Fraction:
    exponent = Decimal(printed).as_tuple().exponent
    assert isinstance(exponent, int)
    return Fraction(10) ** exponent / 2


def _agrees(value: float | Fraction, printed: str, slack: float | Fraction = 0) -> bool:
    return abs(Fraction(value) - Fraction(printed)) <= _half_unit(printed) + Fraction(slack)


def _response(model: Model, frequency_hz: float | Fraction) -> complex:
    turns = _number(Fraction(frequency_hz))
    if isinstance(model, PulseTransferFunction):
        at = _MP.expjpi(2 * turns * _number(model.period_s))
    else:
        at = _MP.mpc(0, 2 * _MP.pi * turns)
    return complex(_value(model.numerator, at) / _value(model.denominator, at))


def _number(x: Fraction | int) -> Any:
    return _MP.mpf(x.numerator) / x.denominator


def _value(polynomial: tuple[Fraction, ...] | tuple[int, ...], at: Any) -> Any:
    value = _MP.mpf(0)
    for c in polynomial:
        value = value * at + _number(c)
    return value


@pytest.fixture
def published() -> Callable[[str], Any]:
    """Read a table of ``fixtures/published`` by its name."""
    return lambda name: json.loads((_PUBLISHED / f"{name}.json").read_text(encoding="utf-8"))


@pytest.fixture
def transfer() -> Callable[..., TransferFunction]:
    """Make a transfer function from an expression in s and values given as text."""
    return _transfer


@pytest.fixture
def agrees() -> Callable[..., bool]:
    """Say whether a value rounds to a printed figure, give or take a slack with a reason."""
    return _agrees


@pytest.fixture
def half_unit() -> Callable[[str], Fraction]:
    """Half a unit in the last printed place."""
    return _half_unit


@pytest.fixture
def response() -> Callable[[Model, float | Fraction], complex]:
    """``G`` or ``Gd`` at a frequency in Hz."""
    return _response


@pytest.fixture
def gain_db() -> Callable[[Model, float | Fraction], float]:
    """Gain at a frequency in Hz, in dB."""
    return lambda model, frequency_hz: 20 * log10(abs(_response(model, frequency_hz)))
