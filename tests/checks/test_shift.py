from __future__ import annotations

from cmath import exp as cexp
from fractions import Fraction
from math import pi

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import linear_sum_assignment

from realize.checks import Check, root_notes
from realize.checks.assignment import assigned
from realize.checks.check import Asked
from realize.checks.modes import logarithm
from realize.checks.shift import check_shift
from tests.checks.designs import answers, converted, pulse, reference, transfer

_MP = mpmath.mp.clone()
_MP.dps = 80


def shifted(roots: list[complex], deltas: list[complex], band: float = 10.0, period_s: float = 0.01) -> Check:
    return check_shift(Asked("pole shift", "exact", "%", 2.0), roots, deltas, band, period_s)


def images(roots: list[complex], period_s: float = 0.01) -> list[complex]:
    return [cexp(r * period_s) - 1 for r in roots]


@given(
    st.floats(-1.5, 1.5).filter(lambda x: x == 0 or abs(x) > 1e-15),
    st.floats(-1.5, 1.5).filter(lambda x: x == 0 or abs(x) > 1e-15),
    st.integers(-60, 0),
)
def test_the_logarithm_is_right_however_small_the_distance_from_1(re: float, im: float, exponent: int) -> None:
    delta = complex(re, im) * 2.0**exponent
    if delta == -1:
        return
    truth = _MP.log(1 + _MP.mpc(delta))
    error = abs(_MP.mpc(logarithm(delta)) - truth)
    assert error <= 4e-16 * abs(truth) + 5e-324


def test_a_root_at_z_0_has_a_finite_rate_beyond_all_others() -> None:
    assert logarithm(-1 + 0j).real < logarithm(complex(-1 + 1e-16)).real
    assert abs(logarithm(-1 + 0j)) < 1e4


@given(st.integers(1, 7), st.integers(0, 3), st.randoms(use_true_random=False))
def test_the_pairing_has_the_least_total(rows: int, more: int, random: object) -> None:
    cost = np.array([[float(random.randrange(20)) for _ in range(rows + more)] for _ in range(rows)])  # type: ignore[attr-defined]
    columns = assigned(cost)
    assert len(set(columns)) == rows
    i, j = linear_sum_assignment(cost)
    assert cost[np.arange(rows), columns].sum() == cost[i, j].sum()


def test_the_shift_is_relative_to_the_root() -> None:
    roots = [-2 + 0j, -1 + 3j, -1 - 3j]
    found = shifted(roots, images([-2.1 + 0j, -1 + 3.05j, -1 - 3.05j]))
    assert found.difference == pytest.approx(5, rel=1e-9)
    assert found.reference == -2
    assert found.obtained == pytest.approx(-2.1, rel=1e-12)
    assert found.verdict == "out"
    assert found.reason == "greatest for the one at 0.31831 Hz (2 rad/s), real; 3 of 3 count"


@pytest.mark.parametrize(
    ("root", "counts"),
    [
        pytest.param(-9 + 0j, True, id="within the band"),
        pytest.param(-11 + 0j, False, id="above the band"),
        pytest.param(complex(-0.2, 0.98) * 100, True, id="above the band, lightly damped"),
        pytest.param(complex(-0.4, 0.9) * 100, False, id="above the band, damped"),
        pytest.param(complex(-0.2, 0.98) * 320, False, id="lightly damped, above the Nyquist frequency"),
        pytest.param(40 + 0j, True, id="growing"),
    ],
)
def test_roots_count_by_band_and_damping(root: complex, counts: bool) -> None:
    roots = [root, root.conjugate()] if root.imag else [root]
    found = shifted(roots, images([1.1 * r for r in roots]))
    assert found.verdict == ("out" if counts else "undefined")
    if not counts:
        assert found.reason == "none lies within the band, and none up to the Nyquist frequency is lightly damped"


