"""The sum of all ``|h|`` from a state of a lattice on, by blocks of one sign that are summed at a stroke.

In double precision, whose errors every state carries along.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from functools import lru_cache, reduce
from math import fsum
from typing import Any, NamedTuple

import numpy as np

from realize.arithmetic.lattice import BITS, Integers, Lattice, fixed_root, root_ends, squarings

Floats = np.ndarray[Any, np.dtype[np.float64]]
Mask = np.ndarray[Any, np.dtype[np.bool_]]

#: So a state of norm 1 carried on in them is within this of the true one.
_FIXED_ERROR = 2.0**-88

#: Blocks of ``2**6`` terms are summed one by one, in pieces of 4096 blocks: long enough to hide the calls, short enough
#: for a cache.
_LEAF_LEVEL = 6
_CHUNK = 4096

#: Blocks without a sign of their own, beyond which the rest is only bounded: ``2**24`` terms, a fifth of a second.
_MOST_BLOCKS = 1 << 18

#: Starting points are at most ``2**13``: a sixteenth of the blocks, for about so many are needed from each.
_MOST_PHASE_LEVELS = 13

#: Unit roundoff of double precision.
U = 2.0**-53

#: Allowance for the roundings in the computation of a bound itself, far fewer than 1000.
_SLACK = 1 + 2.0**-40


def by_blocks(
    lattice: Lattice, state: Sequence[Fraction], energy: Fraction, tolerance: Fraction
) -> tuple[Fraction, Fraction]:
    """Both ends of the sum of all ``|h|`` from a state on.

    Notes
    -----
    Every q-th term is taken, from q starting points, q being the number of samples in which the state comes back most
    nearly to where it was, or to the opposite: the terms then keep their sign for long, or change it every time.
    """
    if energy == 0:
        return Fraction(0), Fraction(0)
    norm_low, norm_high = root_ends(energy)
    first = _unit_state(lattice, state, energy)
    plain = _strided(lattice, 1)
    allowed = float(tolerance / norm_high)
    stride = _stride(plain, first)
    strided = plain if stride == 1 else _strided(lattice, stride)
    starts, left = _starts(strided, first, lattice.halving, allowed)
    sums = _split(strided, _phases(plain, starts, abs(stride)))
    low, high = sums or _loosely(plain, *_starts(plain, first, lattice.halving, allowed))
    return norm_low * Fraction(max(low, 0.0)), norm_high * Fraction((high + left) * _SLACK)


class _Strided(NamedTuple):
    """Every q-th state of a lattice, or its opposite every other time; ``h = reach x[-1]``. In double precision.

    Attributes
    ----------
    halved : array
        The first power of ``N = +-M**q`` found that contracts by half, in units of ``2**-BITS``.
    powers : list of array
        ``N**(2**j)``, up to that one.
    rows : list of array
        ``c`` times the sum of the first ``2**j`` powers of ``N``.
    leaf : list of array
        ``c`` times each of them, for blocks that are summed one by one.
    change : array
        ``N - 1``.
    reach : float
        ``|c|``.
    unit : float
        What applying one of these to a state of norm 1 adds to its error: ``n + 2`` roundings of ``|M| |x|``, whose
        norm is at most ``sqrt(n)``. The matrices are rounded once, from some 80 bits more.
    """

    halved: Integers
    powers: list[Floats]
    rows: list[Floats]
    leaf: list[Floats]
    change: Floats
    reach: float
    unit: float


class _States(NamedTuple):
    """States as columns, and how far each can be from the true one: no power of ``M`` makes that grow."""

    columns: Floats
    errors: Floats

    def advanced(self, matrix: Floats, unit: float) -> _States:
        """All states, a matrix later."""
        errors = self.errors + unit * _norms(self.columns)
        return _States(_apply(matrix, self.columns), errors * _SLACK)

    def chosen(self, which: slice | Mask) -> _States:
        """Some of the states."""
        return _States(self.columns[:, which], self.errors[which])


@lru_cache(maxsize=16)
def _strided(lattice: Lattice, stride: int) -> _Strided:
    """For ``M**stride``, or ``-M**-stride`` where that is negative."""
    powers = lattice.powers if stride == 1 else squarings(_power(lattice.powers, stride))
    n = lattice.order
    one = np.diag(np.full(n, 1 << BITS, dtype=object))
    c = np.array([0] * (n - 1) + [fixed_root(1 / lattice.energies[-1])], dtype=object)
    rows, leaf = [c], [c]
    for power in powers[:-1]:
        rows.append(rows[-1] + (rows[-1] @ power >> BITS))
    for _ in range((1 << min(_LEAF_LEVEL, len(powers) - 1)) - 1):
        leaf.append(leaf[-1] @ powers[0] >> BITS)
    unit = (n + 2) * n**0.5 * U * _SLACK
    all_powers, all_rows, leaves = ([_floats(m) for m in matrices] for matrices in (powers, rows, leaf))
    return _Strided(powers[-1], all_powers, all_rows, leaves, _floats(powers[0] - one), float(_floats(c)[-1]), unit)


def _power(powers: Sequence[Integers], exponent: int) -> Integers:
    chosen = [power for j, power in enumerate(powers) if abs(exponent) >> j & 1]
    product: Integers = reduce(lambda a, b: a @ b >> BITS, chosen)
    return product if exponent > 0 else -product


def _unit_state(lattice: Lattice, state: Sequence[Fraction], energy: Fraction) -> Integers:
    """The state in orthogonal coordinates, divided by its norm, in units of ``2**-BITS``."""
    sizes = [fixed_root(x * x * e / energy) for x, e in zip(state, lattice.energies, strict=True)]
    return np.array([[-size if x < 0 else size] for size, x in zip(sizes, state, strict=True)], dtype=object)


def _rounded_states(columns: Integers) -> _States:
    """To double precision; what is known of ``BITS`` bits at the end is far below it."""
    floats = _floats(columns)
    return _States(floats, 2 * len(floats) * U * _norms(floats) + _FIXED_ERROR)


def _stride(plain: _Strided, first: Integers) -> int:
    """Samples in which the state comes back to where it was, or, negative, to the opposite.

    Chosen so that starting points and changes of sign are fewest together: the smaller what a stride moves the state,
    the more strides from one change to the next.
    """
    levels = len(plain.powers)
    states = _phases(plain, _rounded_states(first), 1 << max(0, min(2 * levels // 3, levels - 1, _MOST_PHASE_LEVELS)))
    # Measured at the end, when what dies first is gone.
    backward = states.columns[:, ::-1]
    last = float(_norms(backward[:, :1])[0])
    if len(states.errors) == 1 or last == 0:
        return 1
    moved = np.stack([_norms(backward[:, 1:] - sign * backward[:, :1]) for sign in (1, -1)])
    strides = np.arange(1, moved.shape[1] + 1)
    sign, index = divmod(int(np.argmin(strides + moved / last * 2.0**levels)), len(strides))
    return (index + 1) * (-1 if sign else 1)


def _phases(plain: _Strided, starts: _States, count: int) -> _States:
    """The states of ``count`` samples from every start on."""
    states, level = starts, 0
    while 1 << level < count:
        states = _joined([states, states.advanced(plain.powers[level], plain.unit)])
        level += 1
    return states.chosen(slice(count * len(starts.errors)))


def _joined(parts: Sequence[_States]) -> _States:
    columns, errors = zip(*parts, strict=True)
    return _States(np.concatenate(columns, axis=1), np.concatenate(errors))


def _starts(strided: _Strided, first: Integers, halving: int, allowed: float) -> tuple[_States, float]:
    """States at the start of as many longest blocks as matter, and a bound of all that is left out."""
    columns = [first]
    while True:
        following = strided.halved @ columns[-1] >> BITS
        left = 2 * float(halving) ** 0.5 * (float(_norms(_floats(following))[0]) + _FIXED_ERROR) * _SLACK
        if left <= allowed:
            return _rounded_states(np.concatenate(columns, axis=1)), left
        columns.append(following)


def _split(strided: _Strided, starts: _States) -> tuple[float, float] | None:
    """Both ends of the sum over blocks, halved until each has one sign; ``None`` when they become too many.

    Notes
    -----
    ``m = 2**j`` terms have one sign where the first exceeds ``sqrt(m) |(M - 1) x|`` or ``m |c| |(M - 1) x|``: the
    differences ``h[k+1] - h[k]`` are the response of the state ``(M - 1) x``, and add up to that at most. Their sum is
    then a row times the state, and off by ``sqrt(m)`` times the error of the state at most.
    """
    states, total, slack = starts, [], []
    for level in range(len(strided.powers) - 1, -1, -1):
        certain = _of_one_sign(strided, states, level)
        done, states = states.chosen(certain), states.chosen(~certain)
        total += abs(_apply(strided.rows[level][np.newaxis], done.columns)[0]).tolist()
        slack += (2.0 ** (level / 2) * _off(strided, done)).tolist()
        if 1 << level == len(strided.leaf):
            total += _one_by_one(strided.leaf, states.columns).tolist()
            slack += (2.0 ** (level / 2) * _off(strided, states)).tolist()
            break
        if len(states.errors) > _MOST_BLOCKS:
            return None
        states = _joined([states, states.advanced(strided.powers[level - 1], strided.unit)])
    found = fsum(total)
    spread = (fsum(slack) + 2 * len(strided.leaf) * U * found) * _SLACK
    return found - spread, found + spread


def _off(strided: _Strided, states: _States) -> Floats:
    """How far a row of norm 1 times each state can be from the truth."""
    return np.asarray(states.errors + strided.unit * _norms(states.columns))


def _of_one_sign(strided: _Strided, states: _States, level: int) -> Mask:
    off = _off(strided, states)
    first = abs(strided.reach * states.columns[-1])
    change = _norms(_apply(strided.change, states.columns)) + 2 * off
    most = min(2.0 ** (level / 2), 2.0**level * strided.reach)
    return np.asarray(first > (off + most * change) * _SLACK)


def _one_by_one(rows: Sequence[Floats], columns: Floats) -> Floats:
    """For each state, the sum of ``|row x|``; in pieces that stay in a cache."""
    sums = np.zeros(columns.shape[1])
    for i in range(0, len(sums), _CHUNK):
        piece = columns[:, i : i + _CHUNK]
        for row in rows:
            sums[i : i + _CHUNK] += abs(_apply(row[np.newaxis], piece)[0])
    return sums


def _loosely(plain: _Strided, starts: _States, left: float) -> tuple[float, float]:
    """Both ends of the sum from the energies of blocks alone.

    Notes
    -----
    ``|x|^2`` less ``|M**m x|^2`` is the energy of m terms: their sum is at most ``sqrt(m)`` times its root, and at
    least the energy over the largest term, which is ``|c| |x|`` at most. Undamped, that is -21 and +11 % off.
    """
    states, level = starts, len(plain.powers) - 1
    for _ in range(min(level, _LEAF_LEVEL)):
        level -= 1
        states = _joined([states, states.advanced(plain.powers[level], plain.unit)])
    norms, off = _norms(states.columns), _off(plain, states)
    energy = norms**2 - _norms(_apply(plain.powers[level], states.columns)) ** 2
    error = 8 * off * (norms + off)
    low = np.maximum(energy - error, 0) / (plain.reach * (norms + off))
    high = (2.0**level * np.maximum(energy + error, error)) ** 0.5
    return fsum(low.tolist()) / _SLACK, (fsum(high.tolist()) + left) * _SLACK


def _apply(matrix: Floats, columns: Floats) -> Floats:
    """Matrix times columns, term by term in a fixed order: the same bits on every machine."""
    product = np.zeros((len(matrix), columns.shape[1]))
    for i, row in enumerate(matrix.tolist()):
        for factor, column in zip(row, columns, strict=True):
            if factor:
                product[i] += factor * column
    return product


def _norms(columns: Floats) -> Floats:
    """Euclidean norm of each column, summed in a fixed order."""
    total = np.zeros(columns.shape[1])
    for row in columns:
        total += row * row
    return np.asarray(np.sqrt(total))


def _floats(values: Integers) -> Floats:
    """Nearest doubles of numbers in units of ``2**-BITS``."""
    return np.asarray(values / (1 << BITS), dtype=np.float64)
