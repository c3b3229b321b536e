"""Every coefficient of every method against the same methods by partial fractions in mpmath."""

from __future__ import annotations

from fractions import Fraction
from math import copysign

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from realize.algebra.irrational import pi
from realize.algebra.rounding import FLOAT32, FLOAT64, FloatFormat
from realize.errors import Refused
from realize.methods import METHODS, Discretization, coefficients, discretize
from realize.transfer import TransferFunction
from tests.methods import reference
from tests.strategies import ExactRoot, Factored, decimals, sampled_designs

#: The reference is right to this fraction of a coefficient; only a value as near to a tie may round either way.
UNCERTAIN = Fraction(1, 10 ** (reference.DIGITS - 2))

EXPONENTIAL = ("step-invariant", "ramp-invariant", "impulse-invariant", "pole-zero-mapped")


def real(x: int | str | Fraction, multiplicity: int = 1) -> ExactRoot:
    return ExactRoot(Fraction(x), Fraction(0), multiplicity)


def assert_correctly_rounded(obtained: tuple[float, ...], truth: list[Fraction], target: FloatFormat) -> None:
    assert len(obtained) == len(truth)
    for got, x in zip(obtained, truth, strict=True):
        assert got in {target.round(x * (1 - UNCERTAIN)), target.round(x * (1 + UNCERTAIN))}
        assert got != 0 or copysign(1, got) == 1


def check(design: Factored, period_s: Fraction, method: str, exact_at_rad_s: Fraction | None = None) -> None:
    result = discretize(design.transfer(), period_s, method, exact_at_rad_s)
    numerator, denominator = reference.coefficients(design, period_s, method, exact_at_rad_s)
    for target in (FLOAT64, FLOAT32):
        fits = all(abs(c) < Fraction(2) ** (target.most_exponent - 1) for c in numerator + denominator)
        if fits:
            obtained = result.rounded(target)
            assert_correctly_rounded(obtained[0], numerator, target)
            assert_correctly_rounded(obtained[1], denominator, target)


@given(sampled_designs(8), st.sampled_from(EXPONENTIAL), st.sampled_from((FLOAT64, FLOAT32)))
def test_coefficients_alone_are_the_correctly_rounded_ones(
    drawn: tuple[Factored, Fraction], method: str, target: FloatFormat
) -> None:
    design, period_s = drawn
    numerator, denominator = reference.coefficients(design, period_s, method)
    assume(all(abs(c) < Fraction(2) ** (target.most_exponent - 1) for c in numerator + denominator))
    obtained = coefficients(design.transfer(), period_s, method, target)
    assert_correctly_rounded(obtained[0], numerator, target)
    assert_correctly_rounded(obtained[1], denominator, target)


@pytest.mark.parametrize("method", reference.METHODS)
@given(sampled_designs(16), decimals(-4, 0))
@settings(max_examples=4)
def test_every_coefficient_is_the_correctly_rounded_one(
    method: str, drawn: tuple[Factored, Fraction], angle: Fraction
) -> None:
    design, period_s = drawn
    assume(design.order > 0)
    check(design, period_s, method, 3 * angle / period_s if method == "bilinear-prewarped" else None)


def test_the_reference_covers_every_method() -> None:
    assert set(reference.METHODS) == set(METHODS)


