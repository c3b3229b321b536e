from __future__ import annotations

from fractions import Fraction
from math import comb, factorial
from typing import Any

import mpmath as mp
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure
from realize.algebra.exponential import IMPULSES, RAMPS, STEPS, Hold, image_polynomial, pulse_numerator
from tests.methods import reference
from tests.strategies import ExactRoot, Factored, expanded, sampled_designs

#: Digits of the reference, and of its own error after the cancellation of neighbouring poles.
DIGITS = 900

#: Greatest radius of a result, in units of the bits asked for.
MOST_RADIUS = 3

widths = st.sampled_from((100, 400, 1500))
offsets = st.sampled_from((Fraction(0), Fraction(1, 3), Fraction(1), Fraction(999, 1000)))
holds = st.sampled_from((IMPULSES, STEPS, RAMPS)) | st.builds(Hold, st.just(1), offsets)


def real(x: int | Fraction, multiplicity: int = 1) -> ExactRoot:
    return ExactRoot(Fraction(x), Fraction(0), multiplicity)


def polynomial(roots: tuple[ExactRoot, ...]) -> poly.Integers:
    return poly.primitive(expanded(roots))


def misses(enclosure: Enclosure, truth: list[tuple[Any, Any]]) -> list[int]:
    """Entries whose true value, give or take the error of the reference, is outside."""
    error = mp.mpf(10) ** (60 - DIGITS)
    found = []
    for i, ((low, high, unit), (value, size)) in enumerate(zip(enclosure.intervals(), truth, strict=True)):
        if not mp.mpf(low) / unit - size * error <= value <= mp.mpf(high) / unit + size * error:
            found.append(i)
    return found


def numerator_of(design: Factored, period_s: Fraction, hold: Hold, bits: int) -> Enclosure:
    """Scaled to the gain of the design: the polynomials come without theirs."""
    above, below = polynomial(design.zeros), polynomial(design.poles)
    scale = design.gain * Fraction(below[0], above[0])
    return pulse_numerator(above, below, period_s, hold, bits).scaled(scale)


def true_numerator(design: Factored, period_s: Fraction, hold: Hold) -> list[tuple[Any, Any]]:
    """The samples of the response, by the sum of its modes in mpmath, times the denominator and the input's."""
    count, m = design.order + 1, hold.integrations
    samples = reference.responses(design, m, period_s, count + (m == 2), hold.offset)
    if m == 0:
        direct = reference.number(design.gain) if design.relative_degree == 0 else mp.mpf(0)
        samples[0] = (samples[0][0] / 2 + direct, samples[0][1] + abs(direct))
    differences = reference._whole([comb(m, k) * (-1) ** k for k in range(m + 1)])
    product = reference._product(reference._product(samples, differences), reference._images(design.poles, period_s))
    return product[1 : count + 1] if m == 2 else product[:count]


@given(sampled_designs(10), widths)
@settings(max_examples=40)
def test_the_image_polynomial_holds_the_product_over_the_exact_images(
    drawn: tuple[Factored, Fraction], bits: int
) -> None:
    design, period_s = drawn
    poles = tuple(root for root in design.poles if root.re or root.im)
    if poles:
        enclosure = image_polynomial(polynomial(poles), period_s, bits)
        assert enclosure.entry(0) == (1 << bits, 0)
        assert max(enclosure.rad) <= MOST_RADIUS
        with mp.workdps(DIGITS):
            assert not misses(enclosure, reference._images(poles, period_s))


#: Poles 1e-6, 1e-40 and 1e-200 apart, as far as a design of 400 digits may go.
CLUSTERS = tuple(
    Factored(Fraction(3), (real(-5),), (real(-1), real(-1 - apart, 2), ExactRoot(-1 + apart, apart, 1)))
    for apart in (Fraction(1, 10**6), Fraction(1, 10**40), Fraction(1, 10**200))
)


