"""The responses the invariant methods keep, against closed forms of the time domain."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

import mpmath as mp
import pytest
from hypothesis import assume, given, settings

from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.methods import reference
from tests.strategies import Factored, sampled_designs

SAMPLES = 12

Response = Callable[[Any], Any]


def integral(f: Response) -> Response:
    return lambda t: mp.quad(f, [0, t]) if t else mp.mpf(0)


#: Name, numerator, denominator, feed-through, and the responses to impulse (without feed-through), step and ramp.
#: From the table of Laplace transforms of any textbook; common practice, no source.
DESIGNS: list[tuple[str, tuple[Any, ...], tuple[Any, ...], int, Response, Response, Response]] = [
    (
        "lag 2/(s + 3)",
        (2,),
        (1, 3),
        0,
        lambda t: 2 * mp.exp(-3 * t),
        lambda t: mp.mpf(2) / 3 * (1 - mp.exp(-3 * t)),
        lambda t: mp.mpf(2) / 3 * (t - (1 - mp.exp(-3 * t)) / 3),
    ),
    (
        "lead (s + 1)/(s + 4)",
        (1, 1),
        (1, 4),
        1,
        lambda t: -3 * mp.exp(-4 * t),
        lambda t: mp.mpf(1) / 4 + mp.mpf(3) / 4 * mp.exp(-4 * t),
        lambda t: t / 4 + mp.mpf(3) / 16 * (1 - mp.exp(-4 * t)),
    ),
    (
        "two integrations 6/s^2",
        (6,),
        (1, 0, 0),
        0,
        lambda t: 6 * t,
        lambda t: 3 * t**2,
        lambda t: t**3,
    ),
    (
        "proportional and integral 5 + 7/s",
        (5, 7),
        (1, 0),
        5,
        lambda t: mp.mpf(7),
        lambda t: 5 + 7 * t,
        lambda t: 5 * t + mp.mpf(7) / 2 * t**2,
    ),
    (
        "repeated pole 1/(s + 2)^2",
        (1,),
        (1, 4, 4),
        0,
        lambda t: t * mp.exp(-2 * t),
        lambda t: (1 - (1 + 2 * t) * mp.exp(-2 * t)) / 4,
        lambda t: (t - 1 + (1 + t) * mp.exp(-2 * t)) / 4,
    ),
    (
        "damped pair 25/(s^2 + 6 s + 25)",
        (25,),
        (1, 6, 25),
        0,
        lambda t: mp.mpf(25) / 4 * mp.exp(-3 * t) * mp.sin(4 * t),
        lambda t: 1 - mp.exp(-3 * t) * (mp.cos(4 * t) + mp.mpf(3) / 4 * mp.sin(4 * t)),
        lambda t: (
            t - mp.mpf(6) / 25 + mp.exp(-3 * t) * (mp.mpf(6) / 25 * mp.cos(4 * t) - mp.mpf(7) / 100 * mp.sin(4 * t))
        ),
    ),
    (
        "undamped s/(s^2 + 9)",
        (1, 0),
        (1, 0, 9),
        0,
        lambda t: mp.cos(3 * t),
        lambda t: mp.sin(3 * t) / 3,
        lambda t: (1 - mp.cos(3 * t)) / 9,
    ),
    (
        "growing 2/((s - 1)(s + 1))",
        (2,),
        (1, 0, -1),
        0,
        lambda t: 2 * mp.sinh(t),
        lambda t: 2 * mp.cosh(t) - 2,
        lambda t: 2 * mp.sinh(t) - 2 * t,
    ),
]

NAMES = [design[0] for design in DESIGNS]


def recursion(pulse: PulseTransferFunction, inputs: list[Any]) -> list[Any]:
    """``y[k] = sum b x - sum a y`` in mpmath."""
    b = [reference.number(c) for c in pulse.numerator]
    a = [reference.number(c) for c in pulse.denominator]
    outputs: list[Any] = []
    for k in range(len(inputs)):
        forward = mp.fsum(b[i] * inputs[k - i] for i in range(min(k + 1, len(b))))
        outputs.append(forward - mp.fsum(a[i] * outputs[k - i] for i in range(1, min(k + 1, len(a)))))
    return outputs


def check(obtained: list[Any], expected: list[Any]) -> None:
    for got, want in zip(obtained, expected, strict=True):
        assert abs(got - want) <= mp.mpf(10) ** -100 * (1 + abs(want))


@pytest.mark.parametrize("design", DESIGNS, ids=NAMES)
@pytest.mark.parametrize("period_s", [Fraction(1, 10), Fraction(2, 3)])
def test_the_step_invariant_step_response_is_the_continuous_one_at_the_samples(
    design: tuple[Any, ...], period_s: Fraction
) -> None:
    _, numerator, denominator, _, _, step, _ = design
    pulse = discretize(TransferFunction.from_polynomials(numerator, denominator), period_s, "step-invariant").pulse
    with mp.workdps(150):
        outputs = recursion(pulse, [mp.mpf(1)] * SAMPLES)
        check(outputs, [step(k * reference.number(period_s)) for k in range(SAMPLES)])


@pytest.mark.parametrize("design", DESIGNS, ids=NAMES)
@pytest.mark.parametrize("period_s", [Fraction(1, 10), Fraction(2, 3)])
def test_the_ramp_invariant_ramp_response_is_the_continuous_one_at_the_samples(
    design: tuple[Any, ...], period_s: Fraction
) -> None:
    _, numerator, denominator, _, _, _, ramp = design
    pulse = discretize(TransferFunction.from_polynomials(numerator, denominator), period_s, "ramp-invariant").pulse
    with mp.workdps(150):
        times = [k * reference.number(period_s) for k in range(SAMPLES)]
        check(recursion(pulse, times), [ramp(t) for t in times])


@pytest.mark.parametrize("design", DESIGNS, ids=NAMES)
@pytest.mark.parametrize("period_s", [Fraction(1, 10), Fraction(2, 3)])
def test_the_impulse_invariant_pulse_response_is_sampled_with_half_of_the_first_value(
    design: tuple[Any, ...], period_s: Fraction
) -> None:
    _, numerator, denominator, direct, impulse, _, _ = design
    pulse = discretize(TransferFunction.from_polynomials(numerator, denominator), period_s, "impulse-invariant").pulse
    with mp.workdps(150):
        t = reference.number(period_s)
        expected = [t * impulse(k * t) for k in range(SAMPLES)]
        expected[0] = direct + expected[0] / 2
        check(recursion(pulse, [mp.mpf(1)] + [mp.mpf(0)] * (SAMPLES - 1)), expected)


@pytest.mark.parametrize("design", DESIGNS, ids=NAMES)
def test_the_closed_forms_are_integrals_of_one_another(design: tuple[Any, ...]) -> None:
    # So that an error in the table cannot hide an equal one in the code.
    _, _, _, direct, impulse, step, ramp = design
    with mp.workdps(30):
        t = mp.mpf("0.7")
        assert abs(direct + integral(impulse)(t) - step(t)) < mp.mpf(10) ** -20
        assert abs(integral(step)(t) - ramp(t)) < mp.mpf(10) ** -20


@given(
    sampled_designs(8, ("slow", "ordinary", "damped", "light", "undamped", "origin", "growing"), ("ordinary", "damped"))
)
@settings(max_examples=30)
def test_the_step_response_of_any_design_is_kept_far_beyond_the_samples_it_was_made_from(
    drawn: tuple[Factored, Fraction],
) -> None:
    design, period_s = drawn
    assume(design.order > 0)
    pulse = discretize(design.transfer(), period_s, "step-invariant").pulse
    count = 2 * design.order + 6
    with mp.workdps(600):
        response = reference.responses(design, 1, period_s, count)
        for got, (want, size) in zip(recursion(pulse, [mp.mpf(1)] * count), response, strict=True):
            # 40 of the digits carried, of the largest term that cancels in the sum.
            assert abs(got - want) <= mp.mpf(10) ** -40 * size


def test_the_step_invariant_zero_of_a_fast_double_integrator_is_at_minus_one() -> None:
    pulse = discretize(TransferFunction.from_polynomials((1,), (1, 0, 0)), Fraction(1, 50), "step-invariant").pulse
    (zero,) = pulse.zeros
    assert zero.value == -2


def test_what_the_user_should_know_is_noted() -> None:
    g = TransferFunction.from_polynomials((1,), (1, 1))
    notes = {m: discretize(g, Fraction(1), m).conversion.notes for m in ("step-invariant", "impulse-invariant")}
    assert "half a period" in notes["step-invariant"][0]
    assert "low-frequency gain" in notes["impulse-invariant"][0]
