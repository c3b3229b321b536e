"""What is proven holds: nothing overflows, and rounding moves the output no further than the bound."""

from __future__ import annotations

import random
from fractions import Fraction
from math import sqrt

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from realize.arithmetic.grouping import split_integral
from realize.arithmetic.integer import IntegerRecursion, Interface, Widths, integer_realization
from realize.arithmetic.integer.integration import Integration
from realize.arithmetic.integer.layout import layouts
from realize.arithmetic.integer.model import Overflow
from realize.arithmetic.integer.program import COMMAND, Program, linear
from realize.arithmetic.integer.proof import Proof
from realize.arithmetic.integer.quantize import Choice, Needs, ideal_room, quantized
from realize.arithmetic.integer.resting import resting_errors
from realize.arithmetic.peak_gain import attaining_input
from realize.arithmetic.state_space import PulseRatio, paths
from tests.arithmetic.integer.designs import (
    ALL_WIDTHS,
    RESOLVED,
    Drawn,
    corner,
    inputs_of,
    port,
    pulse_of,
    realizations,
    stored_answers,
    twelve_bits,
)

#: Samples of an input that attains a peak gain: what decays within them is reached.
LENGTH = 120


def run_checked(program: Program, values: list[int]) -> IntegerRecursion:
    """Counts from physical zero, every word and sum compared with its width."""
    model = IntegerRecursion(program, checked=True)
    model.run([value + program.interface.input.offset for value in values])
    return model


def at_the_ends(program: Program, signs: tuple[int, ...]) -> list[int]:
    incoming = program.interface.input
    return [incoming.high if sign > 0 else incoming.low for sign in signs]


def assert_all_bounded(program: Program, proof: Proof) -> None:
    names = {bound.variable for bound in proof.bounds}
    assert names >= {f"{each.target} (sum)" for each in program.sums}
    assert names >= {name for name in program.words if name != COMMAND and not name.endswith("_remainder")}
    assert all(bound.spare_bits >= 0 for bound in proof.bounds)


@settings(max_examples=30)
@given(realizations(integral=False), st.data())
def test_no_word_and_no_sum_overflows(drawn: Drawn, data: st.DataObject) -> None:
    program = drawn.stored.program
    assert_all_bounded(program, drawn.stored.proof)
    run_checked(program, data.draw(inputs_of(program.interface.input, 100)))
    for row in paths(linear(program)[0]):
        signs = attaining_input(row[0], LENGTH)
        run_checked(program, at_the_ends(program, signs))
        run_checked(program, at_the_ends(program, tuple(-sign for sign in signs)))


@settings(max_examples=30)
@given(realizations(integral=True), st.data())
def test_nothing_overflows_with_an_integral_whatever_was_applied(drawn: Drawn, data: st.DataObject) -> None:
    program = drawn.stored.program
    model = IntegerRecursion(program, checked=True)
    outgoing, incoming = program.interface.output, program.interface.input
    for value in data.draw(inputs_of(incoming, 60)):
        model.output(value + incoming.offset)
        model.advance(value + incoming.offset, data.draw(st.integers(outgoing.low, outgoing.high)) + outgoing.offset)
    for end in (incoming.low, incoming.high, incoming.low):
        model.run([end + incoming.offset] * 200)


@settings(max_examples=30)
@given(realizations(integral=False, output_reach=(1 << 31) - 1), st.data())
def test_output_is_within_the_proven_error_of_what_the_stored_numbers_are(drawn: Drawn, data: st.DataObject) -> None:
    stored = drawn.stored
    port = stored.program.interface
    values = data.draw(inputs_of(port.input, 150))
    exact = stored_answers(stored, [min(max(value, port.input.low), port.input.high) for value in values])
    assume(all(abs(y) < port.output.high - stored.proof.output_error for y in exact))
    found = IntegerRecursion(stored.program).run([value + port.input.offset for value in values])
    assert max(abs(y - port.output.offset - e) for y, e in zip(found, exact, strict=True)) <= stored.proof.output_error


@settings(max_examples=30)
@given(realizations(integral=True, output_reach=(1 << 31) - 1), st.data())
def test_with_an_integral_too(drawn: Drawn, data: st.DataObject) -> None:
    stored = drawn.stored
    port = stored.program.interface
    values = data.draw(inputs_of(port.input._replace(low=port.input.low + 5, high=port.input.high - 5), 150))
    exact = stored_answers(stored, values)
    assume(all(abs(y) < port.output.high - stored.proof.output_error for y in exact))
    found = IntegerRecursion(stored.program).run([value + port.input.offset for value in values])
    errors = [abs(y - port.output.offset - e) for y, e in zip(found, exact, strict=True)]
    assert max(errors) <= stored.proof.output_error + RESOLVED


# ---------------------------------------------------------------- formats


#: Of the input: far from where a power of two of a peak gain below is full.
REACH = 3000

TIGHT = {
    "first order": pulse_of((Fraction(1, 5), 0), [(1, Fraction(-4, 5))]),
    "resonance": pulse_of((Fraction(1, 3), 0, 0), [(1, Fraction(-5, 4), Fraction(4, 5))]),
    "two sections": pulse_of((Fraction(1, 3), 0, 0, 0), [(1, Fraction(-5, 4), Fraction(4, 5)), (1, Fraction(-1, 2))]),
}


