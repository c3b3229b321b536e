"""Objects of ``scipy.signal`` from and to numbers; beside the second opinion of the audit alone in loading scipy.

A state space becomes a ratio of polynomials by the method of Faddeev and LeVerrier (Gantmacher, The Theory of
Matrices 1, chapter IV), exactly: on the rational numbers its floats count as.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import lcm
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import signal

from realize.algebra.expression import exact_text
from realize.algebra.expression.ratio import MAX_DEGREE
from realize.api.entries import entry, exactly, row
from realize.errors import RealizeError

_SOURCE = "TransferFunction.from_scipy"

_ALLOWED = "a continuous TransferFunction, ZerosPolesGain or StateSpace of scipy.signal, with one input and one output"

Matrix = list[list[int]]


def entries_of(system: Any) -> dict[str, object]:
    """A continuous system as the table ``[design]`` of a design file has it.

    Raises
    ------
    RealizeError
        When it is discrete, has several inputs or outputs, or is none.
    """
    if isinstance(system, signal.dlti):
        found = f"a discrete system with dt = {system.dt}"
        raise RealizeError(_SOURCE, found, _ALLOWED, "give the continuous system it was made from")
    if isinstance(system, signal.TransferFunction):
        above, below = _one_row(system.num), _one_row(system.den)
        return {"numerator": row(above, _SOURCE), "denominator": row(below, _SOURCE)}
    if isinstance(system, signal.ZerosPolesGain):
        zeros, poles = _one_row(system.zeros), _one_row(system.poles)
        gain = entry(system.gain, _SOURCE)
        return {"zeros": row(zeros, _SOURCE), "poles": row(poles, _SOURCE), "gain": gain}
    if isinstance(system, signal.StateSpace):
        return _from_states(system)
    found = f"an object of type {type(system).__name__}"
    raise RealizeError(_SOURCE, found, _ALLOWED, "for coefficients, TransferFunction(numerator, denominator)")


def continuous(numerator: npt.NDArray[np.float64], denominator: npt.NDArray[np.float64]) -> Any:
    """``scipy.signal.TransferFunction`` with these very coefficients."""
    return _with_coefficients(signal.TransferFunction([1.0], [1.0]), numerator, denominator)


def discrete(numerator: npt.NDArray[np.float64], denominator: npt.NDArray[np.float64], period_s: float) -> Any:
    """``scipy.signal.TransferFunction`` in z with these very coefficients; leading zeros dropped."""
    first = int(np.flatnonzero(numerator)[0]) if numerator.any() else len(numerator) - 1
    return _with_coefficients(signal.TransferFunction([1.0], [1.0], dt=period_s), numerator[first:], denominator)


def _with_coefficients(system: Any, numerator: Any, denominator: Any) -> Any:
    """Set them one by one: the constructor takes a leading coefficient below 1e-14 for 0."""
    system.num, system.den = numerator, denominator
    return system


def _one_row(values: Any) -> Any:
    """Coefficients or roots of one output; scipy gives several outputs a row each."""
    array = np.atleast_1d(values)
    if array.ndim > 1 and len(array) != 1:
        raise _several(f"{len(array)} outputs")
    return array.ravel()


def _several(found: str) -> RealizeError:
    return RealizeError(_SOURCE, f"a system with {found}", _ALLOWED, "take over one input and one output at a time")


def _from_states(system: Any) -> dict[str, object]:
    """``C (sI - A)^-1 B + D`` with ``(sI - A)^-1 = sum M_k s^(n - k) / det(sI - A)``, all in integers."""
    if system.D.shape != (1, 1):
        raise _several(f"{system.D.shape[1]} inputs and {system.D.shape[0]} outputs")
    order = len(system.A)
    if order > MAX_DEGREE:
        raise RealizeError(_SOURCE, f"{order} states", f"at most {MAX_DEGREE}", "reduce the model first")
    a, b, c = (_rational(matrix) for matrix in (system.A, system.B, system.C))
    unit = lcm(*(value.denominator for line in a for value in line))
    # With A over a common denominator u, A = N/u: det(sI - A) has the coefficients of det(xI - N) over powers of u.
    adjugates, characteristic = _faddeev_leverrier([[int(value * unit) for value in line] for line in a])
    strictly = [Fraction(0)] + [
        sum((c[0][i] * m[i][j] * b[j][0] for i in range(order) for j in range(order)), Fraction(0)) / unit**k
        for k, m in enumerate(adjugates)
    ]
    below = [Fraction(value, unit**k) for k, value in enumerate(characteristic)]
    through = exactly(system.D[0, 0], _SOURCE)
    above = [part + through * whole for part, whole in zip(strictly, below, strict=True)]
    return {"numerator": _texts(above), "denominator": _texts(below)}


def _rational(matrix: Any) -> list[list[Fraction]]:
    return [[exactly(value, _SOURCE) for value in line] for line in matrix]


def _texts(p: Sequence[Fraction]) -> list[str]:
    return [exact_text(value) for value in p]


def _faddeev_leverrier(a: Matrix) -> tuple[list[Matrix], list[int]]:
    """Coefficients of ``adj(xI - A)`` and ``det(xI - A)``, in descending powers of x; the divisions leave no rest."""
    order = len(a)
    adjugates: list[Matrix] = []
    characteristic = [1]
    product = [[0] * order for _ in a]
    for k in range(1, order + 1):
        current = [
            [v + (characteristic[-1] if i == j else 0) for j, v in enumerate(line)] for i, line in enumerate(product)
        ]
        adjugates.append(current)
        columns = list(zip(*current, strict=True))
        product = [[sum(x * y for x, y in zip(line, column, strict=True)) for column in columns] for line in a]
        characteristic.append(-sum(product[i][i] for i in range(order)) // k)
    return adjugates, characteristic
