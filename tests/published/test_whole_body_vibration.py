"""Frequency weightings of human vibration, ISO 2631-1 and ISO 8041.

Source and provenance of every figure: ``fixtures/published/whole_body_vibration.json``.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import pi, tan
from typing import Any

import pytest

from realize.methods import discretize
from realize.transfer import TransferFunction

Make = Callable[..., TransferFunction]
Response = Callable[..., complex]

#: Band limits: second-order Butterworth, quality 1/sqrt(2).
_BAND = "s^2/(s^2 + sqrt(2)*w1*s + w1^2)*w2^2/(s^2 + sqrt(2)*w2*s + w2^2)"
_TRANSITION = "(1 + s/w3)/(1 + s/(q4*w4) + (s/w4)^2)"
_STEP = "(1 + s/(q5*w5) + (s/w5)^2)/(1 + s/(q6*w6) + (s/w6)^2)*(w5/w6)^2"

#: Rows of the Wk table that lie beyond half a unit of their thousandths at nominal frequencies (by 0.05 and 0.20):
#: the table's own rounding; every other row rounds to what is printed.
_OFF_BY_MORE = {"1.25": 0.05, "16": 0.2}


def _weighting(make: Make, parameters: dict[str, str]) -> TransferFunction:
    factors = [_BAND]
    factors += [_TRANSITION] if "f4" in parameters else []
    factors += [_STEP] if "f6" in parameters else []
    values = {"w" + name[1:]: f"2*pi*{text}" for name, text in parameters.items() if name.startswith("f")}
    values |= {name: text for name, text in parameters.items() if name.startswith("q")}
    return make("gain*" + "*".join(factors), gain=parameters["gain"], **values)


def test_wk_is_the_table_at_nominal_frequencies(
    transfer: Make, published: Callable[[str], Any], response: Response, agrees: Callable[..., bool]
) -> None:
    table = published("whole_body_vibration")
    weighting = _weighting(transfer, table["parameters"]["Wk"])
    assert len(table["wk_rows"]) == 23
    for row in table["wk_rows"]:
        gain = abs(response(weighting, Fraction(row["nominal_hz"])))
        assert agrees(1000 * gain, row["thousand_times_gain"], _OFF_BY_MORE.get(row["nominal_hz"], 0)), row


@pytest.mark.parametrize("name", ["Wb", "Wc", "Wd", "We", "Wj", "Wk"])
def test_factor_at_the_reference_frequency_is_the_printed_one(
    name: str,
    transfer: Make,
    published: Callable[[str], Any],
    response: Response,
    agrees: Callable[..., bool],
) -> None:
    table = published("whole_body_vibration")
    weighting = _weighting(transfer, table["parameters"][name])
    gain = abs(response(weighting, float(table["reference_rad_s"]) / (2 * pi)))
    assert agrees(gain, table["factors_at_reference"][name])


@pytest.mark.parametrize("method", ["bilinear", "ramp-invariant", "pole-zero-mapped"])
def test_discrete_wk_at_12_khz_is_the_table_too(
    method: str, transfer: Make, published: Callable[[str], Any], response: Response, agrees: Callable[..., bool]
) -> None:
    """With x = pi f T: warping moves f by x^2/3, on slopes of third order at most; a triangle loses x^2/3 of the gain;
    the three zeros at z = -1 lose 3 x^2/2. Each is below 3 x^2 of the gain.
    """
    table, rate_hz = published("whole_body_vibration"), 12000
    pulse = discretize(_weighting(transfer, table["parameters"]["Wk"]), Fraction(1, rate_hz), method).pulse
    for row in table["wk_rows"]:
        gain = 1000 * abs(response(pulse, Fraction(row["nominal_hz"])))
        of_method = 3 * (pi * float(row["nominal_hz"]) / rate_hz) ** 2 * gain
        slack = of_method + _OFF_BY_MORE.get(row["nominal_hz"], 0)
        assert agrees(gain, row["thousand_times_gain"], slack), row


@pytest.mark.parametrize("frequency_hz", ["0.8", "6.3", "80", "400"])
def test_bilinear_wk_is_the_analog_weighting_at_the_warped_frequency(
    frequency_hz: str, transfer: Make, published: Callable[[str], Any], response: Response
) -> None:
    """Tustin 1947: ``Gd(exp(j w T)) = G(j (2/T) tan(w T/2))``, to the last digits of a double."""
    rate_hz = 1000
    weighting = _weighting(transfer, published("whole_body_vibration")["parameters"]["Wk"])
    pulse = discretize(weighting, Fraction(1, rate_hz), "bilinear").pulse
    warped_hz = rate_hz / pi * tan(pi * float(frequency_hz) / rate_hz)
    # The tangent is rounded before it enters a slope of up to fourth order.
    assert response(pulse, Fraction(frequency_hz)) == pytest.approx(response(weighting, warped_hz), rel=1e-14)
