"""Designs for integer words, and an exact recursion of another kind to measure them against."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NamedTuple

from hypothesis import reject
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.arithmetic.integer import (
    STRUCTURES,
    IntegerRealization,
    Interface,
    Port,
    Widths,
    integer_realization,
    stored_integer_pulse,
)
from realize.arithmetic.integer.program import Integral
from realize.arithmetic.realization import exact_pulse
from realize.errors import Refused
from realize.methods import METHODS, discretize
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.strategies import Factored, factored, rates_hz

#: Words and accumulators.
ALL_WIDTHS = (Widths(16, 32), Widths(16, 64), Widths(32, 64))

#: ``hold`` and ``tracking``: the integral is held, runs to its own limit, or follows what was applied.
ANTI_WINDUPS = ((True, Fraction(0)), (False, Fraction(0)), (False, Fraction(1, 30)))

#: Bits of the exact recursion.
_BITS = 400

#: What it is right to: decaying and integrating poles pass on far less than 2**200 of its last bits.
RESOLVED = Fraction(1, 1 << 200)


def port(low: int, high: int, offset: int = 0, kind: str = "int32", per_count: Fraction | int = 1) -> Port:
    return Port(low, high, offset, kind, Fraction(per_count))


def twelve_bits(output_reach: int = 2047) -> Interface:
    """A converter of 12 bits in and one of any reach out, both in physical units of their counts."""
    return Interface(port(-2048, 2047), port(-output_reach, output_reach))


def pulse_of(
    numerator: Sequence[Fraction | int],
    denominators: Sequence[Sequence[Fraction | int]],
    integral: Sequence[Fraction | int] = (),
) -> PulseTransferFunction:
    """A pulse transfer function from exact sections, descending powers of z, and an integral."""
    bottoms = [tuple(map(Fraction, p)) for p in denominators]
    return exact_pulse(tuple(map(Fraction, numerator)), bottoms, tuple(map(Fraction, integral)), Fraction(1, 1000))


def corner(hz: Fraction | int, rate_hz: int, order: int = 2) -> PulseTransferFunction:
    """A low-pass of gain 1, damping 0.7."""
    w = Fraction(710, 113) * hz
    bottom = (1, w) if order == 1 else (1, Fraction(7, 5) * w, w * w)
    return discretize(TransferFunction.from_polynomials((w**order,), bottom), Fraction(1, rate_hz), "bilinear").pulse


def proportional_integral(
    gain: Fraction | int, integral_time_s: int, rate_hz: int, method: str = "backward-difference"
) -> PulseTransferFunction:
    transfer = TransferFunction.from_polynomials((gain * integral_time_s, gain), (integral_time_s, 0))
    return discretize(transfer, Fraction(1, rate_hz), method).pulse


def integral_of(stored: IntegerRealization) -> Integral:
    assert stored.program.integral is not None
    return stored.program.integral


# ---------------------------------------------------------------- an exact recursion


def answers_exactly(pulse: PulseTransferFunction, scale: Fraction, inputs: Sequence[int]) -> list[Fraction]:
    """``y = scale Gd u`` by the difference equation of the whole, to :data:`RESOLVED`."""
    order = len(pulse.denominator) - 1
    unit = 1 << _BITS
    b = [int(c * scale * unit) for c in pulse.numerator]
    b = [0] * (order + 1 - len(b)) + b
    a = [int(c * unit) for c in pulse.denominator]
    u, y = [0] * (order + 1), [0] * (order + 1)
    found = []
    for value in inputs:
        u = [value * unit, *u[:order]]
        y = [0, *y[:order]]
        y[0] = (
            sum(c * x for c, x in zip(b, u, strict=True)) - sum(c * x for c, x in zip(a[1:], y[1:], strict=True))
        ) >> _BITS
        found.append(Fraction(y[0], unit))
    return found


def stored_answers(stored: IntegerRealization, inputs: Sequence[int]) -> list[Fraction]:
    """What the stored integers answer where nothing is rounded or limited, in counts."""
    return answers_exactly(stored_integer_pulse(stored), stored.program.interface.scale, inputs)


def cross_multiplied(
    first: tuple[poly.Rationals, poly.Rationals], second: tuple[poly.Rationals, poly.Rationals]
) -> bool:
    """Whether two ratios of polynomials are the same."""
    (a, b), (c, d) = (tuple(map(poly.trimmed, pair)) for pair in (first, second))
    return poly.multiply(a, d) == poly.multiply(c, b)


# ---------------------------------------------------------------- strategies


class Drawn(NamedTuple):
    """A realization and what it was made from."""

    pulse: PulseTransferFunction
    stored: IntegerRealization


def ports(one_sided: bool) -> st.SearchStrategy[Port]:
    """Converters of 8 to 16 bits, lopsided ones too."""
    return st.builds(
        lambda low, high, offset, size: port(-low, high, offset, "int32", size),
        st.integers(0 if one_sided else 40, 1 << 15),
        st.integers(40, (1 << 15) - 1),
        st.integers(-1000, 1000),
        st.sampled_from((Fraction(1), Fraction(1, 2048), Fraction(3, 1000))),
    )


@st.composite
def realizations(draw: st.DrawFn, *, integral: bool, output_reach: int | None = None) -> Drawn:
    """Any design that some words hold; with a pole at z = 1, or without."""
    rate_hz = draw(rates_hz())
    kinds = ("slow", "ordinary", "ordinary", "damped", "stiff")
    whole: Factored = draw(factored(rate_hz, 4, kinds, ("slow", "ordinary", "damped")))
    transfer = whole.transfer()
    if integral:
        bottom = (*transfer.denominator, 0)
        top = poly.multiply(
            tuple(map(Fraction, transfer.numerator)),
            (Fraction(1) / rate_hz, draw(st.sampled_from((Fraction(1), Fraction(1, 40))))),
        )
        transfer = TransferFunction.from_polynomials(top, bottom)
    interface = Interface(draw(ports(not integral)), draw(ports(True)))
    if output_reach is not None:
        interface = interface._replace(output=interface.output._replace(low=-output_reach, high=output_reach))
    method = draw(st.sampled_from([name for name in METHODS if name != "bilinear-prewarped"]))
    structure, widths = draw(st.sampled_from(sorted(STRUCTURES))), draw(st.sampled_from(ALL_WIDTHS))
    try:
        pulse = discretize(transfer, 1 / rate_hz, method).pulse
        hold, tracking = draw(st.sampled_from(ANTI_WINDUPS if integral else ANTI_WINDUPS[:1]))
        return Drawn(pulse, integer_realization(pulse, interface, widths, structure, hold=hold, tracking=tracking))
    except Refused:
        reject()


def inputs_of(incoming: Port, length: int) -> st.SearchStrategy[list[int]]:
    """Counts within the range and beyond, ends often."""
    ends = st.sampled_from((incoming.low, incoming.high, 0))
    beyond = st.integers(incoming.low - 5, incoming.high + 5)
    return st.lists(st.one_of(ends, beyond), min_size=length, max_size=length)
