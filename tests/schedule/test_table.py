"""The table: with the coefficients of a point in it, the model is the model of that point, bit for bit."""

from __future__ import annotations

from fractions import Fraction
from itertools import pairwise
from math import isfinite

import pytest

from realize.algebra.rounding import FLOAT64
from realize.arithmetic.realization import AnySection, DeltaSection, Realization, Section
from realize.arithmetic.recursion import Recursion
from realize.arithmetic.sample import coefficients, describe
from realize.arithmetic.settling import settle
from realize.firmware import Emission
from realize.firmware.vectors import vectors
from realize.schedule import Table
from tests.firmware.designs import scheduled

EMISSIONS = list(scheduled())


def table_of(emission: Emission) -> Table:
    assert emission.schedule is not None
    return emission.schedule


def own(emission: Emission, point: int) -> Recursion:
    """The model of a point, listed from its own numbers."""
    return Recursion(
        table_of(emission).stored[point],
        emission.output_range,
        emission.anti_windup,
        emission.tracking_time_s,
        emission.guard_nonfinite,
    )


@pytest.mark.parametrize("emission", EMISSIONS, ids=lambda emission: emission.name)
def test_at_every_point_the_model_answers_as_that_of_the_point_alone(emission: Emission) -> None:
    inputs = [x for x in vectors(emission)[0] if isfinite(x)][:400]
    for point, at in enumerate(table_of(emission).breakpoints):
        model, alone = emission.recursion(), own(emission, point)
        model.take(table_of(emission).at(at))
        assert model.run(inputs) == alone.run(inputs)
        for value, output in ((0.0, 0.25), (0.5, 0.25), (1.0, -0.125), (0.0, 0.0)):
            assert model.preset(value, output) == alone.preset(value, output)
            assert model.output(0.5) == alone.output(0.5)


@pytest.mark.parametrize("emission", EMISSIONS, ids=lambda emission: emission.name)
def test_the_state_goes_on_where_coefficients_change(emission: Emission) -> None:
    first, last = (table_of(emission).breakpoints[end] for end in (0, -1))
    model, alone = emission.recursion(), own(emission, 0)
    assert model.run([0.25] * 5) == alone.run([0.25] * 5)
    model.take(table_of(emission).at(last))
    model.run([0.25])
    model.take(table_of(emission).at(first))
    alone.run([0.25])
    assert model.run([0.25]) != alone.run([0.25])


@pytest.mark.parametrize("emission", EMISSIONS, ids=lambda emission: emission.name)
def test_a_multiplication_is_left_out_only_where_it_is_at_every_point(emission: Emission) -> None:
    def multiplied(stored: Realization) -> set[str]:
        sample = describe(stored, emission.output_range, emission.anti_windup, emission.tracking_time_s)
        return {*coefficients((*sample.output, *sample.advance, *settle(stored, sample).steps))}

    table = table_of(emission)
    assert multiplied(table.stand_in) == set().union(*map(multiplied, table.stored))


@pytest.mark.parametrize(
    "sections",
    [
        # a zero at z = 1, beside a pole that moves
        [Section((1.0, -1.0), (-0.5,)), Section((1.0, -1.0), (-0.25,))],
        # a gain of 1 at one point alone, from coefficients that are multiplied
        [Section((0.5,), ()), Section((1.0,), ())],
        [Section((0.25, 0.25), (-0.5,)), Section((0.25, 0.25), (-0.75,))],
        [DeltaSection((0.0, 0.25), (0.25,)), DeltaSection((0.0, 0.25), (0.5,))],
        [DeltaSection((1.0, 0.0), (0.25,)), DeltaSection((1.0, 0.0), (0.5,))],
    ],
)
def test_a_gain_is_left_out_only_where_it_is_the_same_at_every_point(sections: list[AnySection]) -> None:
    structure = "delta" if isinstance(sections[0], DeltaSection) else "direct"
    stored = tuple(Realization(FLOAT64, structure, (), (section,), Fraction(1, 100)) for section in sections)
    table = Table("speed", "", (Fraction(0), Fraction(1)), 8, stored)
    for point, alone in enumerate(map(Recursion, stored)):
        model = Recursion(table.stand_in)
        model.take(table.sets[point])
        assert model.run([1.0, 0.5, -2.0]) == alone.run([1.0, 0.5, -2.0])
        for value, output in ((1.0, 1.0), (0.5, 0.0), (0.0, 0.0)):
            assert model.preset(value, output) == alone.preset(value, output)
            assert model.output(0.5) == alone.output(0.5)


@pytest.mark.parametrize("emission", EMISSIONS, ids=lambda emission: emission.name)
def test_a_preset_that_says_yes_is_at_rest_between_points_too(emission: Emission) -> None:
    """Gains at rest are no linear function of the coefficients: there only input 0 has a state that is known."""
    table = table_of(emission)
    for before, after in pairwise(table.breakpoints):
        model = emission.recursion()
        model.take(table.at(emission.realization.format.round(Fraction(before) / 2 + Fraction(after) / 2)))
        for value in (0.5, -1.0, 2.0):
            for _ in range(2):
                model.preset(value, 0.0)
                # What it would put out next: the nearest that it takes for the state at rest.
                assert not model.preset(value, model.output(value))
        assert model.preset(0.0, 0.0)
        assert model.run([0.0] * 50) == [0.0] * 50
