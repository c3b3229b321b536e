"""Worst-case peak gains: closed forms, 100-digit sums, and the input that attains them."""

from __future__ import annotations

from fractions import Fraction
from math import prod
from time import process_time

import mpmath
import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.arithmetic.lattice import lattice_of
from realize.arithmetic.peak_gain import DEFAULT_WIDTH, PeakGain, attaining_input, peak_gain
from realize.arithmetic.state_space import (
    PulseRatio,
    in_parallel,
    in_series,
    paths,
    probed,
    pulse_ratio,
    scaled,
    section_ratio,
)
from realize.errors import RealizeError, Refused

#: Digits of the independent values; perturbing a coefficient in the last of them changes nothing that is tested.
DIGITS = 100
NARROW = Fraction(1, 1 << 50)

Recursion = tuple[tuple[Fraction, ...], tuple[Fraction, ...]]


def exact(value: object) -> Fraction:
    """An mpmath number as a rational."""
    sign, mantissa, exponent, _ = mpmath.mpf(value)._mpf_
    size = Fraction(int(mantissa)) * Fraction(2) ** int(exponent)
    return -size if sign else size


def pair(radius: Fraction, angle: object) -> poly.Rationals:
    """``z^2 - 2 r cos(th) z + r^2``."""
    with mpmath.workdps(DIGITS):
        return Fraction(1), -2 * radius * exact(mpmath.cos(angle)), radius * radius


def all_pole(denominator: poly.Rationals) -> PulseRatio:
    return pulse_ratio((1, *(0,) * poly.degree(denominator)), denominator)


def turning_pair(radius: Fraction, half_turn: int) -> tuple[PulseRatio, Fraction]:
    """A pair that changes its sign every ``half_turn`` samples exactly, and its peak gain in closed form."""
    with mpmath.workdps(DIGITS):
        bottom = pair(radius, mpmath.pi / half_turn)
        r = mpmath.mpf(radius.numerator) / radius.denominator
        below = 1 - 2 * r * mpmath.cos(mpmath.pi / half_turn) + r * r
        return all_pole(bottom), exact((1 + r**half_turn) / ((1 - r**half_turn) * below))


def assert_holds(gain: PeakGain, value: Fraction, width: Fraction = DEFAULT_WIDTH) -> None:
    assert gain.high is not None
    assert gain.width_reached is not None
    assert gain.low <= value <= gain.high
    assert gain.width_reached <= width


def direct_sum(ratio: PulseRatio, count: int) -> Fraction:
    """Sum of the first terms by the recursion in 100 digits, apart from the project."""
    with mpmath.workdps(DIGITS):
        top, bottom = ([mpmath.mpf(c.numerator) / c.denominator for c in p] for p in ratio)
        forward = [mpmath.mpf(0)] * (len(bottom) - len(top)) + top
        last = [mpmath.mpf(0)] * (len(bottom) - 1)
        total = mpmath.mpf(0)
        for k in range(count):
            h = (forward[k] if k < len(forward) else 0) - sum(a * y for a, y in zip(bottom[1:], last, strict=True))
            last = [h, *last][: len(last)]
            total += abs(h)
        return exact(total)


def fractions(low: int, high: int, denominator: int) -> st.SearchStrategy[Fraction]:
    return st.integers(low * denominator, high * denominator).map(lambda n: Fraction(n, denominator))


@st.composite
def denominators(draw: st.DrawFn, radius: Fraction, most: int = 4) -> poly.Rationals:
    """Real poles and pairs within a radius, repeated ones and those at 0 among them."""
    p: poly.Rationals = (Fraction(1),)
    while len(p) < 2 or (len(p) <= most and draw(st.booleans())):
        size = radius * draw(fractions(-1, 1, 8))
        if draw(st.booleans()):
            p = poly.multiply(p, (Fraction(1), -size))
        else:
            p = poly.multiply(p, (Fraction(1), 2 * size * draw(fractions(-1, 1, 16)), size * size))
    return p


@st.composite
def ratios(draw: st.DrawFn, radius: Fraction = Fraction(7, 8), most: int = 4) -> PulseRatio:
    bottom = draw(denominators(radius, most))
    top = draw(st.lists(fractions(-2, 2, 16), min_size=1, max_size=len(bottom)))
    return pulse_ratio(top, bottom)


@pytest.mark.parametrize("a", ["0", "1/2", "-1/2", "9/10", "-99/100", "999999/1000000"])
def test_one_pole_has_one_over_one_less_its_size(a: str) -> None:
    """Geometric series."""
    assert_holds(peak_gain(section_ratio((1,), (-Fraction(a),))), 1 / (1 - abs(Fraction(a))))


