"""Counts at both ends: limits inside the range, and errors that give the lines to add."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.arithmetic.integer import IntegerRecursion, Interface, Port, Widths, integer_realization, interface_of
from realize.arithmetic.integer.interface import type_range
from realize.design.model import Signal
from realize.errors import RealizeError, Refused
from tests.arithmetic.integer.designs import port, proportional_integral, pulse_of, twelve_bits


def signal(low: str, high: str, per_count: str, offset: int = 0, kind: str | None = None) -> Signal:
    return Signal((Fraction(low), Fraction(high)), "", Fraction(per_count), offset, kind)


GOOD = signal("-10", "10", "1/200")


def test_limits_are_the_counts_inside_the_range() -> None:
    assert interface_of(signal("-1", "2.5", "0.3", 7), GOOD, "int16").input == Port(-3, 8, 7, "int16", Fraction(3, 10))


def test_type_is_that_of_the_arithmetic_where_none_is_named() -> None:
    both = interface_of(GOOD, signal("0", "1", "1/1000", 0, "uint16"), "int32")
    assert (both.input.type, both.output.type) == ("int32", "uint16")


def test_unsigned_converter_with_its_offset_fits() -> None:
    incoming = interface_of(signal("-5", "4.99", "1/400", 2048, "uint16"), GOOD, "int16").input
    assert (incoming.low + incoming.offset, incoming.high + incoming.offset) == (48, 4044)
    assert incoming.limits_type == (True, True)


def test_limits_at_the_ends_of_the_type_need_no_comparison() -> None:
    assert interface_of(signal("0", "255", "1", 0, "uint8"), GOOD, "int16").input.limits_type == (False, False)


@pytest.mark.parametrize(
    ("name", "expected"),
    [("int8", (-128, 127)), ("uint8", (0, 255)), ("int16", (-32768, 32767)), ("uint32", (0, 2**32 - 1))],
)
def test_range_of_a_type(name: str, expected: tuple[int, int]) -> None:
    assert type_range(name) == expected


def test_scale_turns_physical_gains_into_counts() -> None:
    assert interface_of(signal("-1", "1", "1/100"), signal("-1", "1", "1/400"), "int16").scale == 4


def test_input_beyond_its_range_counts_as_the_limit() -> None:
    stored = integer_realization(pulse_of((1,), [(1,)]), twelve_bits(4000), Widths(16, 32), "direct")
    assert IntegerRecursion(stored.program).run([2047, 2048, 30000, -2048, -2049, -30000]) == [
        *(2047, 2047, 2047),
        *(-2048, -2048, -2048),
    ]


ERRORS: dict[str, tuple[Signal, Signal, tuple[str, ...]]] = {
    "no range": (
        Signal(None, "", Fraction(1, 200)),
        GOOD,
        ("[signals.input]", "no range, which int16 arithmetic works in", "add these lines", "range = [-1.0, 1.0]"),
    ),
    "no size of a count": (
        GOOD,
        Signal((Fraction(-1), Fraction(1))),
        ("[signals.output]", "no per_count", 'per_count = "1/1000"'),
    ),
    "nothing of either": (
        Signal(),
        Signal(),
        (
            "[signals.input]",
            "[signals.output]",
            "no range and per_count",
            "range = [-1.0, 1.0]",
            'per_count = "1/1000"',
        ),
    ),
    "one count": (
        signal("-1", "1", "1.5"),
        GOOD,
        ("[signals.input] per_count", "a count of 3/2, of which the range from -1 to 1 holds one", "widen the range"),
    ),
    "no count": (signal("0.1", "0.2", "1"), GOOD, ("holds none", "the physical size of one count")),
    "range without zero": (
        GOOD,
        signal("2", "20", "0.1"),
        ("[signals.output] range", "from 2 to 20, without zero", "measure the signal from a zero inside the range"),
    ),
    "type too narrow": (
        signal("-10", "10", "1/200", 0, "int8"),
        GOOD,
        ("[signals.input] type", "int8, although the range reaches from count -2000 to 2000", 'type = "int16"'),
    ),
    "unsigned without an offset": (
        signal("-10", "10", "1/200", 0, "uint16"),
        GOOD,
        ("uint16, although", "counts from 0 to 65535", "offset = 2000 makes the lowest count 0"),
    ),
    "only the last count is too much": (
        signal("-10", "10", "10/32768", 0, "int16"),
        GOOD,
        ("to 32768", 'the top end is one count too high: range = [-10, "10 - 5/16384"]'),
    ),
    "unsigned, and the last count is too much": (
        signal("-10", "10", "10/32768", 0, "uint16"),
        GOOD,
        ("offset = 32768 makes the lowest count 0; the top end is then one", 'range = [-10, "10 - 5/16384"]'),
    ),
    "no type is wide enough": (
        signal("-10", "10", "1/1000000000"),
        GOOD,
        ("reaches from count -10000000000", "a coarser per_count or a narrower range"),
    ),
}


@pytest.mark.parametrize("name", ERRORS)
def test_error_says_what_to_write(name: str) -> None:
    incoming, outgoing, parts = ERRORS[name]
    with pytest.raises(RealizeError) as caught:
        interface_of(incoming, outgoing, "int16")
    assert not isinstance(caught.value, Refused)
    for part in parts:
        assert part in str(caught.value)


INTEGRAL = proportional_integral(1, 2, 1000)
REFUSALS = {
    "input one-sided, with an integral": (
        INTEGRAL,
        Interface(port(0, 4095), port(-100, 100)),
        ("[signals.input] range", "no negative value", "only ever move one way", "range = [-8.0, 8.0]"),
    ),
    "the other side": (INTEGRAL, Interface(port(-4095, 0), port(-100, 100)), ("no positive value",)),
    "a gain of zero": (pulse_of((0,), [(1,)]), twelve_bits(), ("a gain of zero", "check the values")),
    "input wider than a word": (
        INTEGRAL,
        Interface(port(-32768, 32768), port(-100, 100)),
        ("counts from -32768 to 32768", "takes 17 bits", 'arithmetic = "int32", or a coarser per_count'),
    ),
}


@pytest.mark.parametrize("name", REFUSALS)
def test_refusal_says_what_to_change(name: str) -> None:
    pulse, interface, parts = REFUSALS[name]
    with pytest.raises(Refused) as caught:
        integer_realization(pulse, interface, Widths(16, 64), "cascade")
    for part in parts:
        assert part in str(caught.value)


def test_one_sided_input_without_an_integral_is_fine() -> None:
    stored = integer_realization(
        pulse_of((2,), [(1,)]), Interface(port(0, 4095), port(0, 5000)), Widths(16, 64), "direct"
    )
    assert IntegerRecursion(stored.program, checked=True).run([-4, 0, 100, 4095, 4096]) == [0, 0, 200, 5000, 5000]
