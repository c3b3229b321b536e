"""The stored integers are one thing, whichever road leads to their pulse transfer function."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.arithmetic.integer import (
    IntegerRealization,
    IntegerRecursion,
    Interface,
    Widths,
    integer_realization,
    stored_integer_pulse,
)
from realize.arithmetic.integer.program import INPUT
from realize.arithmetic.state_space import in_parallel, pulse_ratio, scaled
from tests.arithmetic.integer.designs import (
    ALL_WIDTHS,
    Drawn,
    answers_exactly,
    corner,
    cross_multiplied,
    inputs_of,
    port,
    proportional_integral,
    pulse_of,
    realizations,
    twelve_bits,
)


def of_the_proof(stored: IntegerRealization) -> tuple[poly.Rationals, poly.Rationals]:
    """The path that was proven, from running the sums on unit vectors, and the integral states; in physical units."""
    whole = stored.proof.transfer
    for i, gain in enumerate(stored.integral, 1):
        whole = in_parallel(whole, pulse_ratio((gain,), poly.power((Fraction(1), Fraction(-1)), i)))
    return scaled(whole, 1 / stored.program.interface.scale)


@settings(max_examples=30)
@given(st.one_of(realizations(integral=False), realizations(integral=True)))
def test_sections_and_proven_path_are_the_same_pulse_transfer_function(drawn: Drawn) -> None:
    pulse = stored_integer_pulse(drawn.stored)
    assert cross_multiplied((pulse.numerator, pulse.denominator), of_the_proof(drawn.stored))


@settings(max_examples=30)
@given(realizations(integral=False))
def test_a_coefficient_is_one_number_wherever_it_stands_and_fits_its_word(drawn: Drawn) -> None:
    program = drawn.stored.program
    first = program.coefficients
    for term in (term for each in program.sums for term in each.terms if term.name):
        same = first[str(term.name)]
        assert (abs(term.stored), term.fraction_bits) == (abs(same.stored), same.fraction_bits)
        assert abs(term.stored) < 1 << program.bits - 1


@pytest.mark.parametrize("widths", ALL_WIDTHS, ids=str)
def test_a_coefficient_of_the_normal_form_is_one_number_although_its_sums_have_different_room(widths: Widths) -> None:
    """Poles 0.3 +- j0.1: the second sum takes up the input as well, which leaves its w fewer bits than the first's."""
    pulse = pulse_of((Fraction(1, 50), 0, 0), [(1, Fraction(-3, 5), Fraction(1, 10))])
    program = integer_realization(pulse, twelve_bits(), widths, "normal").program
    found = {(term.name, abs(term.stored)) for each in program.updates for term in each.terms if term.name}
    assert sorted(str(name) for name, _ in found) == ["section1_s", "section1_w"]


@settings(max_examples=20)
@given(realizations(integral=True), st.data())
def test_output_then_advance_with_it_is_update(drawn: Drawn, data: st.DataObject) -> None:
    program = drawn.stored.program
    once, apart = IntegerRecursion(program), IntegerRecursion(program)
    for value in data.draw(inputs_of(program.interface.input, 40)):
        raw = value + program.interface.input.offset
        command = apart.output(raw)
        assert apart.output(raw) == command
        apart.advance(raw, command)
        assert once.update(raw) == command
    assert vars(once.state) == vars(apart.state)


def test_error_feedback_is_not_moved_on_by_asking_for_the_output() -> None:
    stored = integer_realization(corner(5, 1000, 1), twelve_bits(), Widths(16, 64), "error-feedback")
    assert any(each.remainder for each in stored.program.outputs)
    model = IntegerRecursion(stored.program)
    model.run([1001, -777, 1003])
    before = dict(vars(model.state))
    model.output(999)
    assert vars(model.state) == before


# ---------------------------------------------------------------- corners


@pytest.mark.parametrize("structure", ["direct", "cascade", "error-feedback", "delta", "parallel"])
@pytest.mark.parametrize(
    ("numerator", "denominators"),
    [
        ((3,), [(1,)]),
        ((Fraction(1, 2),), [(1,)]),
        ((-1,), [(1,)]),
        ((100000,), [(1,)]),
        ((Fraction(1, 100000),), [(1,)]),
    ],
    ids=["3", "1/2", "-1", "1e5", "1e-5"],
)
def test_a_gain_alone_is_one_rounded_product(
    structure: str, numerator: tuple[Fraction], denominators: list[tuple[int, ...]]
) -> None:
    stored = integer_realization(pulse_of(numerator, denominators), twelve_bits(), Widths(16, 64), structure)
    assert stored.program.states == ()
    assert stored.proof.output_error in (0, Fraction(1, 2))
    exact = answers_exactly(stored_integer_pulse(stored), Fraction(1), range(-2048, 2048, 99))
    assert IntegerRecursion(stored.program, checked=True).run(range(-2048, 2048, 99)) == [
        max(-2047, min(2047, int(y + Fraction(1, 2) - ((y + Fraction(1, 2)) % 1)))) for y in exact
    ]