@pytest.mark.parametrize("method", reference.METHODS)
@pytest.mark.parametrize(
    ("design", "period_s"),
    [
        pytest.param(
            Factored(Fraction(1), (), tuple(real(f"-{0.1 * 5e5 ** (k / 15):.6g}") for k in range(16))),
            Fraction(1, 10**4),
            id="order 16, poles from 0.1 to 5e4",
        ),
        pytest.param(Factored(Fraction(1), (), (real(-1, 16),)), Fraction(1, 10**8), id="order 16 at 1e8 Hz"),
        pytest.param(Factored(Fraction(1), (), (real(-1, 8),)), Fraction(10**5), id="order 8 at 1e-5 Hz"),
        pytest.param(
            Factored(Fraction(1), (), (real("-0.1"), real(-10), real(-1000), real(-100000))),
            Fraction(10**5),
            id="stiff at 1e-5 Hz",
        ),
        pytest.param(
            Factored(
                Fraction(2), (real(-5), ExactRoot(Fraction(-1), Fraction(7), 2)), (real(3), real(-3, 3), real(0, 2))
            ),
            Fraction(1, 10),
            id="growing, repeated and integrating",
        ),
        pytest.param(
            Factored(Fraction(1), (), (real(1), real(-1), real("-1.5"))), Fraction(350), id="growth by exp(350)"
        ),
        pytest.param(
            Factored(Fraction(1), (), (real(-1), real(-1 - Fraction(1, 10**12)), real(-1 + Fraction(1, 10**12)))),
            Fraction(1, 3),
            id="poles 1e-12 apart",
        ),
        pytest.param(Factored(Fraction(-7, 3), (), ()), Fraction(1, 10), id="static gain"),
        pytest.param(Factored(Fraction(5), (real(-2),), (real(-1),)), Fraction(1, 10), id="direct feed-through"),
    ],
)
def test_hard_designs_are_correctly_rounded_too(design: Factored, period_s: Fraction, method: str) -> None:
    check(design, period_s, method, Fraction(1, 2) / period_s if method == "bilinear-prewarped" else None)


def discretized(
    numerator: tuple[Fraction | int, ...],
    denominator: tuple[Fraction | int, ...],
    period_s: Fraction | int,
    method: str,
    exact_at_rad_s: Fraction | None = None,
) -> Discretization:
    transfer = TransferFunction.from_polynomials(numerator, denominator)
    return discretize(transfer, Fraction(period_s), method, exact_at_rad_s)


def test_an_exact_tie_is_rounded_to_even() -> None:
    # 6 c/s^3 held and sampled at 1 s is c (z^2 + 4z + 1)/(z - 1)^3; c is halfway between two doubles.
    c = 9007199254740995
    numerator, denominator = discretized((6 * c,), (1, 0, 0, 0), 1, "step-invariant").rounded(FLOAT64)
    assert numerator == (0.0, float(c + 1), float(4 * c), float(c + 1))
    assert denominator == (1.0, -3.0, 3.0, -1.0)


@pytest.mark.parametrize("method", [m for m in METHODS if m != "bilinear-prewarped"])
def test_poles_at_the_origin_alone_are_exact_by_every_method_that_needs_no_tangent(method: str) -> None:
    # Sums of rationals: the closed forms of 1/s^2 at T = 1/3.
    t = Fraction(1, 3)
    expected = {
        "step-invariant": (0, t**2 / 2, t**2 / 2),
        "ramp-invariant": (t**2 / 6, 4 * t**2 / 6, t**2 / 6),
        "impulse-invariant": (0, t**2, 0),
        "forward-difference": (0, 0, t**2),
        "backward-difference": (t**2, 0, 0),
        "bilinear": (t**2 / 4, t**2 / 2, t**2 / 4),
        "blended-difference": (Fraction(49, 64) * t**2, Fraction(14, 64) * t**2, Fraction(1, 64) * t**2),
        "pole-zero-mapped": (t**2 / 4, t**2 / 2, t**2 / 4),
    }[method]
    pulse = discretized((1,), (1, 0, 0), t, method).pulse
    assert list(pulse.numerator) == list(expected)
    assert list(pulse.denominator) == [1, -2, 1]


def test_float32_coefficients_do_not_pass_through_float64() -> None:
    # The gain lies just above halfway between two float32 numbers, by less than float64 can see.
    gain = 1 + Fraction(1, 2**24) + Fraction(1, 2**60)
    for method in METHODS:
        exact_at = Fraction(1) if method == "bilinear-prewarped" else None
        result = discretized((gain,), (1,), Fraction(1, 10), method, exact_at)
        assert result.rounded(FLOAT32) == ((1 + 2**-23,), (1.0,))
        assert result.rounded(FLOAT64) == ((1 + 2**-24,), (1.0,))


