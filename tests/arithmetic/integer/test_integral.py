"""The integral loses nothing: no deadband, no drift, and it stops at limits and comes back."""

from __future__ import annotations

from fractions import Fraction
from math import ceil

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.arithmetic.integer import IntegerRealization, IntegerRecursion, Interface, Widths, integer_realization
from realize.arithmetic.integer.quiet import quiet
from realize.transfer import PulseTransferFunction
from tests.arithmetic.integer.designs import ALL_WIDTHS, integral_of, port, proportional_integral, pulse_of, twelve_bits

#: 40 s integral time at 10 kHz: a count of error adds 1/400000 count a sample, times the gain.
SLOW = proportional_integral(1, 40, 10_000)


def slow(widths: Widths, gain: int = 1, output_reach: int = 2047) -> IntegerRealization:
    return integer_realization(proportional_integral(gain, 40, 10_000), twelve_bits(output_reach), widths, "cascade")


@pytest.mark.parametrize("widths", ALL_WIDTHS, ids=str)
@pytest.mark.parametrize("sign", [1, -1])
def test_one_count_of_error_moves_the_output_by_a_count_in_the_computed_time(widths: Widths, sign: int) -> None:
    """Gain 8: 50000 samples a count. The proportional part, 8 counts, is there from the first sample."""
    stored = slow(widths, 8)
    made = quiet(stored).integration
    assert made is not None
    assert made.samples_per_count == pytest.approx(50_000, rel=2.0 ** (1 - widths.bits))
    model = IntegerRecursion(stored.program)
    model.run([sign] * (made.samples_per_count - 1))
    unit = 1 << integral_of(stored).word.fraction_bits
    assert abs(model.state.integral1) < unit
    model.update(sign)
    assert abs(model.state.integral1) >= unit
    assert model.output(0) == sign


@pytest.mark.parametrize("widths", ALL_WIDTHS, ids=str)
@pytest.mark.parametrize("sign", [1, -1])
def test_one_count_of_error_integrates_to_the_full_output_in_the_computed_time(widths: Widths, sign: int) -> None:
    """From one limit to the other, 40 counts: 50000 samples at a gain of 320."""
    stored = slow(widths, 320, 20)
    made = quiet(stored).integration
    assert made is not None
    assert made.samples_to_limit == pytest.approx(50_000, rel=2.0 ** (1 - widths.bits), abs=1)
    model, unit = IntegerRecursion(stored.program, checked=True), 1 << integral_of(stored).word.fraction_bits
    model.state.integral1 = -sign * 20 * unit
    # The proportional part alone is beyond the limit: what the integral does is seen with the error taken away.
    outputs = []
    for _ in range(made.samples_to_limit):
        vars(model.state)["integral1"] += integral_of(stored).stored[0] * sign
        outputs.append(model.output(0))
    assert outputs[0] == -20 * sign
    assert outputs[-1] == 20 * sign
    assert outputs == sorted(outputs, reverse=sign < 0)


