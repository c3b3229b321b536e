"""What all methods share: images of roots, zeros that agree with the numerator, the gain at low frequency."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import mpmath as mp
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from realize.algebra.irrational import pi
from realize.algebra.roots import Root
from realize.algebra.rounding import FLOAT64
from realize.errors import Refused
from realize.methods import METHODS, discretize
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.methods import reference
from tests.strategies import ExactRoot, Factored, decimals, sampled_designs

EXPONENTIAL = ("step-invariant", "ramp-invariant", "impulse-invariant", "pole-zero-mapped")

#: Kinds of roots whose growth does not defeat a comparison of pulse transfer functions.
CALM = ("slow", "ordinary", "damped", "light", "undamped", "origin")

#: A float image is right to a double's last place of its magnitude.
FLOAT_ERROR = 2.0**-52

methods = st.sampled_from(tuple(METHODS))


def made(design: Factored, period_s: Fraction, method: str, angle: Fraction) -> PulseTransferFunction:
    exact_at = angle / period_s if method == "bilinear-prewarped" else None
    return discretize(design.transfer(), period_s, method, exact_at).pulse


@given(sampled_designs(8), methods, decimals(-3, 0))
@settings(max_examples=60)
def test_every_pole_goes_where_the_method_defines(
    drawn: tuple[Factored, Fraction], method: str, angle: Fraction
) -> None:
    design, period_s = drawn
    pulse = made(design, period_s, method, angle)
    left = list(design.poles)
    assert len(pulse.poles) == len(left)
    with mp.workdps(1300):
        for pole in pulse.poles:
            match = min(left, key=lambda root: distance(pole, reference.image(root, period_s, method, angle), 2000))
            left.remove(match)
            check_image(pole, match, reference.image(match, period_s, method, angle))


def distance(root: Root, true: Any, bits: int) -> Any:
    """Distance of the enclosure's centre from a point or from its conjugate."""
    re, im, _ = root.enclosure(bits)
    centre = mp.mpc(re, im) / mp.mpf(2) ** bits
    return min(abs(centre - true), abs(centre - mp.conj(true)))


def check_image(root: Root, exact: ExactRoot, true: Any) -> None:
    assert (root.multiplicity, root.is_pair) == (exact.multiplicity, exact.im > 0)
    assert (root.value == 0) == (exact.re == exact.im == 0)
    value = complex(true)
    value = complex(value.real, abs(value.imag))
    assert abs(root.value - value) <= FLOAT_ERROR * abs(value)
    for bits in (60, 400, 2000):
        assert distance(root, true, bits) <= (root.enclosure(bits)[2] + 1e-6) * mp.mpf(2) ** -bits


@pytest.mark.parametrize("method", METHODS)
def test_an_image_next_to_z_1_keeps_its_relative_precision(method: str) -> None:
    period_s, angle = Fraction(1, 10**6), Fraction(1, 7)
    design = Factored(
        Fraction(1),
        (),
        (
            ExactRoot(Fraction(-1, 10**6), Fraction(0), 2),
            ExactRoot(Fraction(-3, 10**7), Fraction(1, 10**6), 1),
        ),
    )
    with mp.workdps(200):
        for pole, exact in zip(made(design, period_s, method, angle).poles, design.poles, strict=True):
            true = complex(reference.image(exact, period_s, method, angle))
            assert abs(true) < 1.2e-12
            assert abs(pole.value - true) <= FLOAT_ERROR * abs(true)


@given(sampled_designs(7, CALM, CALM), methods, decimals(-3, 0))
@settings(max_examples=60)
def test_zeros_and_gain_multiply_out_to_the_numerator(
    drawn: tuple[Factored, Fraction], method: str, angle: Fraction
) -> None:
    design, period_s = drawn
    assume(design.order > 0)
    pulse = made(design, period_s, method, angle)
    check_product(pulse.zeros, pulse.gain, pulse.numerator)
    check_product(pulse.poles, Fraction(1), pulse.denominator)


def check_product(roots: tuple[Root, ...], gain: Fraction, coefficients: tuple[Fraction, ...]) -> None:
    bits, digits = 900, 60
    with mp.workdps(300):
        product, sizes = [mp.mpf(1)], [mp.mpf(1)]
        for root in roots:
            re, im, _ = root.enclosure(bits)
            z = mp.mpc(re, im) / mp.mpf(2) ** bits + 1
            factor = [1, -2 * z.real, abs(z) ** 2] if root.is_pair else [1, -z.real]
            for _ in range(root.multiplicity):
                product = times(product, factor)
                sizes = times(sizes, [abs(c) for c in factor])
        missing = len(coefficients) - len(product)
        assert coefficients[:missing] == (0,) * missing
        for c, value, size in zip(coefficients[missing:], product, sizes, strict=True):
            scale = abs(reference.number(gain)) * size
            assert abs(reference.number(c) - value * reference.number(gain)) <= scale * mp.mpf(10) ** -digits


def times(p: list[Any], q: list[Any]) -> list[Any]:
    product = [mp.mpf(0)] * (len(p) + len(q) - 1)
    for i, a in enumerate(p):
        for j, b in enumerate(q):
            product[i + j] += a * b
    return product


