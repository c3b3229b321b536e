"""The loudness filters of Recommendation ITU-R BS.1770 at 48 kHz, from their analog prototypes.

Source: ITU-R BS.1770, tables 1 and 2; prototypes by Brecht De Man (read in a copy of his note). His parameters
were worked out from the printed coefficients, so what is tested is that the substitution here is the inverse
of an independent one. Bilinear, prewarped at each filter's own corner, reproduces every printed digit; plain
bilinear does not.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import log10
from typing import Any

import pytest

from realize.algebra.expression import evaluate_constant
from realize.algebra.rounding import FLOAT64
from realize.methods import Discretization, discretize
from realize.transfer import TransferFunction

_SHELF = "(vh*(s/w)^2 + vb/q*(s/w) + 1)/((s/w)^2 + (s/w)/q + 1)"
_HIGH_PASS = "(s/w)^2/((s/w)^2 + (s/w)/q + 1)"

#: The prototypes' parameters have 16 digits. A coefficient changes by at most 4 times the relative change of
#: a parameter (the largest sensitivity is that of the shelf's b1 to vh and vb, b1 itself being 2.7).
_OF_PARAMETERS = 4 * 0.5e-15

Make = Callable[..., TransferFunction]


def _prototypes(make: Make, table: Any) -> dict[str, TransferFunction]:
    shelf, high_pass = table["shelf"], table["high_pass"]
    return {
        "shelf": make(
            _SHELF,
            vh=shelf["high_gain"],
            vb=shelf["band_gain"],
            q=shelf["q"],
            w=f"2*pi*{shelf['frequency_hz']}",
        ),
        "high_pass": make(_HIGH_PASS, q=high_pass["q"], w=f"2*pi*{high_pass['frequency_hz']}"),
    }


def _at_48_khz(make: Make, table: Any, name: str, method: str) -> Discretization:
    corner = evaluate_constant(f"2*pi*{table[name]['frequency_hz']}", {}, "corner")
    return discretize(_prototypes(make, table)[name], Fraction(1, table["rate_hz"]), method, corner)


def test_prewarped_shelf_has_all_fourteen_printed_decimals(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    table = published("loudness_bs1770")
    numerator, denominator = _at_48_khz(transfer, table, "shelf", "bilinear-prewarped").rounded(FLOAT64)
    for value, printed in zip(numerator, table["shelf"]["numerator"], strict=True):
        assert agrees(value, printed, _OF_PARAMETERS)
    for value, printed in zip(denominator, table["shelf"]["denominator"], strict=True):
        assert agrees(value, printed, _OF_PARAMETERS)


def test_prewarped_high_pass_has_all_printed_decimals_once_its_numerator_is_scaled_to_one(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    """The Recommendation prints 1, -2, 1: the prototype's numerator without its gain."""
    table = published("loudness_bs1770")
    numerator, denominator = _at_48_khz(transfer, table, "high_pass", "bilinear-prewarped").rounded(FLOAT64)
    for value, printed in zip(denominator, table["high_pass"]["denominator"], strict=True):
        assert agrees(value, printed, _OF_PARAMETERS)
    assert [c / numerator[0] for c in numerator] == [float(c) for c in table["high_pass"]["numerator"]]


def test_dropped_gain_of_the_printed_high_pass_is_0_0433_db(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool]
) -> None:
    """Source of the puzzle and its figure: a thread of the music-dsp mailing list, read there."""
    table = published("loudness_bs1770")
    pulse = _at_48_khz(transfer, table, "high_pass", "bilinear-prewarped").pulse
    assert agrees(-20 * log10(pulse.gain), table["high_pass_band_gain_db"])


@pytest.mark.parametrize("frequency_hz", ["100", "997", "2000", "10000"])
def test_cascade_has_the_known_gain(
    frequency_hz: str, transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool], gain_db: Any
) -> None:
    """997 Hz: the constant 0.691 dB of the Recommendation itself."""
    table = published("loudness_bs1770")
    shelf, high_pass = (_at_48_khz(transfer, table, n, "bilinear-prewarped").pulse for n in ("shelf", "high_pass"))
    gain = gain_db(shelf, Fraction(frequency_hz)) + gain_db(high_pass, Fraction(frequency_hz))
    assert agrees(gain - 20 * log10(high_pass.gain), table["cascade_gain_db"][frequency_hz])


def test_plain_bilinear_shelf_misses_the_printed_digits(transfer: Make, published: Callable[[str], Any]) -> None:
    """Its corner is warped by (pi f0/rate)^2/3 = 0.4 %, which moves the pole's radius in the fourth decimal."""
    table = published("loudness_bs1770")
    _, denominator = _at_48_khz(transfer, table, "shelf", "bilinear").rounded(FLOAT64)
    assert abs(denominator[2] - float(table["shelf"]["denominator"][2])) > 1e-4
