"""The bumpless start: at rest where there is a rest, honest where there is none."""

from __future__ import annotations

from fractions import Fraction
from math import prod

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.arithmetic.formats import FLOAT32, FLOAT64, FORMATS, FloatFormat
from realize.arithmetic.realization import AnySection, DeltaSection, Realization, Section
from realize.arithmetic.recursion import Recursion
from realize.arithmetic.sample import describe
from realize.arithmetic.settling import settle
from realize.errors import RealizeError
from tests.firmware.designs import (
    PERIOD_S,
    UNIT_RANGE,
    delta_parts,
    in_delta,
    parts,
    random_emission,
    rounded,
    section,
)

NAN, INF = float("nan"), float("inf")


def rests_of(target: FloatFormat) -> dict[str, tuple[AnySection, ...]]:
    """Kinds of rest, in z and in delta."""
    kinds: dict[str, tuple[AnySection, ...]] = {**parts(target)}
    for name, sections in delta_parts(target).items():
        kinds[f"delta, {name}"] = sections
    return kinds


OPERATORS = ("z", "delta")
RESTS: list[tuple[FloatFormat, tuple[AnySection, ...]]] = [
    (target, sections) for target in FORMATS.values() for sections in rests_of(target).values() if sections
]


def gain_at_rest(realization: Realization) -> Fraction:
    """``Gd(1)`` of the stored sections: delta = 0 leaves the last coefficients."""
    gains = []
    for stored in realization.sections:
        b, a = (tuple(map(Fraction, p)) for p in stored)
        if isinstance(stored, DeltaSection):
            gains.append(b[-1] / (a[-1] if a else 1))
        else:
            gains.append(sum(b, Fraction(0)) / (1 + sum(a)))
    return prod(gains, start=Fraction(1))


def without_integral(seed: int, operator: str) -> Realization:
    emission = random_emission("any", seed)
    drawn = (in_delta(emission) if operator == "delta" else emission).realization
    sections = drawn.sections or (section(drawn.format, ("0.3", "0.1"), ("-0.875",)),)
    return Realization(drawn.format, drawn.structure, (), sections, PERIOD_S)


@pytest.mark.parametrize("operator", OPERATORS)
@given(seed=st.integers(0, 1 << 32), x=st.floats(-1e6, 1e6, width=32))
def test_the_gain_at_rest_times_the_input_is_always_possible(operator: str, seed: int, x: float) -> None:
    realization = without_integral(seed, operator)
    output = realization.format.round(gain_at_rest(realization) * Fraction(x))
    assert Recursion(realization).preset(x, output)


@pytest.mark.parametrize("operator", OPERATORS)
@given(seed=st.integers(0, 1 << 32), x=st.floats(2**-10, 1e6, width=32))
def test_the_next_output_is_within_the_bound_that_the_verdict_uses(operator: str, seed: int, x: float) -> None:
    realization = without_integral(seed, operator)
    model = Recursion(realization)
    settling = settle(realization, model.sample)
    exact = gain_at_rest(realization) * Fraction(x)
    model.preset(x, 0.0)
    assert abs(Fraction(model.update(x)) - exact) <= Fraction(settling.bound) * Fraction(x) + Fraction(settling.floor)


@pytest.mark.parametrize(("target", "sections"), RESTS)
def test_another_output_is_not_possible_and_leaves_the_rest_of_the_input(
    target: FloatFormat, sections: tuple[AnySection, ...]
) -> None:
    realization = Realization(target, "cascade", (), sections, PERIOD_S)
    output = target.round(gain_at_rest(realization) * Fraction(3, 2))
    asked, other = Recursion(realization), Recursion(realization)
    assert asked.preset(1.5, output)
    assert not other.preset(1.5, target.round(Fraction(output) + Fraction(1, 1000)))
    assert asked.run([1.5, 1.5, 0.0]) == other.run([1.5, 1.5, 0.0])


