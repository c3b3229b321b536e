"""Responses of stored numbers, against closed forms."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
import pytest

from realize.firmware.audit.stored_response import frequency_response, on_circle, step_response
from realize.firmware.recorded import Recorded, RecordedSection

_ULP = 2.0**-52


def entry(value: Fraction) -> dict[str, Any]:
    return {"value": str(value), "stored": "", "fraction_bits": None}


def section(b: list[Fraction], a: list[Fraction]) -> RecordedSection:
    return RecordedSection(tuple(b), tuple(a), {"b": [entry(c) for c in b], "a": [entry(c) for c in a]})


def numbers(*sections: RecordedSection, integral: tuple[Fraction, ...] = (), **more: Any) -> tuple[Recorded, Any]:
    parallel, direct, scale = more.get("parallel", False), more.get("direct", Fraction(0)), more.get("scale", 1)
    recorded = Recorded(sections, parallel, direct, integral, Fraction(scale), Fraction(1, 1000))
    record = {
        "arithmetic": "float64",
        "structure": "parallel" if parallel else "cascade",
        "integral": [entry(gain) for gain in integral],
        "direct_gain": entry(direct) if direct else None,
    }
    return recorded, record


HALF = section([Fraction(1), Fraction(0)], [Fraction(-1, 2)])  # z/(z - 1/2)
DELAY = section([Fraction(0), Fraction(3)], [Fraction(0)])  # 3/z
K = np.arange(12)


def test_the_point_of_the_circle_is_exact() -> None:
    """t = 1/2 is the triangle 3, 4, 5."""
    assert on_circle([Fraction(1, 2)]) == [(Fraction(3, 5), Fraction(4, 5))]


def test_the_gain_of_a_cascade_with_an_integral_is_the_closed_form() -> None:
    recorded, record = numbers(HALF, DELAY, integral=(Fraction(1, 4), Fraction(1, 8)), scale=2)
    z = 0.6 + 0.8j
    expected = (3 / (z - 0.5) + 0.25 / (z - 1) + 0.125 / (z - 1) ** 2) / 2
    found = frequency_response(recorded, record, on_circle([Fraction(1, 2)])).value[0]
    assert abs(found - expected) <= 8 * _ULP * abs(expected)


def test_parallel_sections_are_added_to_the_direct_gain() -> None:
    recorded, record = numbers(HALF, DELAY, parallel=True, direct=Fraction(7))
    z = 0.6 + 0.8j
    expected = 7 + z / (z - 0.5) + 3 / z
    found = frequency_response(recorded, record, on_circle([Fraction(1, 2)])).value[0]
    assert abs(found - expected) <= 8 * _ULP * abs(expected)
    assert step_response(recorded, record, 12).value.tolist() == [7 + 2 - 0.5**k + (3 if k else 0) for k in K]


def test_the_step_of_a_cascade_with_an_integral_is_the_closed_form() -> None:
    """Sums of 1, and of these: k and k (k - 1)/2."""
    recorded, record = numbers(HALF, integral=(Fraction(1, 4), Fraction(1, 8)), scale=2)
    expected = (2 - 0.5**K + K / 4 + K * (K - 1) / 16) / 2
    assert step_response(recorded, record, 12).value.tolist() == expected.tolist()


def test_nothing_but_an_integral_has_a_response_too() -> None:
    recorded, record = numbers(integral=(Fraction(3),))
    assert step_response(recorded, record, 12).value.tolist() == (3.0 * K).tolist()


@pytest.mark.parametrize("parallel", [False, True])
def test_what_rounding_may_do_is_what_moving_the_numbers_by_their_units_does(parallel: bool) -> None:
    """Every number moved by 2**-53 of itself, up or down as it counts most: both are of first order in that."""
    first = ([Fraction(2), Fraction(1, 3)], [Fraction(-3, 4)])
    second = ([Fraction(1), Fraction(1, 5)], [Fraction(1, 7)])
    recorded, record = numbers(section(*first), section(*second), parallel=parallel)
    points = on_circle([Fraction(1, 3)])
    z = complex(*map(float, points[0]))

    def gain(values: list[float]) -> complex:
        b0, b1, a1, c0, c1, d1 = values
        one, two = (b0 * z + b1) / (z + a1), (c0 * z + c1) / (z + d1)
        return one + two if parallel else one * two

    def step(values: list[float]) -> list[float]:
        b0, b1, a1, c0, c1, d1 = values
        y = v = 0.0
        samples = []
        for k in range(12):
            y, before = b0 + (b1 if k else 0) - a1 * y, y
            source, past = (1.0, float(k > 0)) if parallel else (y, before)
            v = c0 * source + c1 * past - d1 * v
            samples.append(y + v if parallel else v)
        return samples

    values = [float(c) for b, a in (first, second) for c in (*b, *a)]
    small = 2.0**-20
    moved = [[v * (1 + small * (i == j)) for i, v in enumerate(values)] for j in range(6)]
    expected = sum(abs(gain(m) - gain(values)) for m in moved) / small * 2.0**-53
    assert frequency_response(recorded, record, points).rounding[0] == pytest.approx(expected, rel=1e-4)
    apart = [np.abs(np.subtract(step(m), step(values))) for m in moved]
    steps = np.sum(apart, axis=0) / small * 2.0**-53
    assert step_response(recorded, record, 12).rounding.tolist() == pytest.approx(steps.tolist(), rel=1e-4)
