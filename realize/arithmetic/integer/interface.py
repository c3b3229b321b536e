"""The integers at both ends: counts of converters and timers, what they stand for, and the limits they are held to.

Inside, a signal is a count less the count at physical zero. A gain of 1 from input to output, in their physical units,
is ``input.per_count/output.per_count`` in counts.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import ceil, floor
from typing import NamedTuple

from realize.design.model import Signal
from realize.errors import RealizeError

#: Bits and sign of the C types that a converter or timer is read or written as.
TYPES = {
    "int8": (8, True),
    "uint8": (8, False),
    "int16": (16, True),
    "uint16": (16, False),
    "int32": (32, True),
    "uint32": (32, False),
}


class Port(NamedTuple):
    """One end.

    Attributes
    ----------
    low, high : int
        Limits in counts from physical zero, inside the physical range; zero lies between them.
    offset : int
        Count at physical zero.
    type : str
        Key of :data:`TYPES`; holds every count from ``low + offset`` to ``high + offset``.
    per_count : Fraction
        Physical size of one count.
    """

    low: int
    high: int
    offset: int
    type: str
    per_count: Fraction

    @property
    def reach(self) -> int:
        """Largest distance from physical zero, in counts."""
        return max(-self.low, self.high)

    @property
    def limits_type(self) -> tuple[bool, bool]:
        """Whether the type holds counts below the low limit, and above the high one."""
        least, most = type_range(self.type)
        return least < self.low + self.offset, self.high + self.offset < most


class Interface(NamedTuple):
    """Both ends."""

    input: Port
    output: Port

    @property
    def scale(self) -> Fraction:
        """Counts of output per count of input that a physical gain of 1 makes."""
        return self.input.per_count / self.output.per_count


def interface_of(incoming: Signal, outgoing: Signal, arithmetic: str) -> Interface:
    """Read both ends from the signals of a design.

    Parameters
    ----------
    incoming, outgoing : Signal
        Input and output.
    arithmetic : str
        ``int16`` or ``int32``: the type where a signal names none.

    Raises
    ------
    RealizeError
        When a range or a size of a count is missing, a range holds a single count or not zero, or the type cannot
        hold it; the message gives the lines to add.
    """
    ends = ("[signals.input]", incoming), ("[signals.output]", outgoing)
    missing = [(table, signal) for table, signal in ends if signal.range is None or signal.per_count is None]
    if missing:
        raise _missing(missing, arithmetic)
    return Interface(*(_port(table, signal, arithmetic) for table, signal in ends))


def type_range(name: str) -> tuple[int, int]:
    """Least and greatest value of a C type."""
    bits, signed = TYPES[name]
    return (-(1 << bits - 1), (1 << bits - 1) - 1) if signed else (0, (1 << bits) - 1)


def _port(table: str, signal: Signal, arithmetic: str) -> Port:
    assert signal.range is not None
    assert signal.per_count is not None
    kind = signal.type or arithmetic
    low, high = ceil(signal.range[0] / signal.per_count), floor(signal.range[1] / signal.per_count)
    if low >= high:
        raise RealizeError(
            f"{table} per_count",
            f"a count of {signal.per_count}, of which the range from {signal.range[0]} to {signal.range[1]} holds "
            f"{'one' if low == high else 'none'}",
            "a range of several counts",
            "write the physical size of one count of the converter, or widen the range",
        )
    if not low <= 0 <= high:
        raise RealizeError(
            f"{table} range",
            f"from {signal.range[0]} to {signal.range[1]}, without zero",
            "a range that holds physical zero, where the state starts and rests",
            "measure the signal from a zero inside the range: change range, and offset by as many counts",
        )
    _refuse_narrow_type(table, kind, signal, low, high)
    return Port(low, high, signal.offset, kind, signal.per_count)


def _missing(ends: Sequence[tuple[str, Signal]], arithmetic: str) -> RealizeError:
    lines: list[str] = []
    names: dict[str, None] = {}
    for table, signal in ends:
        lines.append(f"\n{table}")
        if signal.range is None:
            lines.append("range = [-1.0, 1.0]      # physical")
            names["range"] = None
        if signal.per_count is None:
            lines.append('per_count = "1/1000"     # physical size of one count')
            names["per_count"] = None
    return RealizeError(
        " and ".join(table for table, _ in ends),
        f"no {' and '.join(names)}, which {arithmetic} arithmetic works in",
        "range and per_count of input and output",
        "add these lines, with your converter's figures:\n" + "\n".join(lines),
    )


def _refuse_narrow_type(table: str, kind: str, signal: Signal, low: int, high: int) -> None:
    """Refuse a type that cannot hold the counts; ``low`` and ``high`` without the offset."""
    least, most = type_range(kind)
    if least <= low + signal.offset and high + signal.offset <= most:
        return
    raise RealizeError(
        f"{table} type",
        f"{kind}, although the range reaches from count {low + signal.offset} to {high + signal.offset}",
        f"counts from {least} to {most}",
        _nearest_fit(kind, signal, low, high),
    )


def _nearest_fit(kind: str, signal: Signal, low: int, high: int) -> str:
    """What makes the type hold the counts: an offset, one count less at the top, or another type."""
    least, most = type_range(kind)
    offset, advice = signal.offset, []
    if least == 0 and low + offset < 0 and high - low <= most + 1:
        offset = -low
        advice.append(f"offset = {offset} makes the lowest count 0")
    if low + offset >= least and high + offset == most + 1:
        then = "then " if advice else ""
        advice.append(f"the top end is {then}one count too high: range = {_one_count_less(signal)}")
    if advice:
        return "; ".join(advice)
    ends = low + offset, high + offset
    fitting = [name for name in TYPES if type_range(name)[0] <= ends[0] and ends[1] <= type_range(name)[1]]
    if fitting:
        return f'write type = "{fitting[0]}", or check offset and per_count'
    return "a coarser per_count or a narrower range"


def _one_count_less(signal: Signal) -> str:
    """The range as a line of the file, its top end lower by a count."""
    assert signal.range is not None
    low, high = signal.range
    below = str(low) if low.denominator == 1 else f'"{low}"'
    return f'[{below}, "{high} - {signal.per_count}"]'
