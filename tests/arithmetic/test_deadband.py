"""The smallest constant input that a float realization answers: exact, and with compensated sums a single count."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from realize.algebra.rounding import FLOAT32, FLOAT64, FloatFormat
from realize.arithmetic.deadband import smallest_float_answered
from realize.arithmetic.realization import realization
from realize.methods import discretize
from realize.transfer import TransferFunction

#: A count of a 12-bit converter over -1 to 1; 1 % of the range is 20 of them.
COUNT = Fraction(1, 2048)

#: 40 s integral time at 10 kHz.
PERIOD_S = Fraction(1, 10000)
SLOW = discretize(TransferFunction.from_polynomials((40, 1), (40, 0)), PERIOD_S, "backward-difference").pulse


def test_a_plain_float32_sum_would_lose_an_error_of_one_percent() -> None:
    level = np.float32(1)
    assert level + np.float32(float(PERIOD_S) / 40 * 0.01) == level


@pytest.mark.parametrize("target", [FLOAT32, FLOAT64], ids=lambda target: target.name)
@pytest.mark.parametrize("level", [0.0, 1.0, 1e3, -1e3])
@pytest.mark.parametrize("sign", [1, -1])
def test_the_integral_answers_a_single_count_at_every_level(target: FloatFormat, level: float, sign: int) -> None:
    stored = realization(SLOW, target)
    assert smallest_float_answered(stored, COUNT, [sign], level) == sign


def test_without_an_integral_the_whole_realization_is_asked() -> None:
    lag = discretize(TransferFunction.from_polynomials((1,), (1, 1)), Fraction(1, 10), "bilinear").pulse
    assert smallest_float_answered(realization(lag, FLOAT32), COUNT, range(1, 9)) == 1


def test_an_input_below_the_smallest_float_is_never_answered() -> None:
    stored = realization(SLOW, FLOAT32)
    assert smallest_float_answered(stored, Fraction(1, 10**60), range(1, 4)) is None
