"""From numbers of Python and numpy to entries as they stand in a design file, so that one gate reads both.

A binary floating-point number counts as the shortest decimal that tells it from its neighbours in its own format, which
is what Python and numpy print: ``0.1`` is one tenth, as it is in a design file, and so is ``numpy.float32(0.1)``.
Integers, fractions and decimals count as what they are.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from decimal import Decimal
from fractions import Fraction
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt

from realize.algebra.expression import exact_text
from realize.api.wording import in_keywords
from realize.design.gate import Table, WrittenNumber, checked_number
from realize.errors import RealizeError

#: A real number of Python or numpy.
Number: TypeAlias = "int | float | Fraction | Decimal | np.integer[Any] | np.floating[Any]"

#: The same, or a text that is read as in a design file: "1/3", "2*pi*50".
Real: TypeAlias = "Number | str"

#: Real numbers in a row, or a single one.
Reals: TypeAlias = "Real | Sequence[Real] | npt.NDArray[Any]"

#: Roots: complex ones in conjugate pairs.
Roots: TypeAlias = "Sequence[Real | complex] | npt.NDArray[Any]"


class Arguments(Table):
    """The arguments of a call, read as a table of a design file; their names are those of its keys."""

    def where(self, key: str) -> str:
        """Name an argument; the text of a transfer function is the call's own subject."""
        return self.source if key == "transfer" else f"{self.source}, {key}"

    def table(self, key: str) -> Table:
        """Open the values that came by name."""
        return Arguments(dict(super().table(key).entries), f"{self.source}, {key}")


def entry(value: object, where: str) -> object:
    """What stands in a design file for a value of Python.

    Parameters
    ----------
    value : object
        A number, a text, or any nesting of sequences, arrays and mappings of them.
    where : str
        What the user calls it.

    Raises
    ------
    RealizeError
        When a design file has nothing of the kind.
    """
    if isinstance(value, Mapping):
        return {str(key): entry(below, f"{where}, {key}") for key, below in value.items()}
    if isinstance(value, np.ndarray):
        return entry(value[()] if value.ndim == 0 else list(value), where)
    if isinstance(value, (list, tuple)):
        return [entry(each, f"{where}, entry {i}") for i, each in enumerate(value, 1)]
    return value if isinstance(value, (str, bool)) else _number(value, where)


def row(value: object, where: str) -> list[object]:
    """The entries of a sequence or array; a number alone is a row of one."""
    found = entry(value, where)
    return found if isinstance(found, list) else [found]


def coefficients(value: object, where: str) -> list[object]:
    """The entries of a sequence or array of real numbers, or of one alone.

    Raises
    ------
    RealizeError
        As :func:`entry`, and for a complex number.
    """
    found = row(value, where)
    for i, each in enumerate(value if isinstance(value, (list, tuple)) else np.atleast_1d(np.asarray(value)), 1):
        _refuse_complex(each, f"{where}, entry {i}")
    return found


def exactly(value: object, where: str) -> Fraction:
    """The rational number that a number of Python counts as.

    Raises
    ------
    RealizeError
        When it is no finite real number.
    """
    _refuse_complex(value, where)
    with in_keywords():
        return checked_number(entry(value, where), {}, where)


def text_of(value: object, where: str) -> str:
    """A number as text that reads back the same; a text stays as it is."""
    if isinstance(value, str):
        return value
    exact, written = exactly(value, where), entry(value, where)
    return str(written) if isinstance(written, WrittenNumber) else exact_text(exact)


def _refuse_complex(value: object, where: str) -> None:
    if isinstance(value, (complex, np.complexfloating)) and value.imag:
        found = f"the complex number {complex(value):.5g}"
        raise RealizeError(where, found, "real numbers", "roots may be complex, in pairs: TransferFunction.from_roots")


def _number(value: object, where: str) -> object:
    if isinstance(value, np.bool_):
        return bool(value)
    if isinstance(value, (int, np.integer)):
        return int(value)
    if isinstance(value, Fraction):
        return exact_text(value)
    if isinstance(value, float):
        return WrittenNumber(float.__repr__(value))
    if isinstance(value, Decimal):
        return WrittenNumber(str(value) if value.is_finite() else "nan")
    if isinstance(value, np.floating):
        return WrittenNumber(np.format_float_scientific(value, trim="-"))
    if isinstance(value, (complex, np.complexfloating)):
        real, imaginary = _number(value.real, where), _number(value.imag, where)
        return [real, imaginary] if value.imag else real
    raise RealizeError(
        where,
        f"an object of type {type(value).__name__}",
        "numbers, texts, and sequences, arrays or mappings of them",
        "convert it to a number or an array of numbers",
    )