def low_frequency_factor(method: str, k: int, angle: Fraction) -> Any:
    """What the low-frequency gain is multiplied by, where theory says so, else None.

    ``s`` is ``(z - 1)/T`` to first order for all methods but the prewarped one, whose slope differs; holds keep the
    gain of integrators and of a finite gain, and a ramp that of one differentiation more.
    """
    if method == "bilinear-prewarped":
        half = reference.number(angle) / 2
        return (half / mp.tan(half)) ** k
    if method == "impulse-invariant":
        return 1 if k < 0 else None
    if method in {"step-invariant", "ramp-invariant"}:
        return 1 if k <= (method == "ramp-invariant") else None
    return 1


@given(sampled_designs(7, CALM, CALM), methods, decimals(-3, 0))
@settings(max_examples=60)
def test_low_frequency_gain_is_kept_exactly_by_rational_methods_and_as_far_as_carried_by_the_others(
    drawn: tuple[Factored, Fraction], method: str, angle: Fraction
) -> None:
    design, period_s = drawn
    transfer = design.transfer()
    pulse = made(design, period_s, method, angle)
    k = transfer.zeros_minus_poles_at_origin
    with mp.workdps(300):
        factor = low_frequency_factor(method, k, angle)
        assume(factor is not None)
        assert pulse.zeros_minus_poles_at_one == k
        if method in EXPONENTIAL or method == "bilinear-prewarped":
            expected = reference.number(transfer.low_frequency_gain) * factor
            assert abs(reference.number(pulse.low_frequency_gain) / expected - 1) <= mp.mpf(10) ** -40
        else:
            assert pulse.low_frequency_gain == transfer.low_frequency_gain


STABLE = ("slow", "ordinary", "stiff", "damped", "light")


@given(
    sampled_designs(8, STABLE, CALM),
    st.sampled_from([m for m in METHODS if m != "forward-difference"]),
    decimals(-3, 0),
)
@settings(max_examples=60)
def test_stable_stays_stable_by_every_method_but_the_forward_difference(
    drawn: tuple[Factored, Fraction], method: str, angle: Fraction
) -> None:
    design, period_s = drawn
    for pole in made(design, period_s, method, angle).poles:
        re, im, radius = pole.enclosure(400)
        outer = (abs(re + (1 << 400)) + radius) ** 2 + (abs(im) + radius) ** 2
        assert outer < 1 << 800


@given(sampled_designs(6, ("ordinary", "stiff", "damped", "light"), CALM))
def test_the_forward_difference_is_stable_where_its_circle_says(drawn: tuple[Factored, Fraction]) -> None:
    # |1 + p T| < 1: the disc of radius 1/T about -1/T.
    design, period_s = drawn
    inside = all((1 + p.re * period_s) ** 2 + (p.im * period_s) ** 2 < 1 for p in design.poles)
    pulse = made(design, period_s, "forward-difference", Fraction(1))
    found = [
        Fraction(pole.enclosure(300)[0] + (1 << 300), 1 << 300) ** 2 + Fraction(pole.enclosure(300)[1], 1 << 300) ** 2
        for pole in pulse.poles
    ]
    assert all(square < 1 for square in found) == inside


@pytest.mark.parametrize("method", ["bilinear", "bilinear-prewarped", *EXPONENTIAL])
def test_an_undamped_pair_stays_on_the_unit_circle(method: str) -> None:
    design = Factored(
        Fraction(1), (), (ExactRoot(Fraction(0), Fraction(70), 1), ExactRoot(Fraction(0), Fraction(30), 2))
    )
    for pole in made(design, Fraction(1, 100), method, Fraction(1, 3)).poles:
        re, im, radius = pole.enclosure(500)
        size = (re + (1 << 500)) ** 2 + im**2
        assert abs(size - (1 << 1000)) <= 8 * (radius + 1) << 500


@pytest.mark.parametrize("method", ["bilinear", "bilinear-prewarped"])
@pytest.mark.parametrize("sign", [1, -1])
def test_an_image_beyond_a_double_is_refused_or_done_but_never_an_arithmetic_error(method: str, sign: int) -> None:
    # s = w prewarped at w = 2 pi 50, a quarter of the rate, has its image at 1e400; 2/T (1 + 1e-330) by bilinear too.
    w = 2 * pi() * 50
    root = {"bilinear": 400 * (1 + sign * Fraction(1, 10**330)), "bilinear-prewarped": w}[method]
    exact_at = w if method == "bilinear-prewarped" else None
    with pytest.raises(Refused):
        outcome((1,), (1, -root), method, exact_at)
    try:
        numerator, _ = outcome((1, -root), (1, 3, 5), method, exact_at)
    except Refused:
        return
    assert numerator[0] == 0.0
    assert numerator[1] != 0.0


def outcome(
    numerator: tuple[Fraction | int, ...],
    denominator: tuple[Fraction | int, ...],
    method: str,
    exact_at: Fraction | None,
) -> tuple[tuple[float, ...], tuple[float, ...]]:
    transfer = TransferFunction.from_polynomials(numerator, denominator)
    return discretize(transfer, Fraction(1, 200), method, exact_at).rounded(FLOAT64)
