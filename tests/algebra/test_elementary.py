from __future__ import annotations

from math import cos, sin
from typing import Any

import mpmath as mp
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.algebra.elementary import exponential, tangent
from realize.algebra.enclosure import Unresolved
from realize.algebra.irrational import pi

#: Digits of the reference: more than 300 bits of a result of up to 709 nepers need.
DIGITS = 500

widths = st.sampled_from((64, 200, 1000))


def number(n: int, bits: int) -> Any:
    return mp.mpf(n) / mp.mpf(2) ** bits


@given(
    st.floats(-800, 709) | st.floats(-1e-9, 1e-9) | st.floats(-1, 1) | st.floats(-1e9, 0),
    st.floats(-1000, 1000) | st.floats(-1e-9, 1e-9),
    st.integers(0, 1000),
    st.floats(0, 6.3),
    widths,
)
@example(0.0, 0.0, 0, 0.0, 64)
@example(709.0, 3.0, 7, 1.0, 64)
@example(-1e9, 100.0, 1, 2.0, 200)
def test_the_exponential_of_every_point_of_the_disc_lies_inside(
    x: float, y: float, radius: int, direction: float, bits: int
) -> None:
    with mp.workdps(DIGITS):
        centre = [int(mp.floor(mp.mpf(c) * mp.mpf(2) ** bits)) for c in (x, y)]
        re, im, rad = exponential((centre[0], centre[1], radius), bits)
        edge = mp.mpf(radius) * mp.mpc(cos(direction), sin(direction)) * mp.mpf("0.999999")
        for offset in (0, edge, -edge):
            true = mp.exp((mp.mpc(*centre) + offset) / mp.mpf(2) ** bits)
            assert abs(mp.mpc(re, im) / mp.mpf(2) ** bits - true) <= number(rad, bits)


@given(st.floats(-300, 300), st.floats(-50, 50), st.integers(0, 50), widths)
def test_the_radius_is_no_more_than_a_few_units_of_what_the_argument_costs(
    x: float, y: float, radius: int, bits: int
) -> None:
    with mp.workdps(DIGITS):
        z = [int(mp.floor(mp.mpf(c) * mp.mpf(2) ** bits)) for c in (x, y)]
        _, _, rad = exponential((z[0], z[1], radius), bits)
        assert rad <= 4 + mp.exp(mp.mpf(x)) * (2 * radius + 4)


def test_a_decayed_exponential_is_a_few_units_about_zero() -> None:
    re, im, rad = exponential((-(10**12) << 100, 5 << 100, 0), 100)
    assert max(abs(re), abs(im)) <= rad <= 4


@given(st.floats(1e-9, 3.14), widths)
def test_the_tangent_of_an_angle_known_to_one_unit_lies_inside(angle: float, bits: int) -> None:
    with mp.workdps(DIGITS):
        n = int(mp.mpf(angle) / 2 * mp.mpf(2) ** bits)
        mid, rad = tangent(n, bits)
        for offset in (-1, 0, 1):
            assert abs(number(mid, bits) - mp.tan(number(n + offset, bits))) <= number(rad, bits)


@pytest.mark.parametrize("bits", [64, 192, 1000])
def test_the_tangent_of_a_right_angle_is_not_resolved(bits: int) -> None:
    right_angle = pi() / 2
    with pytest.raises(Unresolved):
        tangent((right_angle.numerator << bits) // right_angle.denominator, bits)
