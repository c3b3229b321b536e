"""The bumpless start in integers: at rest where the gain says, and still there afterwards."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.arithmetic.integer import (
    STRUCTURES,
    IntegerRealization,
    IntegerRecursion,
    Interface,
    Port,
    Widths,
    integer_realization,
)
from realize.arithmetic.integer.settling import PRODUCT_BITS, settle
from realize.arithmetic.peak_gain import attaining_input
from realize.design import design_from_text
from realize.errors import Refused
from realize.methods import discretize

WIDTHS = (Widths(16, 32), Widths(16, 64), Widths(32, 64))

#: Invented: real poles, a lightly damped pair, a pair and zeros on the circle, and several of them.
STILL = {
    "lag": ("3/(0.02*s + 1)", "1 kHz"),
    "lead": ("50*(s + 5)/(s + 50)", "200 Hz"),
    "notch": ("(s^2 + 31.4*s + 98700)/(s^2 + 440*s + 98700)", "8 kHz"),
    "resonance": ("400/(s^2 + 3*s + 1600)", "500 Hz"),
    "order 4": ("2e7/((s + 10)*(s + 70)*(s^2 + 40*s + 4000))", "500 Hz"),
}
MOVING = {"pi": ("4.2 + 18/s", "2 kHz"), "pid": ("4.2 + 18/s + 0.09*s/(0.0005*s + 1)", "2 kHz")}
TWICE = ("(s + 1)*(s + 2)/s^2", "100 Hz")

#: Counts at both ends, so wide at the output that nothing clamps what the designs above make.
INPUT = Port(-9000, 12000, 700, "int16", Fraction(1, 2000))
WIDE = Port(-(1 << 28), 1 << 28, 1 << 20, "int32", Fraction(1, 5000))
NARROW = Port(-4200, 3000, 5000, "uint16", Fraction(1, 4200))


def realized(
    text: tuple[str, str], structure: str, widths: Widths, output: Port, hold: bool = True
) -> IntegerRealization:
    design = design_from_text(f'[design]\ntransfer = "{text[0]}"\n[sampling]\nrate = "{text[1]}"\n', "invented")
    assert design.period_s is not None
    pulse = discretize(design.transfer, design.period_s, "bilinear").pulse
    return integer_realization(pulse, Interface(INPUT, output), widths, structure)


def all_realized(texts: dict[str, tuple[str, str]], output: Port) -> dict[str, IntegerRealization]:
    found = {}
    for name, text in texts.items():
        for structure in STRUCTURES:
            for widths in WIDTHS:
                try:
                    made = realized(text, structure, widths, output)
                except Refused:
                    continue
                found[f"{name} {structure} {widths.bits}/{widths.accumulator_bits}"] = made
    return found


AT_REST = all_realized(STILL, WIDE)
INTEGRATING = all_realized(MOVING, NARROW)


def gain_at_rest(stored: IntegerRealization) -> Fraction:
    """Of the stored sections, from their coefficients, in counts."""
    gains = [sum(b, Fraction(0)) / (1 + sum(a, Fraction(0))) for b, a in stored.sections]
    if stored.layout.parallel:
        return stored.direct_gain + sum(gains, Fraction(0))
    product = Fraction(1)
    for gain in gains:
        product *= gain
    return product


@pytest.mark.parametrize("name", AT_REST)
def test_output_stays_within_the_proven_error_of_the_gain_at_rest(name: str) -> None:
    stored = AT_REST[name]
    model, gain = IntegerRecursion(stored.program, checked=True), gain_at_rest(stored)
    for x in (INPUT.low, -1, 0, 1, 4321, INPUT.high):
        model.preset(x + INPUT.offset, WIDE.offset)
        answers = [y - WIDE.offset for y in model.run([x + INPUT.offset] * 150)]
        assert max(abs(y - gain * x) for y in answers) <= stored.proof.output_error


@pytest.mark.parametrize("name", AT_REST)
def test_possible_is_the_output_at_rest_alone(name: str) -> None:
    model = IntegerRecursion(AT_REST[name].program)
    for x in (INPUT.offset, INPUT.high + INPUT.offset, INPUT.offset - 333):
        model.preset(x, 0)
        rest = model.output(x)
        assert [model.preset(x, rest + d) for d in (-1, 0, 1)] == [False, True, False]
        assert model.output(x) == rest


@pytest.mark.parametrize("name", INTEGRATING)
@given(wanted=st.integers(NARROW.low, NARROW.high))
def test_any_output_is_held_at_input_zero_without_an_end(name: str, wanted: int) -> None:
    model = IntegerRecursion(INTEGRATING[name].program, checked=True)
    assert model.preset(INPUT.offset, wanted + NARROW.offset)
    assert set(model.run([INPUT.offset] * 50)) == {wanted + NARROW.offset}


@pytest.mark.parametrize("name", INTEGRATING)
@given(x=st.integers(-500, 700), wanted=st.integers(NARROW.low, NARROW.high))
def test_next_output_is_the_one_asked_for_at_any_input(name: str, x: int, wanted: int) -> None:
    model = IntegerRecursion(INTEGRATING[name].program, checked=True)
    assert model.preset(x + INPUT.offset, wanted + NARROW.offset) == (x == 0)
    assert model.output(x + INPUT.offset) == wanted + NARROW.offset


@pytest.mark.parametrize("name", INTEGRATING)
def test_output_beyond_the_limit_counts_as_the_limit_and_is_not_possible(name: str) -> None:
    model = IntegerRecursion(INTEGRATING[name].program)
    for beyond, limit in ((0, NARROW.low), (65535, NARROW.high)):
        assert not model.preset(INPUT.offset, beyond)
        assert model.output(INPUT.offset) == limit + NARROW.offset


def test_upper_integral_states_keep_the_first_still() -> None:
    model = IntegerRecursion(realized(TWICE, "cascade", WIDTHS[0], NARROW).program, checked=True)
    program = model.program
    assert program.integral is not None
    model.preset(INPUT.offset + 12, NARROW.offset + 100)
    assert model.state.integral2 == -program.integral.stored[0] * 12
    first = model.state.integral1
    model.update(INPUT.offset + 12)
    assert model.state.integral1 == first
    assert not model.preset(INPUT.offset + 12, NARROW.offset + 100)
    assert model.preset(INPUT.offset, NARROW.offset + 100)
    assert model.state.integral2 == 0


@pytest.mark.parametrize("name", [*AT_REST, *INTEGRATING])
def test_nothing_overflows_after_a_start_from_an_extreme(name: str) -> None:
    """Measured: the proofs begin at a cleared state. The attaining input drives on from rest at either end."""
    stored = AT_REST.get(name) or INTEGRATING[name]
    ends = {-1: INPUT.low + INPUT.offset, 1: INPUT.high + INPUT.offset}
    for sign in (-1, 1):
        drive = [ends[sign * s] for s in attaining_input(stored.proof.transfer, 80)]
        for start in ends.values():
            model = IntegerRecursion(stored.program, checked=True)
            model.preset(start, NARROW.offset)
            model.run(drive)


@pytest.mark.parametrize("name", [*AT_REST, *INTEGRATING])
def test_gains_are_rounded_once_and_their_products_fit(name: str) -> None:
    stored = AT_REST.get(name) or INTEGRATING[name]
    for section in settle(stored.program).sections:
        for gain in section.gains:
            assert abs(gain.mantissa).bit_length() >= 31
            largest = INPUT.reach if gain.variable == "input" else 1 << stored.program.words[gain.variable].bits - 1
            rounding = 1 << gain.shift - 1 if gain.shift > 0 else 0
            assert abs(gain.mantissa) * largest + rounding < 1 << PRODUCT_BITS - 1


def test_section_at_rest_is_its_gain_rounded_to_nearest() -> None:
    stored = realized(STILL["lag"], "cascade", WIDTHS[2], WIDE)
    (section,) = settle(stored.program).sections
    b, a = stored.sections[0]
    exact = sum(b, Fraction(0)) / (1 + sum(a, Fraction(0)))
    point = stored.program.words["section1_output"].fraction_bits
    model = IntegerRecursion(stored.program)
    for x in range(-40, 41):
        model.preset(x + INPUT.offset, 0)
        wanted = exact * x * Fraction(2) ** point
        assert abs(model.state.section1_output_1 - wanted) <= Fraction(1, 2) + Fraction(abs(x), 1 << 30)
    assert section.gains[0].name == "section1_gain"


@pytest.mark.parametrize("name", [*AT_REST, *INTEGRATING])
def test_asking_for_the_output_moves_nothing(name: str) -> None:
    stored = AT_REST.get(name) or INTEGRATING[name]
    model = IntegerRecursion(stored.program)
    model.run([INPUT.offset + 77 * k for k in range(-30, 30)])
    before = dict(vars(model.state))
    assert model.output(INPUT.offset + 5) == model.output(INPUT.offset + 5)
    assert vars(model.state) == before