@pytest.mark.parametrize(
    ("angle", "value"),
    [(lambda: mpmath.pi / 4, "8.9642111257"), (lambda: mpmath.mpf("0.7"), "10.2806396365")],
    ids=["quarter of a half turn", "0.7 rad"],
)
def test_pair_of_radius_nine_tenths_has_the_worked_value(angle: object, value: str) -> None:
    """Derived from the closed form and by summation, to ten digits; no published source."""
    assert callable(angle)
    with mpmath.workdps(DIGITS):
        gain = peak_gain(all_pole(pair(Fraction(9, 10), angle())), NARROW)
    assert gain.high is not None
    assert abs(gain.low - Fraction(value)) <= Fraction(1, 2 * 10**10)
    assert abs(gain.high - Fraction(value)) <= Fraction(1, 2 * 10**10)


@pytest.mark.parametrize("half_turn", [2, 3, 4, 7, 200, 30011])
@pytest.mark.parametrize("gap", [1, 2, 3, 4, 5, 6])
def test_turning_pair_has_its_closed_form_however_slow(gap: int, half_turn: int) -> None:
    """Half turns repeat the first one by ``r^m``: ``(1 + r^m)/((1 - r^m)(1 - 2 r cos th + r^2))``."""
    ratio, value = turning_pair(1 - Fraction(1, 10**gap), half_turn)
    assert_holds(peak_gain(ratio), value)


@pytest.mark.parametrize("gap", [8, 9, 12])
def test_hardly_damped_pair_beyond_reach_is_still_enclosed(gap: int) -> None:
    """An incommensurate angle: for ``r -> 1`` the mean of ``|cos|``, ``2/pi``, over ``sin th (1 - r)``, to O(1 - r)."""
    radius, angle = 1 - Fraction(1, 10**gap), mpmath.mpf("0.7")
    gain = peak_gain(all_pole(pair(radius, angle)))
    limit = exact(2 / mpmath.pi / mpmath.sin(angle)) / (1 - radius)
    assert_holds(gain, limit, Fraction(9, 20))


@given(ratios(), st.integers(3, 60))
def test_enclosure_holds_the_sum_in_100_digits(ratio: PulseRatio, bits: int) -> None:
    """700 terms: ``(7/8)^700`` is below 1e-40, times a polynomial of degree 3 at most."""
    assume(ratio.numerator)
    gain = peak_gain(ratio, Fraction(1, 1 << bits))
    value = direct_sum(ratio, 700)
    assert gain.high is not None
    assert gain.low * (1 - Fraction(1, 10**25)) <= value <= gain.high
    assert gain.high - gain.low <= gain.low / (1 << bits)


@pytest.mark.parametrize(
    "factors",
    [
        (pair(Fraction(999, 1000), "0.7"), pair(Fraction(998, 1000), "0.0123")),
        (pair(Fraction(999, 1000), "0.01"), pair(Fraction(999, 1000), "0.01")),
        (pair(Fraction(999, 1000), "2.5"), (Fraction(1), Fraction(-999, 1000)), (Fraction(1), Fraction(998, 1000))),
        ((Fraction(1), Fraction(-999, 1000)),) * 3,
    ],
    ids=["two pairs", "one pair twice", "pair and both ends", "real three times"],
)
def test_blocks_agree_with_the_terms_one_by_one(factors: tuple[poly.Rationals, ...]) -> None:
    """Slow enough for the sums over blocks, fast enough to be summed in 100 digits: 40 time constants."""
    bottom: poly.Rationals = (Fraction(1),)
    for factor in factors:
        bottom = poly.multiply(bottom, factor)
    ratio = pulse_ratio((1, Fraction(-1, 3), Fraction(1, 5)), bottom)
    assert_holds(peak_gain(ratio), direct_sum(ratio, 40_000))


@given(
    st.lists(st.tuples(st.integers(1, 9), st.integers(0, 6)), min_size=1, max_size=5),
    st.lists(st.integers(0, 5), min_size=1, max_size=3),
    st.sampled_from((1, -1)),
)
def test_response_of_one_sign_has_its_gain_at_rest(
    gaps: list[tuple[int, int]], numerator: list[int], sign: int
) -> None:
    """Positive poles and a numerator without a minus: all h >= 0, so the sum is H(1). Mirrored: H(-1)."""
    assume(any(numerator))
    poles = [1 - Fraction(digit, 10 ** (exponent + 1)) for digit, exponent in gaps]
    sections = [section_ratio((1,), (-sign * p,)) for p in poles]
    mirrored = section_ratio([b * sign**i for i, b in enumerate(numerator)], ())
    value = Fraction(sum(numerator)) / prod(1 - p for p in poles)
    assert_holds(peak_gain(in_series(mirrored, *sections)), value)


