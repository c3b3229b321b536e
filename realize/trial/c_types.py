"""The C types of an input or output: how their values are written in the vectors, stored, and compared."""

from __future__ import annotations

import struct
from collections.abc import Sequence
from math import isnan

from realize.firmware.c_text import hexadecimal

#: Letter in the notation of ``struct`` of each type that an emitted function may take or return.
LETTERS = {
    "float": "f",
    "double": "d",
    "int8_t": "b",
    "uint8_t": "B",
    "int16_t": "h",
    "uint16_t": "H",
    "int32_t": "i",
    "uint32_t": "I",
}

#: Types that hold real numbers; the others hold integers.
REAL = ("float", "double")

#: Real numbers that are not written in hexadecimal.
_WORDS = ("nan", "inf", "-inf")

Value = int | float


def size(kind: str) -> int:
    """Bytes of a type."""
    return struct.calcsize("=" + LETTERS[kind])


def packed(kind: str, values: Sequence[Value], order: str) -> bytes:
    """Values as they lie in memory; the order of bytes is ``<``, ``>`` or ``=`` for that of this machine."""
    return struct.pack(f"{order}{len(values)}{LETTERS[kind]}", *values)


def unpacked(kind: str, content: bytes, order: str) -> tuple[Value, ...]:
    """The reverse of :func:`packed`; of a value that is not whole, nothing."""
    count = len(content) // size(kind)
    return struct.unpack(f"{order}{count}{LETTERS[kind]}", content[: count * size(kind)])


def read(kind: str, text: str) -> Value:
    """Read a value as the vectors write it.

    Raises
    ------
    ValueError
        When it is no value of the type, exactly.
    """
    if kind in REAL and "0x" not in text and text not in _WORDS:
        raise ValueError(text)  # decimals would be read as if they were hexadecimal
    value = float.fromhex(text) if kind in REAL else int(text)
    try:
        (stored,) = unpacked(kind, packed(kind, [value], "="), "=")
    except (struct.error, OverflowError):
        raise ValueError(text) from None
    if not same(kind, value, stored):
        raise ValueError(text)
    return value


def same(kind: str, one: Value, other: Value) -> bool:
    """Whether two values have the same bits; every NaN counts as the same, since its bits are left to the processor."""
    if kind in REAL and isnan(one) and isnan(other):
        return True
    return one == other and (kind not in REAL or str(one) == str(other))


def written(kind: str, value: Value) -> str:
    """A value as the vectors write it."""
    return hexadecimal(float(value)) if kind in REAL else str(value)
