"""Worst-case peak gains: the sum of ``|h[k]|``, enclosed.

It is the largest output that any input within -+1 can cause, and no bound below it holds. The impulse response is
summed in scaled integers; what is left when that takes too long is an orthogonal recursion, whose blocks of one sign
are summed at a stroke.

Conventions: polynomials in descending powers of z; a denominator is monic.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from functools import cached_property, lru_cache, reduce
from math import fsum, isqrt
from operator import mul
from typing import Any, NamedTuple

import numpy as np

from realize.algebra import polynomial as poly
from realize.arithmetic.state_space import PulseRatio
from realize.checks.schur import STABLE, stability
from realize.errors import Refused

Floats = np.ndarray[Any, np.dtype[np.float64]]
Mask = np.ndarray[Any, np.dtype[np.bool_]]
Integers = np.ndarray[Any, np.dtype[np.object_]]

#: Relative width of an enclosure: a format needs one bit of it, an error bound three digits; this leaves both room.
DEFAULT_WIDTH = Fraction(1, 1 << 20)

#: Terms summed one by one before anything cleverer is set up, which costs about as much.
_FEW_TERMS = 512

#: Terms summed one by one where the width asked for is beyond what double precision can add up: a tenth of a second.
_MANY_TERMS = 1 << 16

#: Narrowest width left to double precision. Its errors are about ``n`` units in the last place for each of up to
#: 100 steps, 1e-13 in all for order 8.
_FLOAT_WIDTH = Fraction(1, 1 << 34)

#: Bits of the orthogonal recursion. Entries start within ``3 (n + 2)`` units; each of at most 60 squarings doubles
#: errors, and sums cost another half bit each: 90 bits are right at the end for order 16, to be rounded to 53.
_BITS = 192

#: So a state of norm 1 carried on in them is within this of the true one.
_FIXED_ERROR = 2.0**-88

#: Squarings of the recursion after which a pole is taken to be too near the circle: 1 - |z| below 2**-60.
_MOST_SQUARINGS = 60

#: A power contracts by half when its computed norm is below that by what the errors of :data:`_BITS` never reach.
_HALF = (1 << 2 * _BITS - 2) - (1 << 2 * _BITS - 40)

#: Blocks of ``2**6`` terms are summed one by one, in pieces of 4096 blocks: long enough to hide the calls, short enough
#: for a cache.
_LEAF_LEVEL = 6
_CHUNK = 4096

#: Blocks without a sign of their own, beyond which the rest is only bounded: ``2**24`` terms, a fifth of a second.
_MOST_BLOCKS = 1 << 18

#: Starting points are at most ``2**13``: a sixteenth of the blocks, for about so many are needed from each.
_MOST_PHASE_LEVELS = 13

#: Bits of a square root and of a result: far below any width.
_DIGITS = 64

#: Unit roundoff of double precision.
_U = 2.0**-53

#: Allowance for the roundings in the computation of a bound itself, far fewer than 1000.
_SLACK = 1 + 2.0**-40


class PeakGain(NamedTuple):
    """An enclosure of a worst-case peak gain.

    Attributes
    ----------
    low : Fraction
        No bound below this holds.
    high : Fraction or None
        Proven; ``None`` where there is no bound.
    reason : str
        Why there is no bound; else empty.
    """

    low: Fraction
    high: Fraction | None
    reason: str = ""

    @property
    def width_reached(self) -> Fraction | None:
        """Relative width of the enclosure; ``None`` without a bound."""
        if self.high is None:
            return None
        return (self.high - self.low) / self.low if self.high else Fraction(0)


def peak_gain(ratio: PulseRatio, width: Fraction = DEFAULT_WIDTH) -> PeakGain:
    """Enclose ``sum |h[k]|`` of a path, its worst-case peak gain.

    Parameters
    ----------
    ratio : PulseRatio
        In lowest terms.
    width : Fraction
        Relative width to reach, positive. :attr:`PeakGain.width_reached` tells where that took too long: widths
        below 6e-11 need the response to die out within 65536 terms (else 1e-12 or so is reached), and hardly damped
        pairs within 1e-8 of the circle are only enclosed to -21 and +11 %.

    Notes
    -----
    Poles on or outside the unit circle have no bound. The sum of the first terms is exact up to rounding errors
    that ``1/a`` passes on; the rest is bounded by :meth:`Lattice.tail` or summed by blocks.
    """
    if not ratio.numerator:
        return PeakGain(Fraction(0), Fraction(0))
    order = poly.degree(ratio.denominator) - poly.trailing_zeros(ratio.denominator)
    verdict = stability(ratio.denominator)
    if verdict != STABLE:
        place = "outside the unit circle or repeated on it" if verdict == "unstable" else "on the unit circle"
        return PeakGain(Fraction(0), None, f"a pole lies {place}: a bounded input can make any output")
    if order == 0:
        exact = sum(map(abs, ratio.numerator), Fraction(0))
        return PeakGain(exact, exact)
    lattice = lattice_of(ratio.denominator[: order + 1])
    if not lattice.resolved:
        return PeakGain(Fraction(0), None, "a pole lies within 1e-18 of the unit circle: no bound is computed")
    return _enclosed(ratio, lattice, width)


def attaining_input(ratio: PulseRatio, count: int) -> tuple[int, ...]:
    """Input of -1 and 1 that makes the output reach the sum of the first ``count`` ``|h[k]|`` at its last sample.

    Parameters
    ----------
    ratio : PulseRatio
        Stable.
    count : int
        Length of the input.

    Raises
    ------
    Refused
        When the path has no peak gain.

    Notes
    -----
    ``u[k] = sign h[N - k]`` with ``N = count - 1``. A term below 2**-100 of the numerator's lead may get either sign.
    """
    if not ratio.numerator:
        return (1,) * count
    if stability(ratio.denominator) != STABLE:
        raise Refused("path", "a pole on or outside the unit circle", "stable paths", "take the integral states apart")
    order = poly.degree(ratio.denominator) - poly.trailing_zeros(ratio.denominator)
    errors = lattice_of(ratio.denominator[: order + 1]).growth * count if order else Fraction(count)
    response = _Response(ratio, 101 + max(0, _floor_log2(errors / abs(ratio.numerator[0]))))
    response.extend(count)
    return tuple(-1 if h < 0 else 1 for h in reversed(response.terms[:count]))


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
        """``M**(2**j)`` in units of ``2**-_BITS``, until one contracts by half."""
        return _squarings(self._matrix())

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
        return 2 * _root(self.halving * energy)[1]

    def least(self, p: Sequence[Fraction], energy: Fraction) -> Fraction:
        """A bound from below of the sum of all ``|h|`` of ``z p/a``.

        Notes
        -----
        ``sum h^2`` over ``max |h|``, and what constant and alternating inputs make.
        """
        at_ends = (abs(poly.evaluate(p, x) / poly.evaluate(self.denominator, x)) for x in (Fraction(1), Fraction(-1)))
        return max(_root(energy * self.energies[-1])[0], *at_ends)

    def _matrix(self) -> Integers:
        """``M``, every entry within ``3 (n + 2)`` units."""
        n = self.order
        kappa = [_fixed(k) for k in self.reflections]
        root = [_fixed_root(1 - k * k) for k in self.reflections]
        M = np.zeros((n, n), dtype=object)
        for k in range(n):
            value = -kappa[k + 1]
            for j in range(k, -1, -1):
                M[j, k] = value * kappa[j] >> _BITS
                value = value * root[j] >> _BITS
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


class _Response:
    """First terms of an impulse response, in units of ``2**-bits``.

    Each is rounded down once, to within a unit; that error then passes through ``1/a`` like an input.
    """

    def __init__(self, ratio: PulseRatio, bits: int) -> None:
        top, bottom = poly.integer_form(ratio.numerator, ratio.denominator)
        self.lead, *self.back = bottom[: len(bottom) - poly.trailing_zeros(bottom)]
        self.forward = [0] * (len(bottom) - len(top)) + [c << bits for c in top]
        self.terms: list[int] = []

    def extend(self, count: int) -> None:
        """Have at least ``count`` terms."""
        terms, back, lead, n = self.terms, self.back, self.lead, len(self.back)
        for k in range(len(terms), count):
            b = self.forward[k] if k < len(self.forward) else 0
            # From the last term back: terms[:-n-1:-1] is short at the start, where what is missing is 0.
            terms.append((b - sum(map(mul, back, terms[: -n - 1 : -1]))) // lead)

    def rest(self, bits: int) -> list[Fraction]:
        """``p`` of degree n - 1 with ``z p/a`` the response from the last n terms on, without those errors."""
        n = len(self.back)
        last = self.terms[-n:]
        alpha = [self.lead, *self.back]
        unit = self.lead << bits
        return [Fraction(sum(alpha[i] * last[j - i] for i in range(j + 1)), unit) for j in range(n)]


def _bits(ratio: PulseRatio, lattice: Lattice, count: int, spare: int) -> int:
    """Bits so that all errors of ``count`` terms, passed twice through ``1/a``, stay ``spare`` bits below the first."""
    errors = lattice.growth**2 * count * sum(map(abs, ratio.denominator)) / abs(ratio.numerator[0])
    return max(0, _floor_log2(errors)) + 1 + spare


def _enclosed(ratio: PulseRatio, lattice: Lattice, width: Fraction) -> PeakGain:
    """Sum terms one by one; when that takes too many, the rest by blocks."""
    n = lattice.order
    start = poly.degree(ratio.denominator) + 1 + n
    most = start + (_FEW_TERMS if width >= _FLOAT_WIDTH else _MANY_TERMS)
    # 64 bits more than the width needs: double precision then adds its own errors to the state, not these.
    bits = _bits(ratio, lattice, most, 64 - _floor_log2(width))
    response, unit = _Response(ratio, bits), Fraction(1, 1 << bits)
    error = lattice.growth * most * unit
    # Off by ``error`` in all, the last n terms make p off by that times sum |a|, and the rest by that times |1/a|.
    error += error * sum(map(abs, ratio.denominator)) * lattice.growth
    count, total = start, 0
    while True:
        done = max(0, len(response.terms) - n)
        response.extend(count)
        total += sum(map(abs, response.terms[done:-n]))
        if count == most or sum(map(abs, response.terms[-n:])) <= width * total:
            rest = response.rest(bits)
            state = lattice.coordinates(rest)
            energy = lattice.energy(state)
            tail = lattice.tail(energy)
            if tail + 2 * error <= width * (total * unit - error):
                return _outward(total * unit - error, total * unit + error + tail)
            if count == most:
                break
        count = min(count + max(lattice.halving, n), most)
    # Double precision gets no narrower than its own errors.
    tolerance = max(width, Fraction(_U)) * (total * unit + lattice.least(rest, energy)) / 4
    low, high = _by_blocks(lattice, state, energy, tolerance)
    return _outward(total * unit + low - error, total * unit + high + error)


class _Strided(NamedTuple):
    """Every q-th state of a lattice, or its opposite every other time; ``h = reach x[-1]``. In double precision.

    Attributes
    ----------
    halved : array
        The first power of ``N = +-M**q`` found that contracts by half, in units of ``2**-_BITS``.
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


