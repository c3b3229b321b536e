"""Responses without partial fractions: first-order sections in series, moved by any number of steps at once.

Partial fractions lose every digit where poles lie close together, as rounded coefficients leave them; a series of
first-order sections does not. In the variable v, which is s or z - 1,

    gain v^k prod(1 - v/zero) / prod(1 - v/pole)

with more poles than zeros is ``c (v - A)^-1 b`` with A lower triangular, the poles on its diagonal. Its impulse
response is ``c exp(A t) b`` for v = s, and ``c (1 + A)^n b``, n samples after the first, for v = z - 1. Both
are reached by doubling: with ``D`` what a step changes, two steps change ``2 D + D D``, which keeps the digits of
slow modes that ``1 + D`` would lose.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

Complex = npt.NDArray[np.complex128]
Real = npt.NDArray[np.float64]
Whole = npt.NDArray[np.int64]

#: Terms of the exponential series at the finest step, where ``|pole| h <= 1/2``: the first one left out is below
#: ``2**-24 / 24!``, less than 1e-30.
_SERIES_TERMS = 24


#: Factor by which a section may amplify a slow signal before it takes it back: half a digit.
_EASY = 3.0


class Chain:
    """A strictly proper factored ratio as ``c (v - A)^-1 b``.

    Parameters
    ----------
    gain : float
        In front of the factors ``1 - v/root``, or ``v`` for a root at 0.
    zeros, poles : sequence of complex
        Every root by itself; fewer zeros than poles.

    Notes
    -----
    ``1 - v/zero`` adds a derivative. Over a pole that is no faster than the zero the derivative is at hand; over a
    faster one it is a small difference of large numbers. So zeros are given poles in ascending size, each the nearest
    of those that are slow enough. Sections without a zero come first: they smooth what the others differentiate.
    """

    def __init__(self, gain: float, zeros: Sequence[complex], poles: Sequence[complex]) -> None:
        zeros, poles = _without_common_origin(zeros, poles)
        n = len(poles)
        self.a: Complex = np.zeros((n, n), complex)
        self.b: Complex = np.zeros(n, complex)
        out: Complex = np.zeros(n, complex)
        for i, (pole, zero) in enumerate(_in_order(zeros, poles)):
            through, drive, tap = _section(pole, zero)
            if i == 0:
                self.b[0] = drive * gain
            else:
                self.a[i] = drive * out
            self.a[i, i] = pole
            out = through * out
            out[i] = tap
        self.c = out


def _without_common_origin(zeros: Sequence[complex], poles: Sequence[complex]) -> tuple[list[complex], list[complex]]:
    common = min(sum(1 for r in roots if r == 0) for roots in (zeros, poles))
    kept = [list(roots) for roots in (zeros, poles)]
    for _ in range(common):
        for roots in kept:
            roots.remove(0)
    return kept[0], kept[1]


def _in_order(zeros: Sequence[complex], poles: Sequence[complex]) -> list[tuple[complex, complex | None]]:
    """Poles with their zeros: those without one first, slow before fast."""
    partner = _partners(zeros, poles)
    order = sorted(range(len(poles)), key=lambda i: (i in partner, abs(poles[i])))
    return [(poles[i], partner.get(i)) for i in order]


def _partners(zeros: Sequence[complex], poles: Sequence[complex]) -> dict[int, complex]:
    """Give every zero a pole of its own; by the pole's index."""
    partner: dict[int, complex] = {}
    for zero in sorted(zeros, key=abs):
        free = (i for i in range(len(poles)) if i not in partner)
        partner[min(free, key=lambda i: _strain(poles[i], zero))] = zero
    return partner


def _strain(pole: complex, zero: complex) -> tuple[float, float]:
    """How much the section of a pole and a zero loses, then how far they are apart in ratio."""
    if zero == 0:
        return abs(pole), 0.0
    return max(_EASY, abs(1 - pole / zero)), abs(pole - zero) / (abs(pole) + abs(zero))


def _section(pole: complex, zero: complex | None) -> tuple[complex, complex, complex]:
    """``(through, drive, tap)`` of one section: ``x' = pole x + drive u``, ``output = through u + tap x``."""
    drive = -pole if pole else 1.0
    if zero is None:
        return 0.0, drive, 1.0
    if zero == 0:
        return -pole, drive, pole
    if pole == 0:
        return -1 / zero, drive, 1.0
    return pole / zero, drive, 1 - pole / zero


class Motion:
    """States of a chain moved by any number of samples, and fractions of one.

    Parameters
    ----------
    change : array
        What the finest step changes: ``exp(A h) - 1``, or A for samples.
    depth : int
        The finest step is ``2**-depth`` samples.
    """

    def __init__(self, change: Complex, depth: int) -> None:
        self._levels = [change]
        self.depth = depth

    @classmethod
    def continuous(cls, a: Complex, period_s: float, least_depth: int) -> Motion:
        """Motion of ``x' = A x``, fine enough for its fastest pole."""
        fastest = float(np.max(np.abs(np.diagonal(a)))) * period_s
        depth = max(least_depth, int(np.ceil(np.log2(max(2 * fastest, 1.0)))))
        return cls(_exponential_less_one(a * np.ldexp(period_s, -depth)), depth)

    def moved(self, states: Complex, whole: Whole, part: Real | None = None) -> Complex:
        """Move each column by its own whole number of samples and part of one.

        Parameters
        ----------
        states : array, (n, count)
        whole : array, (count,)
            Not negative.
        part : array, (count,), optional
            From 0 to below 1; what lies below the finest step is dropped.
        """
        moved = states.copy()
        for j in range(int(whole.max(initial=0)).bit_length()):
            self._apply(j, moved, (whole >> j) & 1 == 1)
        if part is not None:
            part = part.copy()
            for j in range(1, self.depth + 1):
                part *= 2
                chosen = part >= 1
                self._apply(-j, moved, chosen)
                part -= chosen
                if not part.any():
                    break
        return moved

    def _apply(self, level: int, states: Complex, chosen: npt.NDArray[np.bool_]) -> None:
        if chosen.all():
            states += _product(self._level(level), states)
        elif chosen.any():
            states[:, chosen] += _product(self._level(level), states[:, chosen])

    def _level(self, level: int) -> Complex:
        """What ``2**level`` samples change."""
        index = level + self.depth
        while len(self._levels) <= index:
            change = self._levels[-1]
            self._levels.append(2 * change + change @ change)
        return self._levels[index]


def read(row: Complex, states: Complex) -> Real:
    """Real part of a row times each column."""
    product: Real = (row[:, None] * states).sum(axis=0).real
    return product


def _product(triangular: Complex, states: Complex) -> Complex:
    """Lower triangular matrix times states, column by column.

    Not by the matrix product of the linear algebra library: its threads cost milliseconds on arrays of this size where
    processors are busy, and its sums differ between machines.
    """
    product: Complex = triangular[:, :1] * states[0]
    for j in range(1, len(triangular)):
        product[j:] += triangular[j:, j, None] * states[j]
    return product


def _exponential_less_one(x: Complex) -> Complex:
    """``exp(x) - 1`` of a small triangular matrix by its series, to the digits of each entry."""
    total = x
    for i in range(_SERIES_TERMS, 1, -1):
        total = x + x @ total / i
    return total
