from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import copysign, inf, ldexp, nextafter

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.algebra.enclosure import Enclosure, Unresolved, integers
from realize.algebra.rounding import FLOAT32, FLOAT64, MOST_BITS, FloatFormat, correctly_rounded
from realize.errors import Refused

FORMATS = st.sampled_from((FLOAT32, FLOAT64))

#: Ratios over the whole range of float64 and beyond its small end.
ratios = st.builds(
    lambda n, d, e: Fraction(n, d) * Fraction(2) ** e,
    st.integers(-(2**130), 2**130),
    st.integers(1, 2**130),
    st.integers(-1200, 700),
)

#: Numbers that float32 can hold or nearly hold, subnormals and halfway cases included.
small_dyadics = st.builds(
    lambda n, e: Fraction(n) * Fraction(2) ** e, st.integers(-(2**27), 2**27), st.integers(-155, 90)
)


def is_plain_zero(x: float) -> bool:
    return x == 0 and copysign(1, x) == 1


@given(ratios)
def test_float64_agrees_with_the_correctly_rounded_division_of_python_integers(x: Fraction) -> None:
    assert FLOAT64.round(x) == x.numerator / x.denominator


@given(small_dyadics)
def test_float32_agrees_with_numpy_on_dyadic_numbers(x: Fraction) -> None:
    assert FLOAT32.round(x) == float(np.float32(float(x)))


@given(ratios, FORMATS)
def test_no_neighbour_is_nearer_and_a_tie_goes_to_the_even_one(x: Fraction, target: FloatFormat) -> None:
    if abs(x) >= Fraction(2) ** (target.most_exponent - 1):
        x /= Fraction(2) ** 700
    got = target.round(x)
    for direction in (inf, -inf):
        neighbour = step(got, direction, target)
        there, here = abs(Fraction(neighbour) - x), abs(Fraction(got) - x)
        assert here < there or (here == there and is_even(got, target))


def step(x: float, direction: float, target: FloatFormat) -> float:
    if target is FLOAT64:
        return nextafter(x, direction)
    return float(np.nextafter(np.float32(x), np.float32(direction)))


def is_even(x: float, target: FloatFormat) -> bool:
    bits = np.float32(x).view(np.uint32) if target is FLOAT32 else np.float64(x).view(np.uint64)
    return int(bits) % 2 == 0


@given(ratios, FORMATS)
def test_negation_changes_the_sign_only_and_zero_has_none(x: Fraction, target: FloatFormat) -> None:
    x = x / Fraction(2) ** 800 if abs(x) > 2**120 else x
    assert target.round(-x) == -target.round(x)
    assert target.round(x) or is_plain_zero(target.round(x))
    assert target.round(-x) or is_plain_zero(target.round(-x))


def test_float32_is_rounded_from_the_exact_value_and_not_through_float64() -> None:
    # Just above halfway between 1 and 1 + 2**-23: float64 forgets by how much and lands on the tie.
    x = 1 + Fraction(1, 2**24) + Fraction(1, 2**60)
    assert FLOAT32.round(Fraction(FLOAT64.round(x))) == 1.0
    assert FLOAT32.round(x) == 1 + 2**-23


