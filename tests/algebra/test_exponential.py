from __future__ import annotations

from fractions import Fraction
from typing import Any

import mpmath as mp
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure
from realize.algebra.exponential import image_polynomial, normalised, sampled_response
from tests.methods import reference
from tests.strategies import ExactRoot, Factored, expanded, sampled_designs

#: Kinds of poles that neither grow nor are so stiff that a first width resolves nothing.
CALM = ("slow", "ordinary", "damped", "light", "undamped", "origin")

#: Digits of the reference, and of its own error after the cancellation of neighbouring poles.
DIGITS = 900


def away_from_origin(roots: tuple[ExactRoot, ...]) -> tuple[ExactRoot, ...]:
    return tuple(root for root in roots if root.re or root.im)


def misses(enclosure: Enclosure, truth: list[tuple[Any, Any]]) -> list[int]:
    """Entries whose true value, give or take the error of the reference, is outside."""
    error = mp.mpf(10) ** (60 - DIGITS)
    found = []
    for i, ((low, high, unit), (value, size)) in enumerate(zip(enclosure.intervals(), truth, strict=True)):
        if not mp.mpf(low) / unit - size * error <= value <= mp.mpf(high) / unit + size * error:
            found.append(i)
    return found


def width(enclosure: Enclosure) -> float:
    """Greatest radius."""
    return max((float(mp.mpf(high - low) / unit / 2) for low, high, unit in enclosure.intervals()), default=0.0)


@given(st.lists(st.integers(-99, 99), min_size=1, max_size=6).filter(lambda p: p[0]), st.fractions(0, 9).filter(bool))
def test_normalised_coefficients_belong_to_the_roots_times_the_period(p: list[int], period_s: Fraction) -> None:
    scaled = normalised(p, period_s)
    assert scaled[0] == 1
    for s in (Fraction(2), Fraction(-1, 3)):
        n = len(p) - 1
        assert poly.evaluate(scaled, s * period_s) * p[0] == poly.evaluate(tuple(map(Fraction, p)), s) * period_s**n


@given(sampled_designs(10), st.sampled_from((128, 400, 1500)))
@settings(max_examples=40)
def test_the_image_polynomial_holds_the_product_over_the_exact_images(
    drawn: tuple[Factored, Fraction], bits: int
) -> None:
    design, period_s = drawn
    poles = away_from_origin(design.poles)
    if poles:
        enclosure = image_polynomial(poly.primitive(expanded(poles)), period_s, bits)
        with mp.workdps(DIGITS):
            assert not misses(enclosure, reference._images(poles, period_s))


@given(sampled_designs(8), st.integers(1, 2), st.sampled_from((128, 400, 1500)))
@settings(max_examples=40)
def test_sampled_responses_hold_the_sum_of_the_partial_fractions(
    drawn: tuple[Factored, Fraction], integrations: int, bits: int
) -> None:
    design, period_s = drawn
    count = design.order + 2
    enclosure = sampled_response(
        monic_numerator(design, period_s), denominator(design), integrations, period_s, count, bits
    )
    with mp.workdps(DIGITS):
        assert not misses(enclosure, reference.responses(design, integrations, period_s, count))


@given(sampled_designs(6, CALM, CALM))
@settings(max_examples=25)
def test_enclosures_narrow_as_the_bits_grow(drawn: tuple[Factored, Fraction]) -> None:
    design, period_s = drawn

    def response(bits: int) -> Enclosure:
        numerator = monic_numerator(design, period_s)
        return sampled_response(numerator, denominator(design), 1, period_s, design.order + 1, bits)

    first, second = (width(response(bits)) for bits in (500, 1000))
    assert second <= first * 2.0**-490


def monic_numerator(design: Factored, period_s: Fraction) -> poly.Rationals:
    lead = design.gain * period_s**design.relative_degree
    return tuple(lead * c for c in normalised(expanded(design.zeros), period_s))  # type: ignore[arg-type]


def denominator(design: Factored) -> poly.Integers:
    return poly.primitive(expanded(design.poles))


@pytest.mark.parametrize("integrations", [0, 1, 2])
def test_poles_at_the_origin_alone_give_exact_samples(integrations: int) -> None:
    # (x^2 - 3)/x^(3 + n) is t^n/n! - 3 t^(2+n)/(2+n)!.
    numerator = (Fraction(1), Fraction(0), Fraction(-3))
    exact = sampled_response(numerator, (7, 0, 0, 0), integrations, Fraction(1, 3), 5, 128)
    factorial = (1, 1, 2, 6, 24)
    assert exact.midpoints() == tuple(
        Fraction(t**integrations, factorial[integrations])
        - 3 * Fraction(t ** (2 + integrations), factorial[2 + integrations])
        for t in range(5)
    )
    assert width(exact) == 0


def test_an_undamped_pair_sampled_four_times_a_turn_is_the_square_of_i() -> None:
    # s^2 + 1 at T = pi/2 to 400 digits: z^2 + 1, and sin(k pi/2) = 0, 1, 0, -1.
    with mp.workdps(420):
        period_s = reference.exactly(mp.pi / 2)
    image = image_polynomial((1, 0, 1), period_s, 800)
    assert [round(float(m), 100) for m in image.midpoints()] == [1.0, 0.0, 1.0]
    samples = sampled_response((period_s,), (1, 0, 1), 0, period_s, 4, 800)
    assert [round(float(m), 12) for m in samples.midpoints()] == [0.0, 1.0, 0.0, -1.0]
