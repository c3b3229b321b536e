"""What the integer header says to a reviewer: the scale of coefficients, what comes to rest, what is not protected."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.arithmetic.integer.quiet import FEW_SAMPLES, FEW_STATES, quiet
from realize.firmware.integer import IntegerEmission
from tests.firmware.bench import rendered
from tests.firmware.integer.designs import INPUTS, OUTPUTS, WIDTHS, emission, grid

LISTED = list(grid())


def prose(one: IntegerEmission) -> str:
    """The first comment, as running text."""
    text = rendered(one)[f"{one.name}.h"]
    return " ".join(text.partition("*/")[0].replace("\n * ", " ").replace("\n *", " ").split())


def protects_not(one: IntegerEmission) -> str:
    return prose(one).partition("Not protected:")[2]


def with_anti_windup(anti_windup: str) -> IntegerEmission:
    return emission("one", "pi", "direct", WIDTHS[0], options=(anti_windup, "inline", "subtract"))


def test_gain_of_one_is_told_in_counts() -> None:
    one = emission("one", "pi", "direct", WIDTHS[0], (INPUTS["int16"], OUTPUTS["int16"]))
    incoming, outgoing = INPUTS["int16"].per_count, OUTPUTS["int16"].per_count
    assert incoming is not None
    assert outgoing is not None
    figure = prose(one).partition("a gain of ")[2].partition(" is ")[2].partition(" counts per count")[0]
    assert Fraction(figure) == incoming / outgoing


def test_largest_cycle_is_that_of_the_search_where_every_state_was_searched_and_the_bound_stands_beside_it() -> None:
    found = 0
    for one in LISTED:
        silence = quiet(one.realization, FEW_SAMPLES, FEW_STATES)
        if silence.integration or silence.rests_at_zero or silence.searched_output is None:
            continue
        found += 1
        said = prose(one)
        assert f"settles within {silence.searched_output or 'no'} count" in said
        assert f"found by searching every state; without the search, at most {silence.largest_output} count" in said
    assert found


def test_every_integral_above_the_first_has_its_limit_told_and_what_lies_beyond_is_not_protected() -> None:
    several = [one for one in LISTED if (i := one.realization.program.integral) and len(i.stored) > 1]
    assert several
    for one in several:
        integral, port = one.realization.program.integral, one.realization.program.interface.output
        assert integral is not None
        assert "no increment of integral 1 is lost" in prose(one)
        limit = f"{port.high - port.low} counts per sample"
        assert f"integral 2 stays within {limit}" in prose(one)
        assert f"an integral 2 that has to go beyond {limit}" in protects_not(one)


def test_a_single_integral_has_no_number() -> None:
    assert "no increment of the integral is lost" in prose(with_anti_windup("hold-integral"))


@pytest.mark.parametrize(
    "said",
    [
        "a converter that wraps around, a sensor that fails: the limits of the input hide it",
        "a sample period other than ",
        "jitter, whose margin was not judged",
        "a preset that returns 0 and is ignored",
    ],
)
def test_what_no_code_can_see_is_listed(said: str) -> None:
    assert said in protects_not(with_anti_windup("none"))


@pytest.mark.parametrize(
    ("anti_windup", "actuator", "kick"),
    [("none", False, False), ("hold-integral", True, False), ("back-calculation", True, True)],
)
def test_what_winds_the_integral_up_is_listed_where_it_can(anti_windup: str, actuator: bool, kick: bool) -> None:
    said = protects_not(with_anti_windup(anti_windup))
    assert ("an actuator that limits further than the output range when only update is called" in said) == actuator
    assert ("tracking time shorter than the derivative time" in said) == kick