def _by_blocks(
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
    norm_low, norm_high = _root(energy)
    first = _unit_state(lattice, state, energy)
    plain = _strided(lattice, 1)
    allowed = float(tolerance / norm_high)
    stride = _stride(plain, first)
    strided = plain if stride == 1 else _strided(lattice, stride)
    starts, left = _starts(strided, first, lattice.halving, allowed)
    sums = _split(strided, _phases(plain, starts, abs(stride)))
    low, high = sums or _loosely(plain, *_starts(plain, first, lattice.halving, allowed))
    return norm_low * Fraction(max(low, 0.0)), norm_high * Fraction((high + left) * _SLACK)


@lru_cache(maxsize=16)
def _strided(lattice: Lattice, stride: int) -> _Strided:
    """For ``M**stride``, or ``-M**-stride`` where that is negative."""
    powers = lattice.powers if stride == 1 else _squarings(_power(lattice.powers, stride))
    n = lattice.order
    one = np.diag(np.full(n, 1 << _BITS, dtype=object))
    c = np.array([0] * (n - 1) + [_fixed_root(1 / lattice.energies[-1])], dtype=object)
    rows, leaf = [c], [c]
    for power in powers[:-1]:
        rows.append(rows[-1] + (rows[-1] @ power >> _BITS))
    for _ in range((1 << min(_LEAF_LEVEL, len(powers) - 1)) - 1):
        leaf.append(leaf[-1] @ powers[0] >> _BITS)
    unit = (n + 2) * n**0.5 * _U * _SLACK
    all_powers, all_rows, leaves = ([_floats(m) for m in matrices] for matrices in (powers, rows, leaf))
    return _Strided(powers[-1], all_powers, all_rows, leaves, _floats(powers[0] - one), float(_floats(c)[-1]), unit)


def _squarings(matrix: Integers) -> list[Integers]:
    """Squares of squares, until one contracts by half."""
    powers = [matrix]
    while not _halves(powers[-1]) and len(powers) <= _MOST_SQUARINGS:
        powers.append(powers[-1] @ powers[-1] >> _BITS)
    return powers


def _power(powers: Sequence[Integers], exponent: int) -> Integers:
    chosen = [power for j, power in enumerate(powers) if abs(exponent) >> j & 1]
    product: Integers = reduce(lambda a, b: a @ b >> _BITS, chosen)
    return product if exponent > 0 else -product


def _unit_state(lattice: Lattice, state: Sequence[Fraction], energy: Fraction) -> Integers:
    """The state in orthogonal coordinates, divided by its norm, in units of ``2**-_BITS``."""
    sizes = [_fixed_root(x * x * e / energy) for x, e in zip(state, lattice.energies, strict=True)]
    return np.array([[-size if x < 0 else size] for size, x in zip(sizes, state, strict=True)], dtype=object)


def _rounded_states(columns: Integers) -> _States:
    """To double precision; what is known of ``_BITS`` bits at the end is far below it."""
    floats = _floats(columns)
    return _States(floats, 2 * len(floats) * _U * _norms(floats) + _FIXED_ERROR)


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
        following = strided.halved @ columns[-1] >> _BITS
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
    spread = (fsum(slack) + 2 * len(strided.leaf) * _U * found) * _SLACK
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
    """Nearest doubles of numbers in units of ``2**-_BITS``."""
    return np.asarray(values / (1 << _BITS), dtype=np.float64)


def _fixed(value: Fraction) -> int:
    """In units of ``2**-_BITS``, rounded down."""
    return (value.numerator << _BITS) // value.denominator


def _fixed_root(value: Fraction) -> int:
    """Square root in the same units, rounded down."""
    return isqrt((value.numerator << 2 * _BITS) // value.denominator)


def _halves(matrix: Integers) -> bool:
    """Whether the norm is below 1/2, by the sum of squares."""
    return int((matrix * matrix).sum()) <= _HALF


def _root(value: Fraction) -> tuple[Fraction, Fraction]:
    """Both ends of an enclosure of the square root, :data:`_DIGITS` bits long."""
    shift = max(0, _DIGITS - _floor_log2(value) // 2) if value else 0
    root = isqrt((value.numerator << 2 * shift) // value.denominator)
    return Fraction(root, 1 << shift), Fraction(root + 1, 1 << shift)


def _floor_log2(value: Fraction) -> int:
    """Exponent e with ``2**(e - 1) < value < 2**(e + 1)``."""
    return value.numerator.bit_length() - value.denominator.bit_length()


def _outward(low: Fraction, high: Fraction) -> PeakGain:
    """Ends rounded outward to some :data:`_DIGITS` bits beyond what tells them apart."""
    shift = max(0, _DIGITS - _floor_log2(high - low))
    bottom = (max(low, Fraction(0)).numerator << shift) // low.denominator
    top = -((-high.numerator << shift) // high.denominator)
    return PeakGain(Fraction(bottom, 1 << shift), Fraction(top, 1 << shift))