@pytest.mark.parametrize("sign", [1, -1])
def test_pure_integral_reaches_its_limit_in_the_computed_time_and_not_before(sign: int) -> None:
    stored = integer_realization(
        pulse_of((), [], (Fraction(1, 1000),)), Interface(port(-5, 5), port(-20, 20)), Widths(16, 32), "cascade"
    )
    made = quiet(stored).integration
    assert made is not None
    model = IntegerRecursion(stored.program, checked=True)
    outputs = model.run([sign] * (made.samples_to_limit // 2 + 1))
    # The first sample's output is before any increment; rounding to nearest shows the last count half a count early.
    half = ceil(Fraction(39, 2) / abs(stored.integral[0]))
    assert outputs.index(20 * sign) == half
    assert made.samples_to_limit == ceil(40 / abs(stored.integral[0]))


@settings(max_examples=30)
@given(st.lists(st.integers(-2048, 2047), min_size=1, max_size=80), st.sampled_from(ALL_WIDTHS))
def test_no_increment_is_lost(values: list[int], widths: Widths) -> None:
    """The state is the exact sum of what was given, as long as no limit acts."""
    stored = slow(widths, 1, 1 << 20)
    model = IntegerRecursion(stored.program, checked=True)
    model.run(values)
    assert model.state.integral1 == integral_of(stored).stored[0] * sum(values)


def test_no_drift_without_an_input() -> None:
    model = IntegerRecursion(slow(Widths(16, 32)).program)
    model.run([2000, -1999, 37])
    kept = model.state.integral1
    model.run([0] * 1000)
    assert model.state.integral1 == kept != 0


def held(structure_hold: bool, tracking: Fraction = Fraction(0)) -> IntegerRealization:
    return integer_realization(
        proportional_integral(4, 1, 100),
        Interface(port(-100, 100), port(-300, 300)),
        Widths(16, 32),
        "cascade",
        hold=structure_hold,
        tracking=tracking,
    )


@pytest.mark.parametrize("sign", [1, -1])
def test_hold_stops_the_integral_at_the_limit_and_lets_go_at_once(sign: int) -> None:
    """An error of 100 makes 400 of the proportional part alone: beyond the limit, the integral must not move."""
    model = IntegerRecursion(held(True).program, checked=True)
    assert set(model.run([100 * sign] * 500)) == {300 * sign}
    assert model.state.integral1 == 0
    assert model.update(-10 * sign) == -40 * sign
    assert model.state.integral1 != 0


def test_hold_recovers_where_no_anti_windup_stays_at_the_limit() -> None:
    """After 50 samples beyond the limit the error turns: held, the output follows at once; free, the sum is full."""
    outputs = {}
    for hold in (True, False):
        model = IntegerRecursion(held(hold).program, checked=True)
        model.run([60] * 600)
        outputs[hold] = model.run([-20] * 3)
    assert outputs[True][0] < 300
    assert outputs[False] == [300] * 3


def test_without_anti_windup_the_state_ends_at_its_own_limit() -> None:
    stored = held(False)
    limits = integral_of(stored).limits[0]
    assert limits is not None
    model = IntegerRecursion(stored.program, checked=True)
    model.run([100] * 20_000)
    assert model.state.integral1 == limits[1]
    model.run([-100] * 40_000)
    assert model.state.integral1 == limits[0]
    unit = 1 << integral_of(stored).word.fraction_bits
    assert limits[1] >= 600 * unit


def test_back_calculation_settles_where_the_increments_balance() -> None:
    """``R x = gain (command - output)``: at x = 50, R = 4/100 a sample, 0.2 of the excess: 10 counts of it."""
    stored = held(False, Fraction(1, 5))
    model = IntegerRecursion(stored.program, checked=True)
    model.run([50] * 400)
    unit = 1 << integral_of(stored).word.fraction_bits
    assert model.state.integral1 / unit + 4 * 50 == pytest.approx(310, abs=3)
    assert model.run([0])[0] == pytest.approx(110, abs=3)


def double() -> PulseTransferFunction:
    """``1 + 1/(50 (z - 1)) + 1/(5000 (z - 1)^2)``."""
    return pulse_of((1,), [(1,)], (Fraction(1, 50), Fraction(1, 5000)))


def test_double_integral_is_the_exact_double_sum() -> None:
    stored = integer_realization(double(), twelve_bits(1 << 20), Widths(16, 64), "cascade")
    model = IntegerRecursion(stored.program, checked=True)
    model.run([7] * 100)
    first, second = integral_of(stored).stored
    assert model.state.integral2 == 7 * 100 * second
    assert model.state.integral1 == 7 * (100 * first + second * 100 * 99 // 2)


@pytest.mark.parametrize("hold", [True, False])
@pytest.mark.parametrize("sign", [1, -1])
def test_upper_of_two_integrals_ends_at_a_limit_of_its_own_and_comes_back(hold: bool, sign: int) -> None:
    """The width of the output range per sample: with 600 counts it could not be used up faster."""
    interface = Interface(port(-100, 100), port(-300, 300))
    stored = integer_realization(double(), interface, Widths(16, 64), "cascade", hold=hold)
    limits = integral_of(stored).limits[1]
    unit = 1 << integral_of(stored).word.fraction_bits
    assert limits == (-600 * unit, 600 * unit)
    model = IntegerRecursion(stored.program, checked=True)
    outputs = model.run([100 * sign] * 40_000)
    assert outputs[-1] == 300 * sign
    assert abs(model.state.integral2) <= 600 * unit
    assert model.run([-100 * sign] * 80_000)[-1] == -300 * sign


def test_two_integrals_take_the_time_of_their_double_sum() -> None:
    stored = integer_realization(double(), twelve_bits(300), Widths(32, 64), "cascade")
    made = quiet(stored).integration
    assert made is not None
    first, second = stored.integral

    def moved(n: int) -> Fraction:
        return first * n + second * Fraction(n * (n - 1), 2)

    assert moved(made.samples_per_count) >= 1 > moved(made.samples_per_count - 1)
    assert moved(made.samples_to_limit) >= 600 > moved(made.samples_to_limit - 1)


def test_integral_that_exceeds_a_word_of_32_bits_takes_64() -> None:
    assert integral_of(slow(Widths(16, 32))).word.bits == 64
    fast = integer_realization(pulse_of((), [], (Fraction(1, 2),)), twelve_bits(100), Widths(16, 32), "cascade")
    assert integral_of(fast).word.bits == 32


def test_large_gain_per_sample_has_room() -> None:
    """A sample moves the state by a hundred times the output range: its sum on the way is what needs the bits."""
    stored = integer_realization(
        pulse_of((), [], (Fraction(100), Fraction(7))), twelve_bits(1000), Widths(16, 32), "cascade", hold=False
    )
    model = IntegerRecursion(stored.program, checked=True)
    assert model.run([2047, 2047, -2048, -2048, 0])[1] == 1000
    on_the_way = next(b for b in stored.proof.bounds if b.variable == "state.integral1 (sum)")
    assert on_the_way.largest >= 100 * 2048 << integral_of(stored).word.fraction_bits
