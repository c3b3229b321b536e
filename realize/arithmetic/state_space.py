"""Linear paths between the signals of a realization, exactly.

A path is a ratio of polynomials in descending powers of z. A chain of sections composes its paths directly; any
other structure is described by the matrices ``x[k+1] = A x[k] + B u[k]``, ``y[k] = C x[k] + D u[k]``, found by
running its own recursion on unit vectors. Inputs are the input and the places where something is rounded; outputs
are whatever must not overflow.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from functools import reduce
from math import lcm
from operator import mul
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.errors import RealizeError

Vector = tuple[Fraction, ...]
Matrix = tuple[Vector, ...]
Integers = tuple[tuple[int, ...], ...]

#: ``b`` and ``a`` of a section in ascending powers of 1/z, ``a`` without its leading 1.
Coefficients = tuple[Sequence[Fraction | int], Sequence[Fraction | int]]


class PulseRatio(NamedTuple):
    """A path: ``numerator/denominator`` in lowest terms, descending powers of z, the denominator's lead 1."""

    numerator: poly.Rationals
    denominator: poly.Rationals


class StateSpace(NamedTuple):
    """Matrices of ``x[k+1] = A x[k] + B u[k]``, ``y[k] = C x[k] + D u[k]``, as tuples of rows."""

    A: Matrix
    B: Matrix
    C: Matrix
    D: Matrix


def pulse_ratio(numerator: Sequence[Fraction | int], denominator: Sequence[Fraction | int]) -> PulseRatio:
    """Bring a path to lowest terms.

    Parameters
    ----------
    numerator, denominator : sequence of Fraction or int
        Descending powers of z.

    Raises
    ------
    RealizeError
        When the denominator is zero, or its degree is below the numerator's: the output would come before its cause.
    """
    top, bottom = (poly.trimmed(Fraction(c) for c in p) for p in (numerator, denominator))
    if len(bottom) < max(len(top), 1):
        raise RealizeError(
            "path",
            f"numerator of degree {poly.degree(top)} over a denominator of degree {poly.degree(bottom)}",
            "a denominator other than zero, of at least the numerator's degree",
            "divide both by the same power of z, or delay the path",
        )
    if not top:
        return PulseRatio((), (Fraction(1),))
    common = poly.greatest_common_divisor(poly.primitive(top), poly.primitive(bottom))
    if len(common) > 1:
        top, bottom = (poly.divide(p, tuple(map(Fraction, common)))[0] for p in (top, bottom))
    return PulseRatio(poly.scale(top, 1 / bottom[0]), poly.scale(bottom, 1 / bottom[0]))


def section_ratio(b: Sequence[Fraction | int], a: Sequence[Fraction | int]) -> PulseRatio:
    """Path through a section; ``b`` and ``a`` in ascending powers of 1/z, ``a`` without its leading 1."""
    order = max(len(b) - 1, len(a))
    return pulse_ratio((*b, *(0,) * (order + 1 - len(b))), (1, *a, *(0,) * (order - len(a))))


def in_series(*ratios: PulseRatio) -> PulseRatio:
    """Product of paths."""
    return reduce(_product, ratios, PulseRatio((Fraction(1),), (Fraction(1),)))


def in_parallel(*ratios: PulseRatio) -> PulseRatio:
    """Sum of paths."""
    return reduce(_sum, ratios, PulseRatio((), (Fraction(1),)))


def scaled(ratio: PulseRatio, factor: Fraction) -> PulseRatio:
    """Path times a number."""
    return PulseRatio(poly.scale(ratio.numerator, factor), ratio.denominator) if factor else in_parallel()