@pytest.mark.parametrize("gaps", [(12,), (12, 1), (10, 13, 13), (1, 7, 13), (15, 15)], ids=str)
def test_poles_of_all_speeds_together_are_enclosed(gaps: tuple[int, ...]) -> None:
    """All h >= 0. Double precision no longer tells every sign, so only the enclosure is claimed, not its width."""
    gain = peak_gain(in_series(*(section_ratio((1,), (Fraction(1, 10**gap) - 1,)) for gap in gaps)))
    assert gain.high is not None
    assert gain.low <= Fraction(10) ** sum(gaps) <= gain.high


def test_slow_pole_takes_milliseconds() -> None:
    """1.4e8 terms matter; the limit of a tenth of a second allows for a slow machine."""
    ratio = section_ratio((1,), (-(1 - Fraction(1, 10**7)),))
    begun = process_time()
    gain = peak_gain(ratio)
    assert process_time() - begun < 0.1
    assert_holds(gain, Fraction(10**7))


@given(ratios(), st.integers(0, 5), fractions(-4, 4, 8))
def test_delay_changes_nothing_and_a_factor_multiplies(ratio: PulseRatio, delay: int, factor: Fraction) -> None:
    assume(ratio.numerator)
    gain, other = peak_gain(ratio), peak_gain(in_series(scaled(ratio, factor), section_ratio((0,) * delay + (1,), ())))
    assert gain.high is not None
    assert other.high is not None
    assert other.low <= abs(factor) * gain.high
    assert abs(factor) * gain.low <= other.high


@given(ratios(most=2), ratios(most=2))
def test_gain_of_a_series_is_at_most_the_product(first: PulseRatio, second: PulseRatio) -> None:
    """Young's inequality for convolutions."""
    one, other, both = (peak_gain(r) for r in (first, second, in_series(first, second)))
    assert one.high is not None
    assert other.high is not None
    assert both.low <= one.high * other.high


def test_without_recursion_the_gain_is_exact() -> None:
    assert peak_gain(section_ratio((1, Fraction(-1, 3), 0, 2), ())) == PeakGain(Fraction(10, 3), Fraction(10, 3))
    assert peak_gain(in_parallel()) == PeakGain(Fraction(0), Fraction(0))


@pytest.mark.parametrize(
    ("denominator", "reason"),
    [
        (("1", "-1"), "a pole lies on the unit circle: a bounded input can make any output"),
        (("1", "1"), "a pole lies on the unit circle: a bounded input can make any output"),
        (("1", "-1.2", "1"), "a pole lies on the unit circle: a bounded input can make any output"),
        (
            ("1", "-2", "1"),
            "a pole lies outside the unit circle or repeated on it: a bounded input can make any output",
        ),
        (("1", "-1.01"), "a pole lies outside the unit circle or repeated on it: a bounded input can make any output"),
        (("1", "-0." + "9" * 30), "a pole lies within 1e-18 of the unit circle: no bound is computed"),
    ],
    ids=["at 1", "at -1", "pair on it", "twice at 1", "outside", "too near"],
)
def test_without_a_bound_the_reason_is_told(denominator: tuple[str, ...], reason: str) -> None:
    gain = peak_gain(pulse_ratio((1,), [Fraction(c) for c in denominator]))
    assert gain == PeakGain(Fraction(0), None, reason)
    assert gain.width_reached is None


def test_cancelled_pole_on_the_circle_has_a_bound() -> None:
    """``(1 - 1/z)/(1 - 1/z)`` is 1."""
    assert peak_gain(pulse_ratio((1, -1), (1, -1))) == PeakGain(Fraction(1), Fraction(1))


def driven(ratio: PulseRatio, values: tuple[int, ...]) -> list[Fraction]:
    """Response of the recursion in rationals."""
    top = (*(Fraction(0),) * (len(ratio.denominator) - len(ratio.numerator)), *ratio.numerator)
    outputs: list[Fraction] = []
    for k in range(len(values)):
        forward = sum((b * values[k - i] for i, b in enumerate(top) if i <= k), Fraction(0))
        back = sum((a * outputs[k - i] for i, a in enumerate(ratio.denominator) if 0 < i <= k), Fraction(0))
        outputs.append(forward - back)
    return outputs


@given(ratios(), st.integers(1, 40))
def test_attaining_input_reaches_the_sum_of_its_terms(ratio: PulseRatio, count: int) -> None:
    impulse = driven(ratio, (1,) + (0,) * (count - 1))
    inputs = attaining_input(ratio, count)
    assert set(inputs) <= {-1, 1}
    assert driven(ratio, inputs)[-1] == sum(map(abs, impulse))


@given(ratios(), st.lists(st.sampled_from((-1, 1)), min_size=1, max_size=40))
def test_no_input_exceeds_the_gain(ratio: PulseRatio, values: list[int]) -> None:
    high = peak_gain(ratio).high
    assert high is not None
    assert max(map(abs, driven(ratio, tuple(values)))) <= high


