from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from itertools import combinations
from math import copysign, frexp
from typing import Any

import mpmath as mp
import numpy as np
import pytest
from hypothesis import assume, given, reject, settings
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.roots import isolate
from realize.arithmetic.formats import FLOAT32, FLOAT64, FORMATS, FloatFormat
from realize.arithmetic.realization import (
    AnySection,
    DeltaSection,
    Realization,
    Section,
    realization,
    stored_pulse,
)
from realize.errors import Refused
from realize.methods import METHODS, discretize
from realize.transfer import PulseTransferFunction
from tests.methods import reference
from tests.strategies import ExactRoot, Factored, sampled_designs

#: Digits of the reference coefficients.
DIGITS = 220

#: What is computed from them is right to this fraction; only a value as near to a tie may round either way.
UNCERTAIN = Fraction(1, 10**50)


def real(x: int | str | Fraction, multiplicity: int = 1) -> ExactRoot:
    return ExactRoot(Fraction(x), Fraction(0), multiplicity)


def pair(re: int | str | Fraction, im: int | str | Fraction, multiplicity: int = 1) -> ExactRoot:
    return ExactRoot(Fraction(re), Fraction(im), multiplicity)


def design(gain: int | str, zeros: tuple[ExactRoot, ...], poles: tuple[ExactRoot, ...]) -> Factored:
    return Factored(Fraction(gain), zeros, poles)


DESIGNS: dict[str, tuple[Factored, Fraction]] = {
    "proportional and integral": (design(5, (real("-1.4"),), (real(0),)), Fraction(1, 100)),
    "slow integral": (design("0.8", (real("-0.025"),), (real(0),)), Fraction(1, 10000)),
    "filtered derivative": (design("49.2", (real(-38), real(-5)), (real(0), real(-500))), Fraction(1, 2000)),
    "lead": (design(50, (real(-5),), (real(-50),)), Fraction(1, 200)),
    "notch": (design(1, (pair("-15.7", 314),), (pair(-220, 224),)), Fraction(1, 8000)),
    "resonance": (design(3, (real(-4),), (pair(-4, 314),)), Fraction(1, 10000)),
    "two integrations and a lag": (design(7, (real(-1),), (real(0, 2), real(-3))), Fraction(1, 50)),
    "fifth order": (
        design(900, (real(-30), pair(-2, 40)), (pair(-10, 25), real(-7), real(-60), real(-61))),
        Fraction(1, 500),
    ),
    "complex zeros over real poles": (design(2, (pair(-1, 5),), (real(-2), real(-3), real(-40))), Fraction(1, 30)),
    "complex poles, one finite zero": (design(4, (real(-9),), (pair(-2, 6),)), Fraction(1, 20)),
    "undamped": (design(1, (real(0),), (pair(0, 10),)), Fraction(1, 60)),
    "repeated": (design(1, (), (real(-4, 4),)), Fraction(1, 80)),
    "growing": (design(1, (real(-2),), (real(1), real(-6))), Fraction(1, 50)),
    "two pairs of zeros over three real poles and a pair": (
        design(1, (pair(-1, 3), pair(-2, 8)), (pair(-5, 5), real(-4), real(-9), real(-20))),
        Fraction(1, 40),
    ),
}

CASES = [(name, method) for name in DESIGNS for method in METHODS]


def exact_at(method: str, period_s: Fraction) -> Fraction | None:
    return Fraction(1, 3) / period_s if method == "bilinear-prewarped" else None


def pulse_of(drawn: tuple[Factored, Fraction], method: str) -> PulseTransferFunction:
    g, period_s = drawn
    return discretize(g.transfer(), period_s, method, exact_at(method, period_s)).pulse


def multiplicity_at(p: poly.Rationals, z: int) -> int:
    """Multiplicity of a root at z, exactly."""
    return poly.trailing_zeros(poly.shift(poly.trimmed(p), Fraction(z)))


# The truth, by another road: reference coefficients, quotient rule, Durand-Kerner iteration.

#: Roots that this file finds itself are right to this, and figures computed from them to a little less.
NOISE = mp.mpf(10) ** -90


class Truth:
    """``Gd = rest + sum R_i/(z-1)^i`` to many digits: gain and roots (as z) of the rest, and the R_i."""

    def __init__(self, g: Factored, period_s: Fraction, method: str) -> None:
        numerator, denominator = reference.coefficients(g, period_s, method, exact_at(method, period_s), DIGITS)
        order = sum(p.multiplicity for p in g.poles if p.re == p.im == 0)
        top = poly.shift(poly.trimmed(numerator), Fraction(1))
        bottom = poly.shift(tuple(denominator), Fraction(1))
        bottom = bottom[: len(bottom) - order]
        self.integral = residues(top, bottom, order)
        left = top
        for i, gain in enumerate(self.integral, start=1):
            left = poly.subtract(left, (*poly.scale(bottom, gain), *(Fraction(0),) * (order - i)))
        rest = without_noise(left[: len(left) - order])
        self.gain = rest[0] if rest else Fraction(0)
        self.poles = images(tuple(p for p in g.poles if p.re or p.im), period_s, method)
        maps_zeros = method == "pole-zero-mapped" or method not in reference.EXPONENTIAL
        self.zeros = mapped_zeros(g, period_s, method) if maps_zeros and not order else roots_in_z(rest)


