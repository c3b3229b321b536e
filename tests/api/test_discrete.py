"""``realize.discretize``: the same from arrays and text, and a step and a response that other roads confirm."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import Any

import html5lib
import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import signal

from realize import PulseTransferFunction, RealizeError, Refused, TransferFunction, discretize
from realize.algebra.expression import format_transfer
from realize.algebra.rounding import FLOAT64
from realize.methods import METHODS, coefficients
from realize.methods import discretize as by_method
from tests.strategies import Factored, sampled_designs

#: Half a unit in the last place of a double, relative.
U = 2.0**-53

#: Poles of every kind that a step can be followed along for some samples.
FOLLOWED = ("slow", "ordinary", "damped", "light", "undamped", "origin")

methods = st.sampled_from(("bilinear", "step-invariant", "backward-difference", "impulse-invariant"))


def made(drawn: tuple[Factored, Fraction], method: str) -> PulseTransferFunction:
    return PulseTransferFunction(by_method(drawn[0].transfer(), drawn[1], method))


@given(sampled_designs(4), methods)
def test_arrays_text_and_objects_make_the_same(drawn: tuple[Factored, Fraction], method: str) -> None:
    exact, period_s = drawn[0].transfer(), drawn[1]
    arrays = np.array([*map(str, exact.numerator)]), np.array([*map(str, exact.denominator)])
    transfer = TransferFunction(*arrays)
    found = [
        discretize(arrays, period_s=period_s, method=method),
        discretize(transfer, rate_hz=1 / period_s, method=method),
        discretize(format_transfer(exact.numerator, exact.denominator), period=f"{period_s} s", method=method),
    ]
    above, below = coefficients(exact, period_s, method, FLOAT64)
    for each in found:
        assert (each.numerator.tolist(), each.denominator.tolist()) == (list(above), list(below))
        assert (each.period_s, each.rate_hz, each.method) == (period_s, 1 / period_s, method)


def test_every_way_to_give_the_rate_is_the_same_and_exact() -> None:
    found = [
        discretize("1/(s + 1)", rate="2 kHz"),
        discretize("1/(s + 1)", period="500 us"),
        discretize("1/(s + 1)", rate_hz=2000),
        discretize("1/(s + 1)", period_s=0.0005),
        discretize("1/(s + 1)", period_s=Fraction(1, 2000)),
        discretize("1/(s + 1)", rate_hz=np.float32(2e3)),
    ]
    assert {each.period_s for each in found} == {Fraction(1, 2000)}


@pytest.mark.parametrize("method", METHODS)
def test_every_published_method_is_there(method: str) -> None:
    at = "20 Hz" if method == "bilinear-prewarped" else None
    found = discretize("(s + 3)/(s^2 + 2*s + 5)", rate="100 Hz", method=method, exact_at=at)
    assert np.allclose(found.response(0.01), TransferFunction.parse("(s + 3)/(s^2 + 2*s + 5)").response(0.01), rtol=0.1)
    assert (found.denominator[0], len(found.numerator)) == (1.0, len(found.denominator))


def test_prewarping_is_exact_where_it_is_asked_to_be() -> None:
    lag = TransferFunction([1], [0.05, 1])
    by_text = discretize(lag, rate="100 Hz", method="bilinear-prewarped", exact_at="20 Hz")
    by_number = discretize(lag, rate="100 Hz", method="bilinear-prewarped", exact_at_hz=20.0)
    assert by_text.numerator.tolist() == by_number.numerator.tolist()
    assert abs(by_text.response(20) - lag.response(20)) < response_bound(by_text, 20.0) + 2 * U


# ---------------------------------------------------------------- the step


@settings(max_examples=40)
@given(sampled_designs(4, FOLLOWED), methods)
def test_the_step_is_what_scipy_filters_within_what_rounding_can_do(
    drawn: tuple[Factored, Fraction], method: str
) -> None:
    found, count = made(drawn, method), 40
    b, a = found.numerator, found.denominator
    step, filtered = found.step(count), signal.lfilter(b, a, np.ones(count))
    bounds = filter_bound(b, a, step, filtered)
    assert np.all(np.abs(step - filtered) <= bounds)


def filter_bound(b: Any, a: Any, step: Any, filtered: Any) -> Any:
    """How far a filter in doubles may be from the exact step.

    In the transposed direct form a term of ``y[k] = sum b x - sum a y`` is multiplied once and takes part in at most
    2n + 1 additions: the filter's own sequence misses the difference equation by at most ``g sum |terms|`` with
    g = (2n + 2) u/(1 - (2n + 2) u). Coefficients are within u of the exact ones, which moves the exact sequence by as
    much of its own terms. The difference of the two follows by the impulse response of 1/denominator, here exact.
    """
    n, count = len(a) - 1, len(step)
    g = (2 * n + 2) * U / (1 - (2 * n + 2) * U)
    misses = []
    for k in range(count):
        driven = sum(abs(c) for c in b[: k + 1])
        terms = [abs(a[i]) * max(abs(filtered[k - i]), abs(step[k - i])) for i in range(1, n + 1) if i <= k]
        misses.append((g + 1.01 * U) * (driven + sum(terms)))
    reach = [abs(h) for h in impulse_of_denominator(a, count)]
    # Products and sums of the bound itself are in doubles: a thousandth is far more than they lose.
    return (
        np.array([1.001 * sum(reach[j] * misses[k - j] for j in range(k + 1)) + U * abs(step[k]) for k in range(count)])
        + 1e-300
    )


def impulse_of_denominator(a: Sequence[float], count: int) -> list[float]:
    exact, found = [Fraction(float(c)) for c in a], [Fraction(1)]
    for k in range(1, count):
        found.append(-sum((exact[i] * found[k - i] for i in range(1, len(a)) if i <= k), Fraction(0)))
    return [float(h) for h in found]


@pytest.mark.parametrize("method", ["bilinear", "forward-difference", "backward-difference"])
def test_the_step_is_the_exact_difference_equation_rounded_once(method: str) -> None:
    transfer = TransferFunction.parse("(s + 3)*(s + 1/7)/(s*(s^2 + 0.2*s + 5)*(s - 0.1))")
    found, count = discretize(transfer, rate="3 Hz", method=method), 60
    pulse = by_method(transfer._exact, Fraction(1, 3), method).pulse
    samples: list[Fraction] = []
    for k in range(count):
        known = sum(
            (pulse.denominator[i] * samples[k - i] for i in range(1, len(pulse.denominator)) if i <= k), Fraction(0)
        )
        samples.append(sum(pulse.numerator[: k + 1], Fraction(0)) - known)
    assert found.step(count).tolist() == [float(y) for y in samples]


def test_a_step_is_followed_far_along_slow_poles_and_refused_beyond_every_double() -> None:
    slow = discretize("1/(1000*s + 1)^4", rate="1 kHz", method="step-invariant").step(100_000)
    # Four time constants of 1000 s are 4e6 samples: after 100 s, 1 - exp(-x)(1 + x + x^2/2 + x^3/6) at x = 0.1.
    x = mpmath.mpf("0.099999")
    wanted = float(1 - mpmath.exp(-x) * (1 + x + x**2 / 2 + x**3 / 6))
    assert slow[-1] == pytest.approx(wanted, rel=1e-14)
    growing = discretize("1/(s - 1)", rate="1 Hz", method="step-invariant")
    assert np.isfinite(growing.step(700)).all()
    with pytest.raises(RealizeError, match="grows beyond every double"):
        growing.step(2000)
    with pytest.raises(RealizeError, match="1 to 100000"):
        growing.step(0)


# ---------------------------------------------------------------- the response


def response_bound(found: PulseTransferFunction, frequency_hz: float) -> float:
    """How far the response in doubles may be from the exact one, relative.

    The angle, its sine and exponential and their product leave ``v = z - 1`` right to 8 u, a root is right to 2 u of
    its size, and a complex division to 8 u: a factor ``1 - v/r`` is off by at most 18 u |v/r|, and 2 u for the
    difference. A complex product or quotient adds 8 u, and the gain has one u.
    """
    pulse, total = found._made.pulse, 1.0
    v = np.exp(2j * np.pi * frequency_hz * float(found.period_s)) - 1
    for root in (*pulse.zeros, *pulse.poles):
        for value in (root.value, root.value.conjugate())[: 2 if root.is_pair else 1]:
            ratio = abs(v / value) if value else 0.0
            own = (18 * ratio + 2) / abs(1 - v / value) if value else 8.0
            total += root.multiplicity * (own + 8)
    # Second order, and the bound's own rounding.
    return 1.01 * total * U


@given(sampled_designs(4), methods, st.integers(1, 4999))
def test_the_response_is_the_value_on_the_circle(drawn: tuple[Factored, Fraction], method: str, share: int) -> None:
    found = made(drawn, method)
    turn = Fraction(share, 10_000)
    frequency = turn / found.period_s
    with mpmath.workdps(500):
        z = mpmath.expjpi(2 * mpmath.mpf(turn.numerator) / turn.denominator)
        above, below = (
            mpmath.polyval([mpmath.mpf(c.numerator) / c.denominator for c in reversed(p)], z, asc=True)
            for p in (found._made.pulse.numerator, found._made.pulse.denominator)
        )
        wanted = above / below
        got = found.response([frequency])[0]
        assert abs(got - wanted) <= response_bound(found, float(frequency)) * abs(wanted)


@given(sampled_designs(3, ("ordinary", "damped"), ("ordinary", "damped")), st.integers(100, 4900))
def test_scipy_finds_the_same_response_where_its_polynomials_keep_their_digits(
    drawn: tuple[Factored, Fraction], share: int
) -> None:
    found = made(drawn, "bilinear")
    b, a = found.numerator, found.denominator
    frequency = share / 10_000 * float(found.rate_hz)
    _, (theirs,) = signal.freqz(b, a, [frequency], fs=float(found.rate_hz))
    # Coefficients are off by u, the point and its powers by 8 n u, and Horner's rule by 2 n u of the sum of sizes.
    z = np.exp(2j * np.pi * share / 10_000)
    loose = sum(np.abs(p).sum() / abs(np.polyval(p, z)) for p in (b, a)) * (10 * len(a) + 2) * U
    ours = found.response(frequency)
    assert abs(ours - theirs) <= (loose + response_bound(found, frequency)) * abs(ours) * 1.01


def test_zeros_at_half_the_rate_are_zero_there_and_poles_infinite_without_a_phase() -> None:
    found = discretize("1/(s*(s + 1))", rate="10 Hz")
    assert abs(found.response([5.0, -5, 15, 105])).tolist() == [0.0] * 4
    assert np.isinf(abs(found.response([0, 10, -20]))).all()
    assert np.isnan(np.angle(found.response(0)))
    assert found.response(np.ones((2, 3))).shape == (2, 3)


# ---------------------------------------------------------------- sections


def times(p: list[Fraction], q: list[Fraction]) -> list[Fraction]:
    product = [Fraction(0)] * (len(p) + len(q) - 1)
    for i, a in enumerate(p):
        for j, b in enumerate(q):
            product[i + j] += a * b
    return product


@settings(max_examples=40)
@given(sampled_designs(6), methods)
def test_sections_multiply_to_the_whole_within_their_rounding(drawn: tuple[Factored, Fraction], method: str) -> None:
    found = made(drawn, method)
    sections = found.to_scipy_sections()
    assert sections.shape[1] == 6
    assert np.all(sections[:, 3] == 1)
    pulse = found._made.pulse
    for columns, exact, roots, gain in (
        (slice(0, 3), pulse.numerator, found.zeros, pulse.gain),
        (slice(3, 6), pulse.denominator, found.poles, Fraction(1)),
    ):
        product, sizes = [Fraction(1)], [abs(float(gain))]
        for row in sections[:, columns]:
            product = times(product, [Fraction(float(c)) for c in row])
        for root in roots:
            sizes = np.convolve(sizes, [1.0, abs(root)]).tolist()
        delays = next((i for i, c in enumerate(exact) if c), 0)
        bounds = [0.0] * delays + sizes + [0.0] * len(product)
        padded = [*exact, *[Fraction(0)] * len(product)]
        # Each coefficient of a section is off by u of its own size, at most that of its terms: m sections by 1.01 m u.
        loose = 1.01 * U * (len(sections) + 1)
        for got, wanted, bound in zip(product, padded, bounds, strict=False):
            assert abs(got - wanted) <= Fraction(loose * bound) + Fraction(1, 1 << 1000)


def test_sections_filter_as_scipy_filters_them() -> None:
    # Bilinear at T = 1 maps s = -2/3, -6/5 and -14/9 to z = 1/2, 1/4 and 1/8, and a pair to z = 1/2 +- j/2: with the
    # gain below every coefficient is a short binary number, and some samples of a filter are exact in doubles.
    roots = [Fraction(-2, 3), Fraction(-6, 5)]
    pair = 2 * (complex(0.5, 0.5) - 1) / (complex(0.5, 0.5) + 1)
    quadratic = [Fraction(round(c * 5), 5) for c in (1, -2 * pair.real, abs(pair) ** 2)]
    gain = Fraction(8, 3) * Fraction(16, 5) * (4 + 2 * quadratic[1] + quadratic[2]) / (Fraction(32, 9) * 4 * 2)
    shape = TransferFunction.from_roots([Fraction(-14, 9), Fraction(0)], roots, gain) / TransferFunction(quadratic)
    found = discretize(shape, rate="1 Hz")
    sections = found.to_scipy_sections()
    assert len(sections) == 3
    step = signal.sosfilt(sections, np.ones(10))
    assert step.tolist() == found.step(10).tolist()
    assert step.tolist() == signal.lfilter(found.numerator, found.denominator, np.ones(10)).tolist()


def test_an_integral_stays_in_the_sections_and_a_gain_is_one() -> None:
    integral = discretize("(s + 1)/s^2", rate="4 Hz").to_scipy_sections()
    # s = 8 (z - 1)/(z + 1) makes it (9 z - 7)(z + 1)/(64 (z - 1)^2).
    assert integral.tolist() == [[9 / 64, -7 / 64, 0.0, 1.0, -1.0, 0.0], [1.0, 1.0, 0.0, 1.0, -1.0, 0.0]]
    assert discretize("5", rate="4 Hz").to_scipy_sections().tolist() == [[5.0, 0.0, 0.0, 1.0, 0.0, 0.0]]


# ---------------------------------------------------------------- text and refusals


def test_it_prints_and_shows_to_five_digits() -> None:
    found = discretize("1/(0.05*s + 1)", rate="2 kHz")
    assert str(found) == "(0.0049751*z + 0.0049751)/(z - 0.99005), bilinear at 2 kHz (coefficients rounded)"
    assert str(discretize("1/s", rate="10 Hz")) == "(0.05*z + 0.05)/(z - 1), bilinear at 10 Hz"
    assert repr(found) == f"<PulseTransferFunction {found}>"
    root = html5lib.HTMLParser(strict=True).parseFragment(found._repr_html_())
    assert "bilinear at 2 kHz" in "".join(root.itertext())


@pytest.mark.parametrize(
    ("make", "where", "found"),
    [
        (lambda: discretize("1/s"), "rate", "no sample rate"),
        (lambda: discretize("1/s", rate=2000), "rate", "2000, which has no unit"),  # type: ignore[arg-type]
        (lambda: discretize("1/s", rate="2000"), "rate", '"2000" without a unit'),
        (lambda: discretize("1/s", rate="2 ms"), "rate", 'the unit "ms", which belongs to a time'),
        (lambda: discretize("1/s", rate_hz=-2.5), "rate", '"-2.5 Hz"'),
        (lambda: discretize("1/s", rate_hz=float("inf")), "rate_hz", "inf, which is no finite number"),
        (lambda: discretize("1/s", rate="1 Hz", rate_hz=1), "rate", "rate and rate_hz at once"),
        (lambda: discretize("1/s", rate="1 Hz", period_s=1), "rate", "rate= and period= at once"),
        (lambda: discretize("1/s", rate="1 Hz", method="auto"), "method", '"auto"'),
        (
            lambda: discretize("1/s", rate="1 Hz", method="frequency-fit"),
            "method",
            '"frequency-fit", which needs the loop',
        ),
        (lambda: discretize("1/s", rate="1 Hz", exact_at_hz=1), "exact_at", "a frequency with bilinear"),
        (lambda: discretize("1/s", rate="1 Hz", method="bilinear-prewarped"), "exact_at", "no frequency"),
        (lambda: discretize(5, rate="1 Hz"), "transfer", "an object of type int"),  # type: ignore[arg-type]
        (lambda: discretize("gap.toml", rate="1 Hz"), "transfer", "the name of a design file"),
        (lambda: discretize("1/t", rate="1 Hz"), "TransferFunction.parse, column 3", 'the unknown name "t"'),
    ],
)
def test_what_cannot_be_is_refused_by_its_keyword(make: Callable[[], object], where: str, found: str) -> None:
    with pytest.raises(RealizeError) as refusal:
        make()
    assert (refusal.value.where, refusal.value.found) == (where, found)
    assert "--" not in str(refusal.value)


def test_the_improper_is_refused() -> None:
    with pytest.raises(Refused, match="it is improper"):
        discretize("s", rate="1 Hz")