@pytest.mark.parametrize(("target", "sections"), RESTS)
def test_at_rest_the_output_stays_where_it_is(target: FloatFormat, sections: tuple[AnySection, ...]) -> None:
    realization = Realization(target, "cascade", (), sections, PERIOD_S)
    model = Recursion(realization)
    model.preset(1.5, 0.0)
    exact = gain_at_rest(realization) * Fraction(3, 2)
    bound = 3 * Fraction(settle(realization, model.sample).bound)
    # every sample adds at most its own roundings, which decay or, undamped, add up
    assert all(abs(Fraction(y) - exact) <= 50 * bound for y in model.run([1.5] * 50))


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
@pytest.mark.parametrize("kind", rests_of(FLOAT32))
def test_with_an_integral_any_output_is_at_rest_at_input_zero(target: FloatFormat, kind: str) -> None:
    chain = rounded(target, "0.009", "-0.001")
    model = Recursion(Realization(target, "cascade", chain, rests_of(target)[kind], PERIOD_S), UNIT_RANGE)
    model.run([0.3, -4.0, 0.2])
    output = target.round(Fraction(-7, 10))
    assert model.preset(0.0, output)
    assert model.run([0.0] * 5) == [output] * 5


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
def test_with_an_integral_another_input_gives_the_output_and_moves_on_with_the_last_gain_alone(
    target: FloatFormat,
) -> None:
    chain = (0.25, 0.125, 0.5)
    model = Recursion(Realization(target, "cascade", chain, (section(target, ("2",)),), PERIOD_S))
    assert not model.preset(1.0, 3.0)
    # by hand: I = (1, -0.25, -0.125), then I_3 gains 0.5 a sample and moves the others one sample later each
    assert model.run([1.0] * 5) == [3.0, 3.0, 3.0, 3.5, 5.0]


@pytest.mark.parametrize(("asked", "next_output"), [(1.5, 1.0), (-7.0, -1.0)])
def test_an_output_beyond_the_clamp_is_the_limit_and_not_possible(asked: float, next_output: float) -> None:
    model = Recursion(Realization(FLOAT32, "cascade", (0.25,), (), PERIOD_S), UNIT_RANGE)
    assert not model.preset(0.0, asked)
    assert model.update(0.0) == next_output


def test_the_limit_itself_is_possible_where_the_gain_at_rest_goes_beyond_it() -> None:
    model = Recursion(Realization(FLOAT32, "direct", (), (section(FLOAT32, ("4",)),), PERIOD_S), UNIT_RANGE)
    assert [model.preset(0.5, y) for y in (1.0, 2.0, 0.5)] == [True, False, False]


@pytest.mark.parametrize(("x", "output"), [(NAN, 0.0), (0.0, NAN), (INF, 0.0), (0.0, -INF), (3e38, 0.0)])
def test_what_is_not_finite_is_refused_and_changes_nothing(x: float, output: float) -> None:
    rest = (section(FLOAT32, ("3", "1"), ("-0.5",)),)
    model, twin = (Recursion(Realization(FLOAT32, "cascade", (0.25,), rest, PERIOD_S)) for _ in range(2))
    model.run([1.0, 2.0])
    twin.run([1.0, 2.0])
    assert not model.preset(x, output)
    assert model.run([0.5, 0.0]) == twin.run([0.5, 0.0])


def test_the_input_at_rest_counts_as_accepted() -> None:
    model = Recursion(Realization(FLOAT64, "direct", (), (section(FLOAT64, ("2",)),), PERIOD_S))
    model.preset(0.75, 1.5)
    assert model.update(NAN) == 1.5


def test_a_section_that_rounding_moved_onto_z_1_has_no_rest() -> None:
    realization = Realization(FLOAT32, "direct", (), (Section((0.5, 0.0), (-1.0,)),), PERIOD_S)
    with pytest.raises(RealizeError, match="rounding moved a pole of section 1 to z = 1"):
        settle(realization, describe(realization))


def test_in_delta_that_takes_a_last_coefficient_of_zero() -> None:
    realization = Realization(FLOAT32, "delta", (), (DeltaSection((0.5, 0.25), (0.0,)),), PERIOD_S)
    with pytest.raises(RealizeError, match="rounding moved a pole of section 1 to z = 1"):
        settle(realization, describe(realization))


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
def test_the_rest_of_states_in_delta_is_what_stops_their_increments(target: FloatFormat) -> None:
    # gain 3/2: y = 3, and by hand s_1 = y - b_0 x = 1, s_2 = a_1 y - b_1 x = 2.5
    rest = (DeltaSection((1.0, 0.25, 0.375), (1.0, 0.25)),)
    model = Recursion(Realization(target, "delta", (), rest, PERIOD_S))
    model.run([0.3, -7.0, 1e-9])
    assert model.preset(2.0, 3.0)
    assert (model._state.section1_1, model._state.section1_2) == (1.0, 2.5)
    assert model.run([2.0] * 20) == [3.0] * 20


def test_a_gain_of_one_at_rest_is_not_multiplied() -> None:
    realization = Realization(FLOAT64, "direct", (), (Section((0.25, 0.25), (-0.5,)),), PERIOD_S)
    steps = settle(realization, describe(realization)).steps
    assert [step.target for step in steps] == ["section1_settled", "section1_1", "section1_output", "command"]
    assert "section1_gain" not in str(steps)