def residues(top: poly.Rationals, bottom: poly.Rationals, order: int) -> tuple[Fraction, ...]:
    """``R_1, R_2`` by the quotient rule at z = 1."""
    (n1, n0), (d1, d0) = (((Fraction(0), Fraction(0), *p))[-2:] for p in (top, bottom))
    slope = (n1 * d0 - n0 * d1) / d0**2
    return {0: (), 1: (n0 / d0,), 2: (slope, n0 / d0)}[order]


def without_noise(p: poly.Rationals) -> poly.Rationals:
    limit = max((abs(c) for c in p), default=Fraction(0)) / 10 ** (DIGITS // 2)
    return p[next((i for i, c in enumerate(p) if abs(c) > limit), len(p)) :]


def images(roots: tuple[ExactRoot, ...], period_s: Fraction, method: str) -> list[Any]:
    with mp.workdps(DIGITS):
        return [
            1 + (x.real if not root.im else x)
            for root in roots
            for x in [reference.image(root, period_s, method, Fraction(1, 3))]
            for _ in range(root.multiplicity)
        ]


def mapped_zeros(g: Factored, period_s: Fraction, method: str) -> list[Any]:
    """Images of the finite zeros, and of those at infinity where the method has some."""
    far = {"forward-difference": None, "backward-difference": mp.mpf(0), "blended-difference": -mp.mpf(1) / 7}
    with mp.workdps(DIGITS):
        extra = -mp.mpf(1) / 7 if method == "blended-difference" else far.get(method, mp.mpf(-1))
        return images(g.zeros, period_s, method) + ([] if extra is None else [extra] * g.relative_degree)


def roots_in_z(p: poly.Rationals) -> list[Any]:
    """Simple roots of a polynomial in ``z - 1``, as z; one of each pair."""
    if len(p) < 2:
        return []
    with mp.workdps(DIGITS):
        found = durand_kerner([reference.number(c / p[0]) for c in p])
        return [1 + (x.real if abs(x.imag) <= NOISE else x) for x in found if x.imag >= -NOISE]


def durand_kerner(p: list[Any]) -> list[Any]:
    """All roots of a monic polynomial, from the eigenvalues of its companion matrix on."""
    z = [mp.mpc(complex(x)) for x in np.roots([float(c) for c in p])]
    for _ in range(60):
        steps = []
        for i, x in enumerate(z):
            value = mp.mpc(0)
            for c in p:
                value = value * x + c
            steps.append(value / mp.fprod(x - y for j, y in enumerate(z) if j != i))
            z[i] = x - steps[-1]
        if max(abs(step) for step in steps) < NOISE / 10**20:
            return z
    raise ArithmeticError("the roots of the reference did not settle")


def monic(roots: tuple[Any, ...]) -> list[Any]:
    """Coefficients of ``prod(1 - root/z)``, pairs included."""
    product: list[Any] = [mp.mpf(1)]
    for z in roots:
        factor = [mp.mpf(1), -2 * z.real, abs(z) ** 2] if isinstance(z, mp.mpc) else [mp.mpf(1), -z]
        product = [
            mp.fsum(product[j] * factor[i - j] for j in range(len(product)) if 0 <= i - j < len(factor))
            for i in range(len(product) + len(factor) - 1)
        ]
    return product


def is_rounded(stored: float, true: Any, target: FloatFormat) -> bool:
    """Whether a stored number is the correctly rounded one, or a zero that noise hides from this file."""
    if abs(true) < NOISE:
        return stored == 0 and copysign(1, stored) == 1
    x = reference.exactly(true)
    return stored in {target.round(x * (1 - UNCERTAIN)), target.round(x * (1 + UNCERTAIN))}


def degree(roots: tuple[Any, ...]) -> int:
    return sum(2 if isinstance(z, mp.mpc) else 1 for z in roots)


def taken(stored: tuple[float, ...], scale: Any, left: list[Any], target: FloatFormat) -> None:
    """Take from ``left`` the roots whose product, times ``scale``, was rounded to the stored coefficients."""
    for count in range(3):
        for chosen in combinations(left, count):
            if degree(chosen) == len(stored) - 1 and all(
                is_rounded(c, scale * x, target) for c, x in zip(stored, monic(chosen), strict=True)
            ):
                for z in chosen:
                    left.remove(z)
                return
    raise AssertionError(f"{stored} is no correctly rounded product of {left}")


def stripped(values: tuple[float, ...]) -> tuple[float, ...]:
    """Without zeros at the end: roots at the origin and padding."""
    last = max((i for i, c in enumerate(values) if c), default=-1)
    return values[: last + 1]


@pytest.mark.parametrize(("name", "method"), CASES)
def test_every_stored_number_is_the_correctly_rounded_value_of_the_real_number_it_stands_for(
    name: str, method: str
) -> None:
    g, period_s = DESIGNS[name]
    pulse = pulse_of(DESIGNS[name], method)
    truth = Truth(g, period_s, method)
    for target in FORMATS.values():
        stored = realization(pulse, target, "cascade")
        with mp.workdps(DIGITS):
            check_integral(stored, truth)
            check_sections(stored, truth)


@pytest.mark.parametrize(("name", "method"), CASES)
def test_every_stored_number_in_delta_is_the_correctly_rounded_value_too(name: str, method: str) -> None:
    g, period_s = DESIGNS[name]
    pulse = pulse_of(DESIGNS[name], method)
    truth = Truth(g, period_s, method)
    for target in FORMATS.values():
        stored = realization(pulse, target, "delta")
        assert all(isinstance(section, DeltaSection) for section in stored.sections)
        with mp.workdps(DIGITS):
            check_integral(stored, truth)
            check_delta_sections(stored, truth)


def check_delta_sections(stored: Realization, truth: Truth) -> None:
    """All leading coefficients are powers of two but at most one, which has the gain that is left."""
    poles, zeros = ([z for z in roots if abs(z) > NOISE] for roots in (truth.poles, truth.zeros))
    leads = [next(c for c in section.b if c) for section in stored.sections]
    rough = [k for k, lead in enumerate(leads) if abs(frexp(lead)[0]) != 0.5]
    assert len(rough) <= 1
    carrier = (rough or [0])[0]
    gain = reference.number(truth.gain)
    for k, lead in enumerate(leads):
        gain /= reference.number(Fraction(lead)) if k != carrier else 1
    for k, (section, lead) in enumerate(zip(stored.sections, leads, strict=True)):
        taken_in_delta((1.0, *section.a), mp.mpf(1), poles, stored.format)
        scale = gain if k == carrier else reference.number(Fraction(lead))
        taken_in_delta(section.b[section.b.index(lead) :], scale, zeros, stored.format)
        assert len(section.b) == len(section.a) + 1
    assert (poles, zeros) == ([], [])


def taken_in_delta(stored: tuple[float, ...], scale: Any, left: list[Any], target: FloatFormat) -> None:
    """As ``taken``, of polynomials in z - 1; roots at z = 0 are no padding there."""
    for count in range(len(stored) - 1, -1, -1):
        for chosen in combinations(left, count):
            at_zero = len(stored) - 1 - degree(chosen)
            if at_zero >= 0 and all(
                is_rounded(c, scale * x, target)
                for c, x in zip(stored, monic((*(z - 1 for z in chosen), *[mp.mpf(-1)] * at_zero)), strict=True)
            ):
                for z in chosen:
                    left.remove(z)
                return
    raise AssertionError(f"{stored} is no correctly rounded product of {left}")


def check_integral(stored: Realization, truth: Truth) -> None:
    assert len(stored.integral) == len(truth.integral)
    for got, x in zip(stored.integral, truth.integral, strict=True):
        # Half a unit in the last place.
        assert is_rounded(got, reference.number(x), stored.format)


def check_sections(stored: Realization, truth: Truth) -> None:
    poles, zeros = list(truth.poles), [z for z in truth.zeros if abs(z) > NOISE]
    gain = reference.number(truth.gain)
    delays = degree(tuple(truth.poles)) - degree(tuple(truth.zeros))
    for section in stored.sections[1:]:
        gain /= reference.number(Fraction(next(c for c in section.b if c)))
    for position, section in enumerate(stored.sections):
        lead = next(c for c in section.b if c)
        taken((1.0, *stripped(section.a)) if stripped(section.a) else (1.0,), mp.mpf(1), poles, stored.format)
        delay = section.b.index(lead)
        delays -= delay
        scale = reference.number(Fraction(lead)) if position else gain
        taken(stripped(section.b)[delay:], scale, zeros, stored.format)
        assert position == 0 or abs(frexp(lead)[0]) == 0.5, "a power of two"
        assert len(section.b) == len(section.a) + 1
    assert (poles, zeros) == ([], [])
    assert delays == 0 or not stored.sections


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
@pytest.mark.parametrize("structure", ["cascade", "auto"])
@pytest.mark.parametrize("method", METHODS)
@given(drawn=sampled_designs(8, ("slow", "ordinary", "damped", "light", "origin"), ("ordinary", "damped", "origin")))
@settings(max_examples=5)
def test_sections_and_integral_states_recombine_to_the_pulse_transfer_function_within_their_rounding(
    target: FloatFormat, structure: str, method: str, drawn: tuple[Factored, Fraction]
) -> None:
    assume(drawn[0].order > 0)
    pulse = pulse_of(drawn, method)
    stored = realized(pulse, target, structure)
    assert all(holds(target, c) for section in stored.sections for c in section.b + section.a)
    check_recombined(stored, pulse)


def realized(pulse: PulseTransferFunction, target: FloatFormat, structure: str) -> Realization:
    """The realization, where the gain of many slow poles does not exceed the format."""
    try:
        return realization(pulse, target, structure)
    except Refused:
        # A wrong refusal would show in the corpus and among the named designs.
        reject()


def holds(target: FloatFormat, value: float) -> bool:
    return target.round(Fraction(value)) == value


def check_recombined(stored: Realization, pulse: PulseTransferFunction) -> None:
    """Compare cross-multiplied: no root is needed."""
    back = stored_pulse(stored)
    assert len(back.numerator) == len(back.denominator)
    assert back.denominator[0] == 1
    # One rounding for each coefficient of each section and one for each R; 1.01 for their products.
    roundings = len(stored.sections) + 1
    unit = Fraction(1, 2**stored.format.precision) * roundings * Fraction(101, 100)
    tiny = Fraction(2) ** (stored.format.least_exponent + 20)
    left = poly.multiply(tuple(back.numerator), pulse.denominator)
    right = poly.multiply(tuple(pulse.numerator), back.denominator)
    top, bottom = magnitudes(stored)
    delays = len(bottom) - len(back.denominator)
    top, bottom = (p[: len(p) - delays] for p in (top, bottom))
    bound = poly.add(
        poly.multiply(top, tuple(abs(c) for c in pulse.denominator)),
        poly.multiply(tuple(abs(c) for c in pulse.numerator), bottom),
    )
    # Padding in front, so that equal powers meet.
    size = max(len(left), len(right), len(bound))
    for a, b, limit in zip(*(((Fraction(0),) * (size - len(p)) + p) for p in (left, right, bound)), strict=True):
        assert abs(a - b) <= unit * limit + tiny


def magnitudes(stored: Realization) -> tuple[poly.Rationals, poly.Rationals]:
    """Numerator and denominator of the recombined parts with every coefficient replaced by its magnitude."""
    order = len(stored.integral)
    top: poly.Rationals = (Fraction(1),) if stored.sections else ()
    bottom: poly.Rationals = (Fraction(1),)
    for section in stored.sections:
        top = poly.multiply(top, poly.trimmed(abs(Fraction(c)) for c in section.b))
        bottom = poly.multiply(bottom, (Fraction(1), *(abs(Fraction(c)) for c in section.a)))
    plus = (Fraction(1), Fraction(1))
    total = poly.multiply(top, poly.power(plus, order))
    for i, gain in enumerate(stored.integral, start=1):
        share = poly.multiply(poly.power(plus, order - i), bottom)
        total = poly.add(total, poly.scale(share, abs(Fraction(gain))))
    return total, poly.multiply(bottom, poly.power(plus, order))


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
@pytest.mark.parametrize("method", METHODS)
@given(drawn=sampled_designs(8, ("slow", "ordinary", "damped", "light", "origin"), ("ordinary", "damped", "origin")))
@settings(max_examples=5)
def test_sections_in_delta_recombine_to_the_pulse_transfer_function_within_their_rounding(
    target: FloatFormat, method: str, drawn: tuple[Factored, Fraction]
) -> None:
    """As for sections in z, with every polynomial in delta: where poles crowd z = 1 that is a sharper claim."""
    pulse = pulse_of(drawn, method)
    stored = realized(pulse, target, "delta")
    assert all(holds(target, c) for section in stored.sections for c in section.b + section.a)
    unit = Fraction(1, 2**target.precision) * (len(stored.sections) + 1) * Fraction(101, 100)
    tiny = Fraction(2) ** (target.least_exponent + 20)
    (top, bottom), sizes = recombined_in_delta(stored, Fraction), recombined_in_delta(stored, magnitude)
    above, below = (poly.shift(tuple(p), Fraction(1)) for p in (pulse.numerator, pulse.denominator))
    left, right = poly.multiply(top, below), poly.multiply(above, bottom)
    bound = poly.add(poly.multiply(sizes[0], tuple(map(abs, below))), poly.multiply(tuple(map(abs, above)), sizes[1]))
    size = max(len(left), len(right), len(bound))
    for a, b, limit in zip(*(((Fraction(0),) * (size - len(p)) + p) for p in (left, right, bound)), strict=True):
        assert abs(a - b) <= unit * limit + tiny


def magnitude(value: float) -> Fraction:
    return abs(Fraction(value))


def recombined_in_delta(
    stored: Realization, number: Callable[[float], Fraction]
) -> tuple[poly.Rationals, poly.Rationals]:
    """Numerator and denominator of all parts, descending powers of delta, with delays that cancel."""
    order = len(stored.integral)
    top: poly.Rationals = (Fraction(1),) if stored.sections else ()
    bottom: poly.Rationals = (Fraction(1),)
    for section in stored.sections:
        top = poly.multiply(top, poly.trimmed(map(number, section.b)))
        bottom = poly.multiply(bottom, (Fraction(1), *map(number, section.a)))
    total = (*top, *[Fraction(0)] * order) if top else ()
    for i, gain in enumerate(stored.integral, start=1):
        total = poly.add(total, (*poly.scale(bottom, number(gain)), *[Fraction(0)] * (order - i)))
    return total, (*bottom, *[Fraction(0)] * order)


@pytest.mark.parametrize("structure", ["cascade", "delta"])
@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
@pytest.mark.parametrize("method", METHODS)
@given(
    drawn=sampled_designs(
        8, ("slow", "ordinary", "damped", "light"), ("ordinary", "damped", "origin", "origin", "undamped")
    )
)
@settings(max_examples=5)
def test_zeros_at_one_and_minus_one_survive_exactly(
    structure: str, target: FloatFormat, method: str, drawn: tuple[Factored, Fraction]
) -> None:
    pulse = pulse_of(drawn, method)
    back = stored_pulse(realized(pulse, target, structure))
    for z in (1, -1):
        expected = sum(zero.multiplicity for zero in pulse.zeros if zero.value == z - 1)
        assert multiplicity_at(back.numerator, z) >= expected


@pytest.mark.parametrize("structure", ["auto", "delta"])
@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
@pytest.mark.parametrize("order", [1, 2, 3])
@pytest.mark.parametrize("method", METHODS)
def test_poles_at_one_survive_exactly(method: str, order: int, target: FloatFormat, structure: str) -> None:
    g = design(2, (real(-3),), (real(0, order), pair(-4, 9), real("-0.001")))
    back = stored_pulse(realization(pulse_of((g, Fraction(1, 50)), method), target, structure))
    assert multiplicity_at(back.denominator, 1) == order
    assert back.poles[0].value == 0
    assert back.poles[0].multiplicity == order


@pytest.mark.parametrize("structure", ["auto", "delta"])
def test_a_pole_at_minus_one_survives_exactly_beside_others(structure: str) -> None:
    # The forward difference takes s = -2/T to z = -1.
    for other in (real("-3.3"), real("-7.7")):
        g = design(1, (), (real(-100), other, real(-40)))
        back = stored_pulse(realization(pulse_of((g, Fraction(1, 50)), "forward-difference"), FLOAT32, structure))
        assert multiplicity_at(back.denominator, -1) == 1


@pytest.mark.parametrize("gain", ["0.7", "1.1", "123.456"])
def test_a_zero_at_minus_one_beside_a_free_one_survives_in_delta_whatever_the_gain(gain: str) -> None:
    # Bilinear, one finite zero over a pair: (z + 1) and the free zero part, and with a zero at z = 0 the first has the
    # coefficients 1, 3 and 2, which most gains would round apart.
    g = design(gain, (real(-1),), (pair(-30, 60),))
    pulse = pulse_of((g, Fraction(1, 20)), "bilinear")
    for target in FORMATS.values():
        stored = realization(pulse, target, "delta")
        # the pair comes first, where the gain that is left would go
        assert [len(section.a) for section in stored.sections] == [2, 1]
        assert multiplicity_at(stored_pulse(stored).numerator, -1) == 1


# Poles that crowd z = 1. Low corners in float32 are a classical warning (from memory): with coefficients off by half a
# unit in the last place each, 2^-24 and 2^-25, the gain at rest of a second-order low-pass is off by up to
# (2^-24 + 2^-25)/(w T)^2; and at 2 Hz and 500 kHz A(1) = 6.3e-10 is nothing that float32 can tell from 0.


def low_pass(order: int, corner_hz: int, rate_hz: int) -> tuple[Factored, Fraction]:
    """Gain 1 at rest; poles at the angles of a maximally flat response."""
    w = 2 * Fraction("3.14159265358979323846") * corner_hz
    half = w * Fraction("0.70710678118654752440")
    poles = {1: (ExactRoot(-w, Fraction(0), 1),), 2: (ExactRoot(-half, half, 1),)}[order]
    scale = w if order == 1 else 2 * half * half
    return Factored(scale, (), poles), Fraction(1, rate_hz)


def bilinear_coefficients(corner_hz: int, rate_hz: int) -> tuple[Any, Any]:
    """``a_1`` and ``a_2`` of that of order 2, in closed form."""
    with mp.workdps(40):
        k = mp.pi * corner_hz / rate_hz
        below = 1 + mp.sqrt(2) * k + k * k
        return 2 * (k * k - 1) / below, (1 - mp.sqrt(2) * k + k * k) / below


def gain_at_rest(pulse: PulseTransferFunction) -> Fraction:
    return sum(pulse.numerator, Fraction(0)) / sum(pulse.denominator, Fraction(0))


def test_20_hz_at_48_khz_in_float32_loses_gain_in_z_and_none_in_delta() -> None:
    pulse = pulse_of(low_pass(2, 20, 48000), "bilinear")
    in_z, in_delta = (gain_at_rest(stored_pulse(realization(pulse, FLOAT32, s))) for s in ("direct", "delta"))
    a1, a2 = bilinear_coefficients(20, 48000)
    rounded_below = 1 + float(np.float32(float(a1))) + float(np.float32(float(a2)))
    lost = float((1 + a1 + a2) / rounded_below) - 1
    # the numerator rounds too, by no more than a unit in the last place
    assert abs(float(in_z - 1) - lost) < 2.0**-23
    limit = (2.0**-24 + 2.0**-25) / float(2 * mp.pi * 20 / 48000) ** 2
    assert limit == pytest.approx(0.013, abs=5e-4)
    assert 0.001 < abs(lost) < limit, "beyond the default tolerance of 0.1 %"
    assert abs(in_delta - 1) <= 2 * Fraction(1, 2**24) * (1 + Fraction(1, 2**20))


def test_2_hz_at_500_khz_in_float32_is_a_pole_on_z_1_in_z_and_none_in_delta() -> None:
    pulse = pulse_of(low_pass(2, 2, 500000), "bilinear")
    a1, a2 = bilinear_coefficients(2, 500000)
    assert float(1 + a1 + a2) == pytest.approx(6.3e-10, rel=5e-3)
    assert 1 + float(np.float32(float(a1))) + float(np.float32(float(a2))) == 0
    in_z = stored_pulse(realization(pulse, FLOAT32, "direct"))
    assert sum(in_z.denominator) == 0
    in_delta = stored_pulse(realization(pulse, FLOAT32, "delta"))
    assert abs(gain_at_rest(in_delta) - 1) <= 2 * Fraction(1, 2**24) * (1 + Fraction(1, 2**20))


@pytest.mark.parametrize(("corner_hz", "rate_hz"), [(20, 48000), (2, 500000)])
def test_the_pole_of_a_slow_low_pass_of_order_one_is_kept_by_delta_to_half_a_unit_in_its_last_place(
    corner_hz: int, rate_hz: int
) -> None:
    pulse = pulse_of(low_pass(1, corner_hz, rate_hz), "bilinear")
    with mp.workdps(40):
        k = mp.pi * corner_hz / rate_hz
        from_one = 2 * k / (1 + k)
        for structure, least, most in (("direct", 2.0**-20, 1.0), ("delta", 0.0, 2.0**-24)):
            (_, pole) = stored_pulse(realization(pulse, FLOAT32, structure)).denominator
            moved = abs(reference.number(1 + pole) / from_one - 1)
            assert least <= moved <= most


# Closed forms of the integral gains.


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
@pytest.mark.parametrize("method", [m for m in METHODS if m not in {"bilinear-prewarped", "pole-zero-mapped"}])
def test_the_integral_gain_of_a_slow_controller_is_kept_to_half_a_unit_in_the_last_place(
    method: str, target: FloatFormat
) -> None:
    # kp (1 + 1/(Ti s)) with Ti = 40 s at 10 kHz: R = kp T/Ti by every method that keeps the integrator.
    g, period_s = DESIGNS["slow integral"]
    stored = realization(pulse_of((g, period_s), method), target)
    assert stored.integral == (target.round(Fraction(8, 10) / 40 / 10000),)


def test_the_parts_of_a_double_integrator_are_its_two_sums() -> None:
    # Step-invariant 1/s^2: (T^2/2)(z + 1)/(z - 1)^2 = (T^2/2)/(z - 1) + T^2/(z - 1)^2.
    t = Fraction(1, 50)
    stored = realization(pulse_of((design(1, (), (real(0, 2),)), t), "step-invariant"), FLOAT64)
    assert stored.integral == (float(t**2 / 2), float(t**2))
    assert stored.sections == ()
    assert stored.structure == "direct"


def test_the_rest_of_a_controller_with_one_integrator_is_its_proportional_gain() -> None:
    # Forward difference of 5 + 7/s: 5 + 7 T/(z - 1).
    g, period_s = DESIGNS["proportional and integral"]
    stored = realization(pulse_of((g, period_s), "forward-difference"), FLOAT64)
    assert stored.sections == (Section((5.0,), ()),)
    assert stored.integral == (0.07,)
    # Bilinear: 5 + 7 T (z + 1)/(2 (z - 1)) = 5 + 7 T/2 + 7 T/(z - 1).
    stored = realization(pulse_of((g, period_s), "bilinear"), FLOAT64)
    assert stored.sections == (Section((5.035,), ()),)
    assert stored.integral == (0.07,)


# Structures.


def test_a_static_gain_is_one_section_of_order_zero() -> None:
    g = design("0.1", (), ())
    for name, target in FORMATS.items():
        stored = realization(pulse_of((g, Fraction(1, 10)), "bilinear"), target)
        assert (stored.structure, stored.integral, stored.period_s) == ("direct", (), Fraction(1, 10))
        assert stored.sections == (Section((target.round(Fraction(1, 10)),), ()),)
        assert stored.format.name == name
        assert stored_pulse(stored).numerator == (Fraction(stored.sections[0].b[0]),)


@pytest.mark.parametrize(("order", "sections"), [(1, 1), (2, 1)])
def test_direct_is_one_section_up_to_order_two(order: int, sections: int) -> None:
    g = design(3, (), tuple(real(-1 - k) for k in range(order)))
    stored = realization(pulse_of((g, Fraction(1, 10)), "bilinear"), FLOAT64, "direct")
    assert (stored.structure, len(stored.sections)) == ("direct", sections)
    assert len(stored.sections[0].a) == order


@pytest.mark.parametrize("order", [3, 5])
def test_direct_is_refused_above_order_two_with_the_order(order: int) -> None:
    g = design(3, (), (real(0), *(real(-1 - k) for k in range(order))))
    with pytest.raises(Refused) as refusal:
        realization(pulse_of((g, Fraction(1, 10)), "bilinear"), FLOAT64, "direct")
    assert refusal.value.where == "[target] structure"
    assert f"has order {order}" in refusal.value.found
    assert refusal.value.allowed == "direct up to order 2"


def test_integral_states_do_not_count_towards_the_order_of_direct() -> None:
    g = design(3, (), (real(0, 2), real(-1), real(-2)))
    stored = realization(pulse_of((g, Fraction(1, 10)), "bilinear"), FLOAT64, "direct")
    assert (len(stored.integral), len(stored.sections), stored.structure) == (2, 1, "direct")


def test_direct_is_refused_exactly_where_rounding_moves_a_zero_off_minus_one() -> None:
    # Bilinear of relative degree 1: g (1 + 1/z)(1 - q/z), rounded coefficient by coefficient.
    verdicts = set()
    for rate in range(20, 60):
        drawn = (design(1, (real(-3),), (pair(-1, 2),)), Fraction(1, rate))
        pulse = pulse_of(drawn, "bilinear")
        b = [FLOAT32.round(c) for c in pulse.numerator]
        kept = b[0] - b[1] + b[2] == 0
        verdicts.add(kept)
        if kept:
            assert realization(pulse, FLOAT32, "direct").sections[0].b == tuple(b)
        else:
            with pytest.raises(Refused) as refusal:
                realization(pulse, FLOAT32, "direct")
            assert refusal.value.where == "[target] structure"
            assert refusal.value.found == "direct would move the zero at z = -1 when its coefficients are rounded"
            assert "cascade" in refusal.value.advice
        assert multiplicity_at(stored_pulse(realization(pulse, FLOAT32, "cascade")).numerator, -1) == 1
    assert verdicts == {True, False}


@pytest.mark.parametrize(
    ("g", "period_s", "method", "found"),
    [
        (
            design(1, (real(0), real("-3.3")), (pair(-1, 2),)),
            Fraction(1, 23),
            "forward-difference",
            "the zero at z = 1",
        ),
        (design(1, (), (real(-100), real("-3.3"))), Fraction(1, 50), "forward-difference", "the pole at z = -1"),
    ],
)
def test_direct_is_refused_where_rounding_moves_any_fixed_root(
    g: Factored, period_s: Fraction, method: str, found: str
) -> None:
    # Gains for which the sum that should vanish does not; there are some among these.
    refusals = []
    for k in range(1, 40):
        pulse = pulse_of(
            (g._replace(gain=Fraction(k, 7)), period_s * Fraction(k + 60, 61 if "zero" in found else k + 60)), method
        )
        try:
            realization(pulse, FLOAT32, "direct")
        except Refused as refusal:
            refusals.append(refusal.found)
    assert refusals
    assert set(refusals) == {f"direct would move {found} when its coefficients are rounded"}


@pytest.mark.parametrize("method", ["bilinear", "bilinear-prewarped", "pole-zero-mapped"])
def test_complex_poles_with_a_zero_at_minus_one_and_a_free_one_are_parted(method: str) -> None:
    pulse = pulse_of(DESIGNS["complex poles, one finite zero"], method)
    for target in FORMATS.values():
        stored = realization(pulse, target)
        assert stored.structure == "cascade"
        assert sorted(len(section.a) for section in stored.sections) == [1, 2]
        (first,) = [s for s in stored.sections if len(s.a) == 1]
        (second,) = [s for s in stored.sections if len(s.a) == 2]
        assert first.a == (0.0,)
        # The zero at -1 alone, and exactly: b0 = b1.
        assert second.b == (second.b[0], second.b[0], 0.0)
        back = stored_pulse(stored)
        # The pole of the first and the zero of the second at the origin are one common delay, and dropped.
        assert len(back.denominator) == 3
        assert sum(pole.count for pole in back.poles) == 2
        assert multiplicity_at(back.numerator, -1) == 1


def test_complex_zeros_over_real_poles_join_as_many_poles_as_they_need() -> None:
    pulse = pulse_of(DESIGNS["complex zeros over real poles"], "step-invariant")
    stored = realization(pulse, FLOAT64)
    assert sorted(len(section.a) for section in stored.sections) == [1, 2]
    pulse = pulse_of(DESIGNS["two pairs of zeros over three real poles and a pair"], "pole-zero-mapped")
    stored = realization(pulse, FLOAT64)
    assert sorted(len(section.a) for section in stored.sections) == [1, 2, 2]


@pytest.mark.parametrize(
    ("method", "delays"), [("forward-difference", 3), ("step-invariant", 1), ("impulse-invariant", 1), ("bilinear", 0)]
)
def test_delays_are_those_of_the_method(method: str, delays: int) -> None:
    g = design(1, (), (real(-1), real(-2), real(-3)))
    pulse = pulse_of((g, Fraction(1, 5)), method)
    for target in FORMATS.values():
        stored = realization(pulse, target)
        assert sum(s.b.index(next(c for c in s.b if c)) for s in stored.sections) == delays
        back = stored_pulse(stored)
        assert back.numerator[:delays] == (0,) * delays
        assert back.numerator[delays] != 0


@pytest.mark.parametrize("method", METHODS)
def test_the_same_pulse_transfer_function_gives_the_same_sections_in_the_same_order(method: str) -> None:
    drawn = DESIGNS["fifth order"]
    first = realization(pulse_of(drawn, method), FLOAT32)
    isolate.cache_clear()
    g, period_s = drawn
    again = g._replace(zeros=g.zeros[::-1], poles=g.poles[::-1])
    assert realization(pulse_of((again, period_s), method), FLOAT32) == first


def test_every_section_but_the_first_has_a_peak_near_one() -> None:
    # Powers of two reach a factor of sqrt(2) either way of what they scale, and the peak is taken at z = 1, z = -1
    # and the resonance; with zeros elsewhere it may be a little higher in between.
    for drawn in DESIGNS.values():
        for method in ("step-invariant", "bilinear"):
            for section in realization(pulse_of(drawn, method), FLOAT64).sections[1:]:
                circle = np.exp(1j * np.linspace(0, np.pi, 4001))
                b, a = (np.polyval(p, circle) for p in (section.b, (1.0, *section.a)))
                gains = np.abs(b[np.abs(a) > 1e-9] / a[np.abs(a) > 1e-9])
                assert 0.5 < gains.max() < 2 or np.abs(a).min() < 1e-9


@given(st.sampled_from(sorted(DESIGNS)), st.sampled_from(tuple(METHODS)))
@settings(max_examples=20)
def test_stability_of_the_stored_sections_follows_from_their_own_roots(name: str, method: str) -> None:
    # The pulse transfer function of the stored numbers has the roots of the stored sections.
    stored = realization(pulse_of(DESIGNS[name], method), FLOAT32)
    back = stored_pulse(stored)
    with mp.workdps(60):
        for pole in back.poles:
            re, im, _ = pole.enclosure(300)
            z = mp.mpc(re, im) / mp.mpf(2) ** 300 + 1
            nearest = min((abs(evaluated(s, z)) for s in stored.sections), default=mp.mpf(1))
            assert nearest < mp.mpf(10) ** -50 or pole.value == 0


def evaluated(section: AnySection, z: Any) -> Any:
    value = mp.mpc(0)
    for c in (1.0, *section.a):
        value = value * z + mp.mpf(c)
    return value


def test_a_coefficient_beyond_float32_is_refused() -> None:
    g = design(10**6, (), (real(-1),))._replace(gain=Fraction(10) ** 50)
    pulse = pulse_of((g, Fraction(1, 10)), "bilinear")
    assert realization(pulse, FLOAT64).sections
    with pytest.raises(Refused, match="beyond the largest float32"):
        realization(pulse, FLOAT32)