@pytest.mark.parametrize(
    ("target", "x", "expected"),
    [
        (FLOAT64, Fraction(9007199254740993), 9007199254740992.0),
        (FLOAT64, Fraction(9007199254740995), 9007199254740996.0),
        (FLOAT64, Fraction(-9007199254740995), -9007199254740996.0),
        (FLOAT64, Fraction(1, 2**1075), 0.0),
        (FLOAT64, Fraction(-1, 2**1075), 0.0),
        (FLOAT64, Fraction(1, 2**1075) + Fraction(1, 2**3000), 5e-324),
        (FLOAT64, Fraction(3, 2**1075), 1e-323),
        (FLOAT64, Fraction(-1, 2**1074), -5e-324),
        (FLOAT64, Fraction(2**53 - 1, 2**1075), 2.0**-1022),
        (FLOAT64, Fraction(2) ** 1024 - Fraction(2) ** 971, 1.7976931348623157e308),
        (FLOAT64, Fraction(2) ** 1024 - Fraction(2) ** 970 - 1, 1.7976931348623157e308),
        (FLOAT32, Fraction(2**24 + 1), 2.0**24),
        (FLOAT32, Fraction(2**24 + 3), 2.0**24 + 4),
        (FLOAT32, Fraction(1, 2**150), 0.0),
        (FLOAT32, Fraction(3, 2**150), 2.0**-148),
        (FLOAT32, Fraction(1, 2**150) + Fraction(1, 2**900), 2.0**-149),
        (FLOAT32, Fraction(2**24 - 1, 2**150), 2.0**-126),
        (FLOAT32, Fraction(2) ** 128 - Fraction(2) ** 103 - 1, float(np.finfo(np.float32).max)),
        (FLOAT32, Fraction(1, 10), float(np.float32(0.1))),
    ],
)
def test_edges_of_the_formats_round_half_to_even(target: FloatFormat, x: Fraction, expected: float) -> None:
    assert target.round(x) == expected
    assert expected or is_plain_zero(target.round(x))


@pytest.mark.parametrize(
    ("target", "least"),
    [
        (FLOAT64, Fraction(2) ** 1024 - Fraction(2) ** 970),
        (FLOAT32, Fraction(2) ** 128 - Fraction(2) ** 103),
    ],
)
@pytest.mark.parametrize("sign", [1, -1])
def test_what_would_round_to_infinity_is_refused_with_the_format_and_its_limit(
    target: FloatFormat, least: Fraction, sign: int
) -> None:
    for x in (least, least * 3, least**5):
        with pytest.raises(Refused) as refusal:
            target.round(sign * x)
        assert refusal.value.where == "coefficient"
        assert f"beyond the largest {target.name}" in refusal.value.found
        assert refusal.value.allowed == f"values below 2^{target.most_exponent}"