def probed(
    step: Callable[[Vector, Vector], tuple[Sequence[Fraction], Sequence[Fraction]]], states: int, inputs: int
) -> StateSpace:
    """Matrices of a recursion, found by running it on unit vectors.

    Parameters
    ----------
    step : callable
        ``step(state, inputs)`` returns the next state and the outputs, in rational arithmetic, nothing rounded.
    states, inputs : int
        Lengths of its arguments.

    Raises
    ------
    RealizeError
        When the step does not answer zero with zero: it is not linear, an offset was left in.
    """
    zero = (Fraction(0),) * (states + inputs)
    if any(any(part) for part in step(zero[:states], zero[states:])):
        raise RealizeError(
            "recursion", "it answers zero with something else", "a linear recursion", "take the offsets out"
        )
    answers = []
    for i in range(states + inputs):
        unit = (*zero[:i], Fraction(1), *zero[i + 1 :])
        answers.append(step(unit[:states], unit[states:]))
    following, outputs = (_transposed([tuple(answer[part]) for answer in answers]) for part in (0, 1))
    return StateSpace(
        *(tuple(row[:states] for row in following), tuple(row[states:] for row in following)),
        *(tuple(row[:states] for row in outputs), tuple(row[states:] for row in outputs)),
    )


def paths(system: StateSpace) -> tuple[tuple[PulseRatio, ...], ...]:
    """Paths from every input of a system to every output.

    Returns
    -------
    tuple of tuple of PulseRatio
        Entry ``[output][input]``.

    Notes
    -----
    ``adj(zI - A)`` and the characteristic polynomial by the recursion of Faddeev and LeVerrier, exactly: in integers,
    each matrix in a unit of its own, which a common denominator is.
    """
    (A, unit), (B, unit_in), (C, unit_out) = (_in_integers(matrix) for matrix in (system.A, system.B, system.C))
    adjugate, coefficients = _adjugate(A)
    bottom = tuple(Fraction(c, unit**k) for k, c in enumerate(coefficients))
    terms = [_multiply(_multiply(C, N), B) for N in adjugate]
    units = [unit_in * unit_out * unit**k for k in range(len(terms))]
    return tuple(
        tuple(
            pulse_ratio(
                poly.add(
                    poly.scale(bottom, d),
                    poly.trimmed(Fraction(term[i][j], size) for term, size in zip(terms, units, strict=True)),
                ),
                bottom,
            )
            for j, d in enumerate(row)
        )
        for i, row in enumerate(system.D)
    )


def _product(first: PulseRatio, second: PulseRatio) -> PulseRatio:
    return pulse_ratio(
        poly.multiply(first.numerator, second.numerator), poly.multiply(first.denominator, second.denominator)
    )


def _sum(first: PulseRatio, second: PulseRatio) -> PulseRatio:
    crossed = (
        poly.multiply(first.numerator, second.denominator),
        poly.multiply(second.numerator, first.denominator),
    )
    return pulse_ratio(poly.add(*crossed), poly.multiply(first.denominator, second.denominator))


def _in_integers(matrix: Matrix) -> tuple[Integers, int]:
    """A matrix times the common denominator of its entries, and that."""
    unit = lcm(*(c.denominator for row in matrix for c in row))
    return tuple(tuple(c.numerator * (unit // c.denominator) for c in row) for row in matrix), unit


def _adjugate(A: Integers) -> tuple[list[Integers], list[int]]:
    """Coefficients of ``adj(zI - A)`` and of ``det(zI - A)``, descending powers of z: integers as those of A are."""
    n = len(A)
    adjugate, bottom = [], [1]
    N: Integers = tuple(tuple(int(i == j) for j in range(n)) for i in range(n))
    for k in range(1, n + 1):
        adjugate.append(N)
        AN = _multiply(A, N)
        bottom.append(-sum(AN[i][i] for i in range(n)) // k)
        N = tuple(tuple(c + bottom[-1] * (i == j) for j, c in enumerate(row)) for i, row in enumerate(AN))
    return adjugate, bottom


def _multiply(first: Integers, second: Integers) -> Integers:
    columns = list(zip(*second, strict=True))
    return tuple(tuple(sum(map(mul, row, column)) for column in columns) for row in first)


def _transposed(rows: Sequence[Vector]) -> Matrix:
    return tuple(zip(*rows, strict=True))