@pytest.mark.parametrize("structure", ["direct", "cascade", "error-feedback", "delta"])
def test_delays_and_zeros_without_poles_keep_no_output(structure: str) -> None:
    """``(2 z + 1)/(3 z^2)``: poles at z = 0, a numerator shorter than the denominator."""
    pulse = pulse_of((Fraction(2, 3), Fraction(1, 3)), [(1, 0, 0)])
    stored = integer_realization(pulse, twelve_bits(), Widths(16, 64), structure)
    assert IntegerRecursion(stored.program, checked=True).run([300, 0, 0, 0]) == [0, 200, 100, 0]
    assert len(stored.program.states) == 2


@pytest.mark.parametrize("structure", ["direct", "cascade", "error-feedback", "delta", "parallel"])
def test_delayed_pole_comes_one_sample_later(structure: str) -> None:
    pulse = pulse_of((64,), [(1, Fraction(-1, 2))])
    stored = integer_realization(pulse, twelve_bits(), Widths(16, 64), structure)
    assert IntegerRecursion(stored.program, checked=True).run([16, 0, 0, 0, 0]) == [0, 1024, 512, 256, 128]


def test_full_range_of_a_16_bit_converter_fits_16_bit_words() -> None:
    interface = Interface(port(-(1 << 15), (1 << 15) - 1, 0, "int16"), port(-(1 << 15), (1 << 15) - 1, 0, "int16"))
    for structure in ("cascade", "error-feedback", "delta"):
        stored = integer_realization(corner(20, 1000), interface, Widths(16, 64), structure)
        assert next(b for b in stored.proof.bounds if b.variable == INPUT).spare_bits == 0
        model = IntegerRecursion(stored.program, checked=True)
        assert model.run([-(1 << 15)] * 600)[-1] == pytest.approx(-(1 << 15), abs=float(stored.proof.output_error) + 9)


@pytest.mark.parametrize("offset", [-3, 0, 2048])
def test_offsets_are_removed_and_restored(offset: int) -> None:
    interface = Interface(port(-2048, 2047, offset), port(-2047, 2047, 100 - offset))
    plain = integer_realization(corner(20, 1000), twelve_bits(), Widths(16, 64), "cascade")
    moved = integer_realization(corner(20, 1000), interface, Widths(16, 64), "cascade")
    values = [0, 1, -2048, 2047, 500, 500, 0]
    shifted = IntegerRecursion(moved.program).run([value + offset for value in values])
    assert [y - 100 + offset for y in shifted] == IntegerRecursion(plain.program).run(values)


@pytest.mark.parametrize("per_count", [Fraction(1), Fraction(4), Fraction(1, 4)])
def test_sizes_of_counts_scale_the_gain(per_count: Fraction) -> None:
    interface = Interface(port(-2048, 2047, per_count=per_count), port(-20000, 20000))
    stored = integer_realization(pulse_of((2,), [(1,)]), interface, Widths(16, 64), "direct")
    assert IntegerRecursion(stored.program).update(1000) == 2000 * per_count


def test_rescaled_numerators_leave_a_section_without_a_gain_at_rest_alone() -> None:
    """``(z - 1)/(z - 0.9999)`` passes what moves with a gain of 1; scaling to the gain at rest would spoil it."""
    pulse = pulse_of((1, -1), [(1, Fraction(-99993, 100000))])
    stored = integer_realization(pulse, twelve_bits(), Widths(16, 64), "error-feedback")
    assert stored.sections[0].b == (1, -1)


def test_numerators_anew_keep_the_gain_that_rounding_the_denominator_moves() -> None:
    stored = integer_realization(corner(1, 10000, 1), twelve_bits(), Widths(16, 64), "cascade")
    ((b, a),) = stored.sections
    assert stored.numerators_anew
    assert sum(b) / (1 + sum(a)) == pytest.approx(1, abs=2**-14)


def test_gains_of_the_integral_are_kept_to_the_width_of_a_word() -> None:
    pulse = proportional_integral(3, 40, 10000)
    for widths in ALL_WIDTHS:
        stored = integer_realization(pulse, twelve_bits(), widths, "cascade")
        assert stored.integral[0] == pytest.approx(3 / 40 / 10000, rel=2.0 ** (1 - widths.bits))
