"""An orthogonal recursion with the poles of a path: its state's norm is the energy of all that is still to come.

Conventions: polynomials in descending powers of z; a denominator is monic. Matrices are integers in units of
``2**-BITS``.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from functools import cached_property, lru_cache
from math import isqrt
from typing import Any

import numpy as np

from realize.algebra import polynomial as poly

Integers = np.ndarray[Any, np.dtype[np.object_]]

#: Bits of the orthogonal recursion. Entries start within ``3 (n + 2)`` units; each of at most 60 squarings doubles
#: errors, and sums cost another half bit each: 90 bits are right at the end for order 16, to be rounded to 53.
BITS = 192

#: Squarings of the recursion after which a pole is taken to be too near the circle: 1 - |z| below 2**-60.
_MOST_SQUARINGS = 60

#: A power contracts by half when its computed norm is below that by what the errors of :data:`BITS` never reach.
_HALF = (1 << 2 * BITS - 2) - (1 << 2 * BITS - 40)

#: Bits of a square root and of a result: far below any width.
DIGITS = 64


class Lattice:
    """An orthogonal recursion with the poles of a stable monic denominator.

    Attributes
    ----------
    reflections : list of Fraction
        ``kappa_0 = 1``, then those of the recursion of Schur and Cohn.
    polynomials : list
        The monic ``A_k`` of degree k < n that the recursion passes.
    energies : list of Fraction
        ``sum h^2`` of ``z A_k/A_n``, the ``A_k`` being orthogonal in this sense.

    Notes
    -----
    Szego's recursion: ``z A_k = A_{k+1} - kappa_{k+1} A*_k`` and ``A*_k = (1 - kappa_k^2) A*_{k-1} + kappa_k A_k``,
    with ``A*`` the reversed polynomial; so multiplication by z modulo ``A_n`` has the matrix
    ``-kappa_{k+1} kappa_j prod_{m=j+1..k} (1 - kappa_m^2)`` for ``j <= k`` and 1 below the diagonal, and the energies
    are ``prod_{m>k} 1/(1 - kappa_m^2)``. In states scaled by their roots the squared norm of a state is the energy of
    all that is still to come, ``h = c x`` with ``c = sqrt(1 - kappa_n^2)`` times the last unit vector, whence three
    bounds, exact and free of the conditioning of the poles: no power of ``M`` has a norm above 1; m terms add up to
    at most ``sqrt(m) |x|``; all terms to at least ``|x|/|c|``.
    """

    def __init__(self, denominator: poly.Rationals) -> None:
        self.denominator = denominator
        self.order = poly.degree(denominator)
        self.reflections, self.polynomials = _stepped_down(denominator)
        self.energies = [Fraction(1)]
        for kappa in self.reflections[:0:-1]:
            self.energies.insert(0, self.energies[0] / (1 - kappa * kappa))
        self.energies.pop()

    @cached_property
    def powers(self) -> list[Integers]:
        """``M**(2**j)`` in units of ``2**-BITS``, until one contracts by half."""
        return squarings(self._matrix())

    @property
    def resolved(self) -> bool:
        """Whether a power was found that contracts by half."""
        return _halves(self.powers[-1])

    @property
    def halving(self) -> int:
        """Samples in which a state shrinks by half at least, and its energy to a quarter."""
        return 1 << (len(self.powers) - 1)

    @property
    def growth(self) -> Fraction:
        """A bound of the sum of ``|h|`` of ``1/a``."""
        return self.tail(self.energies[0])

    def coordinates(self, p: Sequence[Fraction]) -> list[Fraction]:
        """Coefficients of ``p``, of degree n - 1 at most and given in full, in terms of the ``A_k``."""
        rest = list(p)
        found = []
        for A in reversed(self.polynomials):
            lead = rest[0]
            found.append(lead)
            rest = [c - lead * a for c, a in zip(rest[1:], A[1:], strict=True)]
        return found[::-1]

    def energy(self, coordinates: Sequence[Fraction]) -> Fraction:
        """``sum h^2`` of ``z p/a``."""
        return sum((x * x * e for x, e in zip(coordinates, self.energies, strict=True)), Fraction(0))

    def tail(self, energy: Fraction) -> Fraction:
        """A bound of the sum of all ``|h|`` of this energy.

        Notes
        -----
        ``m = halving`` terms add up to at most ``sqrt(m energy)``, the next m to half of that at most, and so on.
        """
        return 2 * root_ends(self.halving * energy)[1]

    def least(self, p: Sequence[Fraction], energy: Fraction) -> Fraction:
        """A bound from below of the sum of all ``|h|`` of ``z p/a``.

        Notes
        -----
        ``sum h^2`` over ``max |h|``, and what constant and alternating inputs make.
        """
        at_ends = (abs(poly.evaluate(p, x) / poly.evaluate(self.denominator, x)) for x in (Fraction(1), Fraction(-1)))
        return max(root_ends(energy * self.energies[-1])[0], *at_ends)

    def _matrix(self) -> Integers:
        """``M``, every entry within ``3 (n + 2)`` units."""
        n = self.order
        kappa = [_fixed(k) for k in self.reflections]
        root = [fixed_root(1 - k * k) for k in self.reflections]
        M = np.zeros((n, n), dtype=object)
        for k in range(n):
            value = -kappa[k + 1]
            for j in range(k, -1, -1):
                M[j, k] = value * kappa[j] >> BITS
                value = value * root[j] >> BITS
            if k + 1 < n:
                M[k + 1, k] = root[k + 1]
        return M


@lru_cache(maxsize=64)
def lattice_of(denominator: poly.Rationals) -> Lattice:
    """The lattice of a stable monic denominator, kept for the next path with the same poles."""
    return Lattice(denominator)


def _stepped_down(denominator: poly.Rationals) -> tuple[list[Fraction], list[poly.Rationals]]:
    """Reflection coefficients and polynomials, ascending in degree."""
    reflections, polynomials = [], []
    A = denominator
    while len(A) > 1:
        kappa = A[-1]
        A = tuple((c - kappa * d) / (1 - kappa * kappa) for c, d in zip(A[:-1], A[:0:-1], strict=True))
        reflections.append(kappa)
        polynomials.append(A)
    return [Fraction(1), *reversed(reflections)], polynomials[::-1]


def squarings(matrix: Integers) -> list[Integers]:
    """Squares of squares, until one contracts by half."""
    powers = [matrix]
    while not _halves(powers[-1]) and len(powers) <= _MOST_SQUARINGS:
        powers.append(powers[-1] @ powers[-1] >> BITS)
    return powers


def _halves(matrix: Integers) -> bool:
    """Whether the norm is below 1/2, by the sum of squares."""
    return int((matrix * matrix).sum()) <= _HALF


def _fixed(value: Fraction) -> int:
    """In units of ``2**-BITS``, rounded down."""
    return (value.numerator << BITS) // value.denominator


def fixed_root(value: Fraction) -> int:
    """Square root in the same units, rounded down."""
    return isqrt((value.numerator << 2 * BITS) // value.denominator)


def root_ends(value: Fraction) -> tuple[Fraction, Fraction]:
    """Both ends of an enclosure of a square root, :data:`DIGITS` bits long."""
    shift = max(0, DIGITS - floor_log2(value) // 2) if value else 0
    root = isqrt((value.numerator << 2 * shift) // value.denominator)
    return Fraction(root, 1 << shift), Fraction(root + 1, 1 << shift)


def floor_log2(value: Fraction) -> int:
    """Exponent e with ``2**(e - 1) < value < 2**(e + 1)``."""
    return value.numerator.bit_length() - value.denominator.bit_length()