def test_a_root_at_the_origin_must_be_at_z_1_exactly() -> None:
    good = shifted([0j, -1 + 0j], [0j, *images([-1 + 0j])])
    assert good.difference == pytest.approx(0, abs=1e-9)
    off = shifted([0j, -1 + 0j], [-3e-9 + 0j, *images([-1 + 0j])])
    assert off.verdict == "out"
    assert off.difference is None
    assert off.reason == "the root at s = 0 must be at z = 1 exactly, and 0 of 1 are; the nearest is z = 1 - 3e-09"
    double = shifted([0j, 0j], [0j, 1e-7 + 0j])
    assert double.reason == "roots at s = 0 must be at z = 1 exactly, and 1 of 2 are; the nearest is z = 1 + 1e-07"
    assert shifted([0j], [0j]).verdict == "within"


def test_a_root_that_nothing_is_left_of_is_out() -> None:
    found = shifted([-1 + 0j, -2 + 0j], images([-1 + 0j]))
    assert found.verdict == "out"
    assert found.obtained is None
    assert "nothing is left of the one at" in found.reason


def test_more_images_than_roots_are_no_matter() -> None:
    found = shifted([-1 + 0j], [-2 + 0j, -4.7 + 0j, *images([-1 + 0j]), -1 + 0j])
    assert found.difference == pytest.approx(0, abs=1e-9)


def test_close_roots_are_paired_as_a_whole_and_not_each_by_itself() -> None:
    # Each alone would take 1.05; together the least total gives 1.0 to 0.96 and 1.1 to 1.05.
    found = shifted([-1 + 0j, -1.1 + 0j], images([-1.05 + 0j, -0.96 + 0j]))
    assert found.difference == pytest.approx(100 * 0.05 / 1.1, rel=1e-9)


def test_the_closed_form_of_bilinear_is_found() -> None:
    # s = (2/T) (z - 1)/(z + 1) maps p to ln((2 + pT)/(2 - pT))/T.
    found = answers(reference("1/(s + 5)", "0.1", "10"), converted("1/(s + 5)", "0.1", "bilinear"))["pole shift"]
    assert found.difference == pytest.approx(100 * abs(np.log(1.5 / 2.5) / 0.1 + 5) / 5, rel=1e-9)


def test_aliased_pairs_and_alternating_poles_are_named() -> None:
    g = transfer("1/((s + 300)*(s^2 + 40*s + 1e6))")
    notes = root_notes(converted("1/((s + 300)*(s^2 + 40*s + 1e6))", "0.01", "bilinear"), g)
    assert notes == (
        "the pole pair at 159.15 Hz (1000 rad/s), damping ratio 0.02 lies above the Nyquist frequency, "
        "50 Hz (314.16 rad/s): samples show it at another frequency",
        "the pole at z = -0.2 alternates in sign every sample",
    )
    assert root_notes(converted("1/(s + 3)", "0.01", "bilinear"), transfer("1/(s + 3)")) == ()


def test_zeros_at_the_origin_and_sampling_zeros_are_told_apart() -> None:
    found = answers(reference("s/(s + 1)^3", "0.01", "10"), converted("s/(s + 1)^3", "0.01", "step-invariant"))
    assert found["zero shift"].verdict == "within"
    assert found["zero shift"].reason == "s = 0 is at z = 1 exactly; no other root counts"
    lost = answers(reference("s/(s + 1)", "0.01", "10"), pulse([1, "-0.9999"], [1, "-0.99"], "0.01"))
    assert lost["zero shift"].verdict == "out"


def test_half_the_sample_rate_is_the_limit_for_light_damping() -> None:
    period = 0.01
    inside, outside = 0.999 * pi / period, 1.001 * pi / period
    assert shifted([1j * inside, -1j * inside], images([1j * inside, -1j * inside])).verdict == "within"
    assert shifted([1j * outside, -1j * outside], images([1j * outside, -1j * outside])).verdict == "undefined"


def test_the_exact_fraction_of_a_percent_survives_a_high_rate() -> None:
    # 1 rad/s at 100 MHz: z - 1 is 1e-8, and the shift of 1e-6 of it still shows.
    found = shifted([-1 + 0j], [complex(np.expm1(-(1 + 1e-6) * 1e-8))], period_s=1e-8)
    assert found.difference == pytest.approx(1e-4, rel=1e-6)
    assert Fraction(found.tolerance or 0) == 2