@given(sampled_designs(8), holds, widths)
@settings(max_examples=50)
@example((CLUSTERS[0], Fraction(1, 3)), RAMPS, 100)
@example((CLUSTERS[1], Fraction(1, 3)), STEPS, 100)
@example((Factored(Fraction(1), (), (real(0, 3), real(-(10**9)))), Fraction(1)), Hold(1, Fraction(1, 2)), 400)
@example((Factored(Fraction(1), (), (real(300), real(-300, 2))), Fraction(1)), RAMPS, 100)
@example((Factored(Fraction(1), (), tuple(real(-k) for k in range(1, 9))), Fraction(1, 10**12)), RAMPS, 100)
def test_numerators_hold_the_samples_of_the_response_times_the_denominator(
    drawn: tuple[Factored, Fraction], hold: Hold, bits: int
) -> None:
    design, period_s = drawn
    enclosure = numerator_of(design, period_s, hold, bits)
    assert max(enclosure.rad) <= MOST_RADIUS
    with mp.workdps(DIGITS):
        assert not misses(enclosure, true_numerator(design, period_s, hold))


@pytest.mark.parametrize("hold", [IMPULSES, STEPS, RAMPS, Hold(1, Fraction(1, 2))])
def test_poles_that_agree_to_two_hundred_digits_still_give_a_narrow_numerator(hold: Hold) -> None:
    # To the bits asked for it is that of one five-fold pole: the coefficients are continuous in the poles.
    limit = Factored(Fraction(3), (real(-5),), (real(-1, 5),))
    apart, together = (numerator_of(design, Fraction(1, 3), hold, 300) for design in (CLUSTERS[2], limit))
    assert max(apart.rad) <= MOST_RADIUS
    for a, b in zip(apart.midpoints(), together.midpoints(), strict=True):
        assert abs(a - b) <= Fraction(1, 2**290)


@given(
    st.integers(1, 6),
    st.lists(st.integers(-99, 99), min_size=1, max_size=7).filter(lambda p: p[0]),
    st.fractions(Fraction(1, 50), 50, max_denominator=99),
    holds,
)
def test_poles_at_the_origin_alone_give_exact_numerators(
    order: int, numerator: list[int], period_s: Fraction, hold: Hold
) -> None:
    # The response of c x^j/x^N is c t^(N-1-j)/(N-1-j)!, its feed-through apart; (1 - 1/z)^N takes it to a polynomial.
    above, m = tuple(numerator[: order + 1]), hold.integrations
    exact = pulse_numerator(above, (7,) + (0,) * order, period_s, hold, 100)
    terms = [(Fraction(c, 7) * period_s ** (order - j), order - j) for j, c in enumerate(reversed(above))]

    def response(t: Fraction) -> Fraction:
        powers = [(c, i + m - 1) for c, i in terms if i + m > 0]
        return sum((c * t**k / factorial(k) for c, k in powers), Fraction(0))

    count = order + 1 + (m == 2)
    samples = [response(k + hold.offset) for k in range(count)]
    if m == 0:
        samples[0] = samples[0] / 2 + sum(c for c, i in terms if i == 0)
    ones = [Fraction(comb(order + m, k) * (-1) ** k) for k in range(order + m + 1)]
    product = [sum((samples[i] * ones[k - i] for i in range(k + 1)), Fraction(0)) for k in range(count)]
    assert exact.midpoints() == tuple(product[m == 2 :])
    assert not any(exact.rad)


def test_a_mode_cancelled_by_the_numerator_adds_nothing() -> None:
    # (s + 2)/((s + 2)(s + 3)) is 1/(s + 3) with a factor z - exp(-2T) in both parts.
    period_s, bits = Fraction(1, 4), 300
    plain = pulse_numerator((1,), (1, 3), period_s, STEPS, bits)
    doubled = pulse_numerator((1, 2), (1, 5, 6), period_s, STEPS, bits)
    expected = plain.convolve(image_polynomial((1, 2), period_s, bits))
    for a, b in zip(doubled.midpoints(), expected.midpoints(), strict=True):
        assert abs(a - b) <= Fraction(1, 2**295)


def test_an_undamped_pair_sampled_four_times_a_turn_is_the_square_of_i() -> None:
    # s^2 + 1 at T = pi/2 to 400 digits: z^2 + 1, and (1 - 1/z) Z{1 - cos(k pi/2)} = (z + 1)/(z^2 + 1).
    with mp.workdps(420):
        period_s = reference.exactly(mp.pi / 2)
    image = image_polynomial((1, 0, 1), period_s, 800)
    assert [round(float(m), 100) for m in image.midpoints()] == [1.0, 0.0, 1.0]
    held = pulse_numerator((1,), (1, 0, 1), period_s, STEPS, 800)
    assert [round(float(m), 12) for m in held.midpoints()] == [0.0, 1.0, 1.0]