class Recorder:
    """An enclosure of known numbers that is off by as much as it says, and remembers the bits asked for."""

    def __init__(self, truth: list[Fraction], offset: int, growth_bits: int = 0, unresolved: int = 0) -> None:
        self.truth, self.offset, self.growth_bits, self.unresolved = truth, offset, growth_bits, unresolved
        self.asked: list[int] = []

    def __call__(self, bits: int) -> Enclosure:
        self.asked.append(bits)
        if len(self.asked) <= self.unresolved:
            raise Unresolved
        wide = 1 << self.growth_bits
        mid = [(x.numerator << bits) // x.denominator + self.offset * wide for x in self.truth]
        rad = [(abs(self.offset) + 1) * wide] * len(mid)
        return Enclosure(integers(mid), integers(rad), bits)


@given(
    st.lists(st.fractions(-1000, 1000), min_size=1, max_size=4),
    st.integers(-5, 5),
    st.integers(0, 2500),
    FORMATS,
)
@example([Fraction(1)], 1, 1700, FLOAT64)
@example([Fraction(1), Fraction(-1, 3)], -1, 400, FLOAT32)
def test_a_vector_is_rounded_like_its_exact_entries_however_wide_the_first_enclosures(
    truth: list[Fraction], offset: int, growth_bits: int, target: FloatFormat
) -> None:
    recorder = Recorder(truth, offset, growth_bits)
    assert correctly_rounded(recorder, target) == tuple(target.round(x) for x in truth)
    assert recorder.asked == sorted(set(recorder.asked))
    assert recorder.asked[-1] <= MOST_BITS


@given(
    st.integers(2**52, 2**53 - 1),
    st.integers(-1000, 900),
    st.sampled_from((-1, 0, 1)),
    st.integers(200, 3900),
    st.integers(-3, 3),
)
def test_a_value_next_to_a_tie_goes_to_its_side_and_the_tie_itself_to_even(
    significand: int, exponent: int, side: int, depth: int, offset: int
) -> None:
    unit = Fraction(2) ** exponent
    # Only what stands within the bits that are ever looked at can decide.
    distance = unit / 2**depth if exponent - depth > 50 - MOST_BITS else Fraction(0)
    tie = (Fraction(significand) + Fraction(1, 2)) * unit
    down, up = (ldexp(n, exponent) for n in (significand, significand + 1))
    side = side if distance else 0
    expected = {-1: down, 1: up, 0: down if significand % 2 == 0 else up}[side]
    assert correctly_rounded(Recorder([tie + side * distance], offset), FLOAT64) == (expected,)
    assert correctly_rounded(Recorder([-tie - side * distance], offset), FLOAT64) == (-expected,)


@pytest.mark.parametrize("sign", [1, -1])
def test_a_tie_at_a_power_of_two_goes_to_the_power_of_two(sign: int) -> None:
    below = sign * (2 - Fraction(1, 2**53))
    assert correctly_rounded(Recorder([below], 2), FLOAT64) == (sign * 2.0,)
    assert correctly_rounded(Recorder([sign * (2 - Fraction(1, 2**24))], 2), FLOAT32) == (sign * 2.0,)


@pytest.mark.parametrize("target", [FLOAT32, FLOAT64])
def test_what_cannot_be_told_from_zero_is_plain_zero(target: FloatFormat) -> None:
    for offset in (-1, 0, 1):
        assert is_plain_zero(correctly_rounded(Recorder([Fraction(0)], offset), target)[0])


def test_a_tiny_true_value_is_not_taken_for_zero() -> None:
    x = Fraction(68, 10**74)
    assert correctly_rounded(Recorder([x], 3), FLOAT64) == (6.8e-73,)
    assert correctly_rounded(Recorder([Fraction(3, 2**1074)], 1), FLOAT64) == (1.5e-323,)


def test_an_enclosure_that_is_unresolved_at_first_is_asked_again_with_more_bits() -> None:
    recorder = Recorder([Fraction(1, 3)], 0, unresolved=2)
    assert correctly_rounded(recorder, FLOAT64) == (1 / 3,)
    assert len(recorder.asked) == 3
    assert recorder.asked[1] >= 2 * recorder.asked[0]


@pytest.mark.parametrize(
    "enclose",
    [
        Recorder([Fraction(1)], 0, unresolved=1000),
        lambda bits: Enclosure(integers([1 << bits]), integers([1 << bits - 20]), bits),
        lambda bits: Enclosure(integers([0]), integers([1 << max(0, bits - 900)]), bits),
        lambda bits: Enclosure(integers([0]), integers([1 << bits + 2000]), bits),
    ],
    ids=["always unresolved", "2**-20 wide for ever", "2**-900 wide about zero", "2**2000 wide for ever"],
)
def test_what_no_permitted_precision_settles_is_an_error_and_not_a_guess(
    enclose: Callable[[int], Enclosure],
) -> None:
    with pytest.raises((Unresolved, Refused)):
        correctly_rounded(enclose, FLOAT64)


def test_a_vector_beyond_the_format_is_refused_however_it_is_enclosed() -> None:
    for offset, growth_bits in ((0, 0), (1, 100), (-3, 1500)):
        with pytest.raises(Refused, match="beyond the largest float32"):
            correctly_rounded(Recorder([Fraction(1), -(Fraction(2) ** 129)], offset, growth_bits), FLOAT32)


@pytest.mark.parametrize("sign", [1, -1])
def test_an_entry_that_cannot_fit_is_refused_at_once(sign: int) -> None:
    # Both ends of the first enclosure are beyond the format: more bits would change nothing.
    recorder = Recorder([Fraction(1, 3), sign * Fraction(10) ** 40], 1)
    with pytest.raises(Refused, match="beyond the largest float32"):
        correctly_rounded(recorder, FLOAT32)
    assert len(recorder.asked) == 1


def test_an_exact_vector_is_rounded_from_its_rationals() -> None:
    truth = [Fraction(1, 3), Fraction(-2, 7), Fraction(0), Fraction(9007199254740995)]
    once = Enclosure.exact(truth)
    assert correctly_rounded(lambda bits: once, FLOAT64) == (1 / 3, -2 / 7, 0.0, 9007199254740996.0)