@pytest.mark.parametrize(
    ("name", "structure"),
    [
        (name, structure)
        for name in TIGHT
        for structure in ("cascade", "error-feedback", "delta", "normal", "parallel")
        if (name, structure) != ("first order", "normal")
    ],
)
def test_every_format_overflows_with_one_fraction_bit_more(name: str, structure: str) -> None:
    """A word is more than half full, so that a bit more has no room: the attaining input shows it."""
    interface = Interface(port(-REACH, REACH), port(-(1 << 20), 1 << 20))
    rest = split_integral(TIGHT[name])[1]
    layout = layouts(rest, structure)
    room = ideal_room(layout, interface)
    choice, integration = Choice(16, 64), Integration(())
    program = quantized(layout, interface, choice, integration, Needs(room, room))
    tested = 0
    for target in (each.target for each in program.sums if each.target != COMMAND and "_top" not in each.target):
        halved = room._replace(reach=dict(room.reach) | {target: room.reach[target] / 2})
        finer = quantized(layout, interface, choice, integration, Needs(halved, room))
        assert finer.words[target].fraction_bits == program.words[target].fraction_bits + 1
        system, _, targets = linear(finer)
        signs = attaining_input(paths(system)[targets.index(target)][0], 400)
        run_checked(program, at_the_ends(program, signs))
        with pytest.raises(Overflow, match=target.removeprefix("state.")):
            run_checked(finer, at_the_ends(finer, signs))
        tested += 1
    assert tested


def test_bound_is_attained_within_rounding() -> None:
    """``1/5/(1 - 4/5 /z)`` has the 1-norm 1; each of its errors, half a unit, adds up to 5/2 at most, either way.

    Peak gains of proofs are enclosed to 2**-10.
    """
    stored = integer_realization(TIGHT["first order"], twelve_bits(), Widths(16, 64), "cascade")
    output = next(bound for bound in stored.proof.bounds if bound.variable == "section1_output")
    model = run_checked(stored.program, [-2048] * 200)
    assert model.state.section1_output_1 == pytest.approx(-2048 * 8, abs=2.5)
    assert output.largest <= 2048 * 8 * (1 + 2**-10) + 2.5


# ---------------------------------------------------------------- noise


def autocorrelation_sum(response: list[float]) -> float:
    """``sum over lags of rho^2`` of white noise through a response."""
    power = sum(h * h for h in response)
    rho = [sum(a * b for a, b in zip(response, response[lag:], strict=False)) / power for lag in range(len(response))]
    return 1 + 2 * sum(r * r for r in rho[1:])


def response_of(ratio: PulseRatio, count: int) -> list[float]:
    top, bottom = ([float(c) for c in p] for p in ratio)
    top = [0.0] * (len(bottom) - len(top)) + top
    found: list[float] = []
    for k in range(count):
        b = top[k] if k < len(top) else 0.0
        found.append(b - sum(bottom[i] * found[k - i] for i in range(1, min(k, len(bottom) - 1) + 1)))
    return found


@pytest.mark.parametrize("widths", ALL_WIDTHS, ids=str)
@pytest.mark.parametrize("structure", ["cascade", "error-feedback", "delta", "normal", "parallel"])
def test_measured_noise_is_the_expected(structure: str, widths: Widths) -> None:
    """Mean square of N errors: its relative standard deviation is below ``sqrt(2 R/N)``, R the sum of squared
    correlations of the most correlated source (Bartlett); five of them, and the 2**-8 of a source that discards few
    bits only.
    """
    count = 6000
    stored = integer_realization(corner(40, 1000), twelve_bits(1 << 15), widths, structure)
    chance = random.Random(7)
    values = [chance.randint(-2048, 2047) for _ in range(count)]
    exact = stored_answers(stored, values)
    found = IntegerRecursion(stored.program).run(values)
    square = float(sum((y - e) ** 2 for y, e in zip(found, exact, strict=True))) / count
    system, _, targets = linear(stored.program)
    sources = [path for path in paths(system)[targets.index(COMMAND)][1:] if path.numerator]
    correlated = max(autocorrelation_sum(response_of(path, 300)) for path in sources)
    assert stored.proof.rms_error is not None
    assert abs(square / stored.proof.rms_error**2 - 1) <= 5 * sqrt(2 * correlated / count) + 2**-7


@settings(max_examples=30)
@given(realizations(integral=False), st.data())
def test_nothing_overflows_after_a_start_at_rest(drawn: Drawn, data: st.DataObject) -> None:
    program = drawn.stored.program
    incoming, outgoing = program.interface
    start = data.draw(st.integers(incoming.low, incoming.high)) + incoming.offset
    for row in paths(linear(program)[0]):
        signs = attaining_input(row[0], LENGTH)
        for values in (signs, tuple(-sign for sign in signs)):
            model = IntegerRecursion(program, checked=True)
            model.preset(start, outgoing.offset)
            model.run([value + incoming.offset for value in at_the_ends(program, values)])


def test_a_state_at_rest_counts_as_much_as_a_constant_error_of_the_past() -> None:
    # y[k] = round(-0.9 y[k-1] + u): at rest y = round(u/1.9), off by half a unit at most, which 1.9 half units in every
    # sample before would have left; they are worth 1.9/2 times the peak gain 1/(1 - 0.9) of what follows.
    stored = integer_realization(pulse_of((1, 0), [(1, Fraction(9, 10))]), twelve_bits(), Widths(16, 32), "direct")
    program = stored.program
    a1 = -program.coefficients["section1_a1"].value
    added = resting_errors(program)["section1_output"]
    wanted = (1 + a1) / 2 / (1 - a1)
    assert wanted <= added <= wanted * Fraction(11, 10)
