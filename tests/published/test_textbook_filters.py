"""Digital low-pass filters that textbooks work out by hand.

Source and provenance: ``fixtures/published/textbook_filters.json``. Tolerance: half a unit in the last printed
place, and where the book rounds its cut-off first, what half a unit of that does.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import cos, pi, sin, tan
from typing import Any

import pytest

from realize.algebra.expression import evaluate_constant
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction

Make = Callable[..., TransferFunction]

#: Sixth order: pairs at 15, 45 and 75 deg from the negative real axis, ``2 cos 15 deg = sqrt(2 + sqrt(3))``.
_BUTTERWORTH = "w^6/((s^2 + sqrt(2 - sqrt(3))*w*s + w^2)*(s^2 + sqrt(2)*w*s + w^2)*(s^2 + sqrt(2 + sqrt(3))*w*s + w^2))"


def _pairs(pulse: PulseTransferFunction) -> list[complex]:
    """Upper poles in z, the most resonant first."""
    return sorted((1 + root.value for root in pulse.poles), key=abs, reverse=True)


def _quadratic(pole: complex) -> tuple[float, float]:
    return -2 * pole.real, abs(pole) ** 2


def _partial_fraction(pulse: PulseTransferFunction, pole: complex) -> tuple[float, float]:
    """``b0, b1`` of the section ``(b0 + b1/z)/(1 + a1/z + a2/z^2)`` that holds a pair of poles."""
    others = [p for upper in _pairs(pulse) for p in (upper, upper.conjugate()) if p != pole]
    slope = pole
    for p in others:
        slope *= pole - p
    value = complex(0)
    for c in pulse.numerator:
        value = value * pole + float(c)
    residue = value / slope
    return 2 * residue.real, -2 * (residue * pole.conjugate()).real


def _impulse_invariant_sections(make: Make, cutoff: str) -> list[tuple[float, ...]]:
    pulse = discretize(make(_BUTTERWORTH, w=cutoff), Fraction(1), "impulse-invariant").pulse
    return [(*_partial_fraction(pulse, pole), *_quadratic(pole)) for pole in _pairs(pulse)]


def test_impulse_invariant_butterworth_has_the_printed_parallel_sections(
    transfer: Make,
    published: Callable[[str], Any],
    agrees: Callable[..., bool],
    half_unit: Callable[[str], Fraction],
) -> None:
    """The response starts at 0 (relative degree 6), so the half-sample correction is none, as in the book."""
    table = published("textbook_filters")["butterworth_impulse_invariance"]
    cutoff = table["cutoff_rad_s"]
    reach = half_unit(cutoff)
    nominal, slower, faster = (
        _impulse_invariant_sections(transfer, str(w))
        for w in (cutoff, Fraction(cutoff) - reach, Fraction(cutoff) + reach)
    )
    for position, section in enumerate(table["sections"]):
        for i, printed in enumerate((*section["b"], *section["a"])):
            of_cutoff = max(abs(other[position][i] - nominal[position][i]) for other in (slower, faster))
            assert of_cutoff < 2e-4, "the last digit of the cut-off must not hide an error"
            assert agrees(nominal[position][i], printed, of_cutoff), (position, i)


def test_impulse_invariant_butterworth_starts_at_zero(transfer: Make, published: Callable[[str], Any]) -> None:
    """The book's section gains .2871 - 2.1428 + 1.8557 add up to 0, and so do ours, exactly."""
    table = published("textbook_filters")["butterworth_impulse_invariance"]
    pulse = discretize(transfer(_BUTTERWORTH, w=table["cutoff_rad_s"]), Fraction(1), "impulse-invariant").pulse
    assert sum(Fraction(section["b"][0]) for section in table["sections"]) == 0
    assert pulse.numerator[0] == 0


def _bilinear_cutoff(table: Any) -> str:
    """Cut-off that gives the specified gain at the prewarped band edge."""
    edge = 2 * tan(float(table["band_edge_over_pi"]) * pi / 2)
    return repr(edge / (1 / float(table["gain_at_edge"]) ** 2 - 1) ** (1 / 12))


def test_bilinear_butterworth_has_the_printed_gain_and_sections(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    table = published("textbook_filters")["butterworth_bilinear"]
    pulse = discretize(transfer(_BUTTERWORTH, w=_bilinear_cutoff(table)), Fraction(1), "bilinear").pulse
    assert agrees(pulse.gain, table["gain"])
    for pole, section in zip(_pairs(pulse), table["sections"], strict=True):
        for value, printed in zip(_quadratic(pole), section, strict=True):
            assert agrees(value, printed)
    assert [(1 + root.value, root.multiplicity) for root in pulse.zeros] == [(-1, 6)]


def test_bilinear_butterworth_meets_its_specification(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool], response: Callable[..., complex]
) -> None:
    table = published("textbook_filters")["butterworth_bilinear"]
    pulse = discretize(transfer(_BUTTERWORTH, w=_bilinear_cutoff(table)), Fraction(1), "bilinear").pulse
    assert agrees(abs(response(pulse, Fraction(table["band_edge_over_pi"]) / 2)), table["gain_at_edge"])


def test_single_pole_prewarped_at_its_cutoff_has_the_printed_gain_and_pole(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    """By hand: pole (1 - sin w)/cos w at w = 0.2 pi. The book rounds tan(0.1 pi) to .325 first."""
    table = published("textbook_filters")["single_pole"]
    w = evaluate_constant(f"{table['cutoff_over_pi']}*pi", {}, "cutoff")
    pulse = discretize(transfer("w/(s + w)", w=str(w)), Fraction(1), "bilinear-prewarped", w).pulse
    pole = 1 + pulse.poles[0].value.real
    assert pole == pytest.approx((1 - sin(0.2 * pi)) / cos(0.2 * pi), rel=1e-15)
    # The pole is (1 - t)/(1 + t), t = .3249; half a unit of .325 moves it by 2 * .0005/1.325^2 and the gain by
    # half as much.
    assert agrees(pole, table["pole"], 2 * 0.0005 / 1.325**2)
    assert agrees(pulse.gain, table["gain"], 0.0005 / 1.325**2)
    assert pulse.numerator == (pulse.gain, pulse.gain)