def test_long_attaining_input_comes_within_the_tail() -> None:
    """After 300 samples, ``0.9^300`` of the pair is left."""
    ratio, value = turning_pair(Fraction(9, 10), 3)
    assert value * (1 - Fraction(1, 10**13)) <= driven(ratio, attaining_input(ratio, 300))[-1] <= value


def test_integrating_path_has_no_attaining_input() -> None:
    with pytest.raises(Refused) as raised:
        attaining_input(section_ratio((1,), (-1,)), 5)
    assert str(raised.value) == (
        "path: a pole on or outside the unit circle\n  allowed: stable paths\n  try: take the integral states apart"
    )


@given(denominators(Fraction(7, 8)))
def test_lattice_is_a_contraction_that_makes_the_response(bottom: poly.Rationals) -> None:
    """``c M^k x`` against the recursion; the norm of ``M`` by singular values, numpy's own."""
    lattice = lattice_of(bottom)
    n = lattice.order
    M = np.array(lattice.powers[0] / (1 << 192), dtype=float)
    scale = np.sqrt(np.array([float(e) for e in lattice.energies]))
    state = scale * [float(x) for x in lattice.coordinates([Fraction(1), *(Fraction(0),) * (n - 1)])]
    reach = 1 / scale[-1]
    found = [reach * (np.linalg.matrix_power(M, k) @ state)[-1] for k in range(12)]
    assert np.allclose(found, [float(h) for h in driven(all_pole(bottom), (1,) + (0,) * 11)], atol=1e-12)
    assert np.linalg.norm(M, 2) <= 1 + 1e-14


def chain_step(sections: list[Recursion]) -> object:
    """One sample of a chain of direct form I sections: input and one rounding error each, all outputs."""

    def step(
        state: tuple[Fraction, ...], inputs: tuple[Fraction, ...]
    ) -> tuple[tuple[Fraction, ...], tuple[Fraction, ...]]:
        following: list[Fraction] = []
        outputs: list[Fraction] = []
        x, rest = inputs[0], list(state)
        for (b, a), error in zip(sections, inputs[1:], strict=True):
            xs, rest = (x, *rest[: len(b) - 1]), rest[len(b) - 1 :]
            ys, rest = rest[: len(a)], rest[len(a) :]
            y = sum(c * v for c, v in zip(b, xs, strict=True)) - sum(c * v for c, v in zip(a, ys, strict=True)) + error
            following += [*xs[: len(b) - 1], y, *ys[: len(a) - 1]]
            x = y
            outputs.append(y)
        return tuple(following), tuple(outputs)

    return step


@given(
    st.lists(
        st.tuples(st.tuples(*[fractions(-2, 2, 4)] * 3), st.tuples(*[fractions(-1, 1, 8)] * 2)), min_size=1, max_size=2
    )
)
def test_composed_paths_are_those_of_the_recursion_itself(sections: list[Recursion]) -> None:
    step = chain_step(sections)
    assert callable(step)
    found = paths(probed(step, 5 * len(sections) - len(sections), len(sections) + 1))
    ratios = [section_ratio(*section) for section in sections]
    for i, row in enumerate(found):
        assert row[0] == in_series(*ratios[: i + 1])
        # A rounding passes 1/a of its own section, even where a zero of b cancels a pole, and the sections after it.
        for j in range(i + 1):
            assert row[1 + j] == in_series(section_ratio((1,), sections[j][1]), *ratios[j + 1 : i + 1])


def test_shaped_error_has_a_zero_at_rest() -> None:
    """``(1 - 1/z)/(1 - a/z)``: 1 + (1 - a)(1 + a + a^2 + ...) = 2."""
    assert_holds(peak_gain(section_ratio((1, -1), (Fraction(-3, 4),))), Fraction(2))


@pytest.mark.parametrize(
    ("numerator", "denominator", "text"),
    [
        ((1, 0), (1,), "numerator of degree 1 over a denominator of degree 0"),
        ((1,), (0, 0), "numerator of degree 0 over a denominator of degree -1"),
    ],
    ids=["before its cause", "zero"],
)
def test_path_that_cannot_be_is_refused(numerator: tuple[int, ...], denominator: tuple[int, ...], text: str) -> None:
    with pytest.raises(RealizeError) as raised:
        pulse_ratio(numerator, denominator)
    assert str(raised.value) == (
        f"path: {text}\n  allowed: a denominator other than zero, of at least the numerator's degree\n"
        "  try: divide both by the same power of z, or delay the path"
    )


def test_recursion_with_an_offset_is_refused() -> None:
    with pytest.raises(RealizeError) as raised:
        probed(lambda x, u: ((x[0] + 1,), (x[0] + u[0],)), 1, 1)
    assert str(raised.value) == (
        "recursion: it answers zero with something else\n  allowed: a linear recursion\n  try: take the offsets out"
    )