@pytest.mark.parametrize("method", METHODS)
def test_a_static_gain_is_itself_and_has_no_roots(method: str) -> None:
    exact_at = Fraction(1) if method == "bilinear-prewarped" else None
    result = discretized((3,), (7,), Fraction(1, 100), method, exact_at)
    assert result.rounded(FLOAT64) == ((3 / 7,), (1.0,))
    assert (result.pulse.poles, result.pulse.zeros) == ((), ())
    assert abs(result.pulse.low_frequency_gain - Fraction(3, 7)) <= (
        Fraction(1, 2**1000) if method == "bilinear-prewarped" else 0
    )


@pytest.mark.parametrize("method", ["bilinear-prewarped", *EXPONENTIAL])
def test_an_undamped_pair_at_a_quarter_of_the_rate_has_a_middle_coefficient_of_exactly_zero(method: str) -> None:
    # 2 pi 50 rad/s at 200 Hz turns by a right angle, to the 400 digits of pi: z^2 + 1e-400 z + 1.
    w = 2 * pi() * 50
    exact_at = w if method == "bilinear-prewarped" else None
    _, denominator = discretized((1,), (1, 0, w**2), Fraction(1, 200), method, exact_at).rounded(FLOAT64)
    assert denominator == (1.0, 0.0, 1.0)
    assert copysign(1, denominator[1]) == 1


def test_impulse_invariance_of_a_cosine_leaves_no_middle_coefficient() -> None:
    # g = cos(10 t): T (Z{g} - 1/2) = (T/2)(z^2 - 1)/(z^2 - 2 cos(10 T) z + 1).
    result = discretized((1, 0), (1, 0, 100), Fraction(1, 60), "impulse-invariant")
    numerator, denominator = result.rounded(FLOAT64)
    assert numerator == (1 / 120, 0.0, -1 / 120)
    assert denominator[0] == denominator[2] == 1.0
    assert sorted(zero.value.real for zero in result.pulse.zeros) == [-2.0, 0.0]


def test_a_step_response_that_passes_through_zero_at_the_first_sample_leaves_a_zero_coefficient() -> None:
    # (s - 2)/s^2 has the step response t - t^2, which is 0 at t = 1.
    result = discretized((1, -2), (1, 0, 0), 1, "step-invariant")
    assert result.rounded(FLOAT64) == ((0.0, 0.0, -2.0), (1.0, -2.0, 1.0))
    assert result.pulse.gain == -2
    assert result.pulse.zeros == ()


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("excess", [0, 1, 2, 3])
def test_structural_zeros_are_plain_zeros(method: str, excess: int) -> None:
    numerator = (3, 2, 5, 1)[: 4 - excess]
    exact_at = Fraction(1) if method == "bilinear-prewarped" else None
    coefficients = discretized(numerator, (7, 5, 3, 2), Fraction(1, 9), method, exact_at).rounded(FLOAT64)[0]
    zeros = {
        "forward-difference": set(range(excess)),
        "backward-difference": set(range(4 - excess, 4)),
        "step-invariant": {0} if excess else set(),
        "impulse-invariant": {0, 3} if excess > 1 else set(),
    }.get(method, set())
    assert {i for i, c in enumerate(coefficients) if c == 0} == zeros
    assert all(copysign(1, coefficients[i]) == 1 for i in zeros)


@pytest.mark.parametrize("method", ["step-invariant", "bilinear", "pole-zero-mapped"])
def test_a_coefficient_beyond_the_format_is_refused_and_only_there(method: str) -> None:
    result = discretized((10**40,), (1, 1), Fraction(1, 2), method)
    assert result.rounded(FLOAT64)[0][1] > 1e39
    with pytest.raises(Refused, match="beyond the largest float32"):
        result.rounded(FLOAT32)


@given(st.sampled_from(EXPONENTIAL), st.integers(2, 16), st.integers(0, 3))
@settings(max_examples=20)
def test_a_polynomial_of_slow_poles_at_a_high_rate_keeps_all_its_digits(method: str, order: int, k: int) -> None:
    poles = tuple(real(Fraction(-1 - i, 10**k)) for i in range(order))
    check(Factored(Fraction(1), (), poles), Fraction(1, 10**6), method)
