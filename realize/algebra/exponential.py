"""What sampling does to a rational function of s: ``exp`` modulo a polynomial.

The exponential of the companion matrix of a polynomial is multiplication by ``exp(x) mod p(x)``; working with
that polynomial instead of the matrix saves a factor of the order at every step. Time is normalised to one
period (``x = s T``) and x scaled by a power of two (``x = 2**k w``) so that every root in w is at most 1/4.
Nothing here needs the roots themselves.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from functools import lru_cache
from math import factorial, log2

import numpy as np

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure, Unresolved, integers
from realize.algebra.roots import bound_exponent


def normalised(p: Sequence[int], period_s: Fraction) -> poly.Rationals:
    """Coefficients of ``p(x / T)``, made monic by the leading coefficient of ``p`` in s.

    Returns
    -------
    tuple of Fraction
        Descending powers of x: entry i is ``p_i T^i / p_0``.
    """
    return tuple(Fraction(c) * period_s**i / p[0] for i, c in enumerate(p))


@lru_cache(maxsize=64)
def image_polynomial(p: poly.Integers, period_s: Fraction, bits: int) -> Enclosure:
    """Polynomial whose roots are ``exp(root T)`` for the roots of ``p``, none of them 0.

    Parameters
    ----------
    p : tuple of int
        Descending powers of s, last coefficient not zero.
    bits : int
        Unit of the result is ``2**-bits``.

    Returns
    -------
    Enclosure
        Descending powers of z, monic.

    Notes
    -----
    The power sums ``sum exp(m root T)`` are the traces of ``exp(x)^m mod p``; Newton's identities turn them
    into coefficients.
    """
    exponent, modulus = _scaled(p, period_s, bits)
    n = len(p) - 1
    sums = _power_sums(modulus, n)
    growth = _exponential_modulo(modulus, exponent)
    power, traces = growth, [growth.dot(sums)]
    for _ in range(n - 1):
        power = _reduced(power.convolve(growth), modulus)
        traces.append(power.dot(sums))
    return _from_power_sums(traces, bits)


def sampled_response(
    numerator: poly.Rationals,
    p: poly.Integers,
    integrations: int,
    period_s: Fraction,
    count: int,
    bits: int,
    offset: Fraction = Fraction(0),
) -> Enclosure:
    """Samples of the inverse Laplace transform of ``numerator(x) / (x^integrations p(x / T))``, p made monic.

    Parameters
    ----------
    numerator : tuple of Fraction
        Descending powers of the normalised ``x = s T``; of lower degree than the denominator.
    p : tuple of int
        Denominator in s, descending powers.
    integrations : int
        Additional poles at the origin.
    count : int
        Samples at t = 0, 1, ..., count - 1 periods, each later by ``offset``.
    offset : Fraction
        Part of a period, from 0 to 1.

    Notes
    -----
    The value at time t is the coefficient of ``x^(N-1)`` in ``numerator(x) exp(t x) mod q(x)`` for a monic q
    of degree N (the residues at all poles together). Where every pole is at the origin the result is rational
    and exact.
    """
    if len(p) - 1 == poly.trailing_zeros(p):
        return _sampled_polynomial(numerator, len(p) - 1 + integrations, count, offset)
    exponent, modulus = _integrated(p, integrations, period_s, bits)
    order = len(modulus) - 1
    factor, scaled = _integer_numerator(numerator, exponent)
    functional = _top_coefficients(scaled, modulus)
    growth = _integrated_exponential(p, integrations, period_s, bits)
    power = _integrated_exponential(p, integrations, period_s, bits, offset)
    values = [power.dot(functional)]
    for _ in range(count - 1):
        power = _reduced(power.convolve(growth), modulus)
        values.append(power.dot(functional))
    mid, rad = (integers(part) for part in zip(*values, strict=True))
    return Enclosure(mid, rad, bits, factor * Fraction(2) ** (exponent * (1 - order)))


def _sampled_polynomial(numerator: poly.Rationals, order: int, count: int, offset: Fraction) -> Enclosure:
    """Samples of ``sum_j c_j t^(order-1-j) / (order-1-j)!``: every pole at the origin."""
    terms = [(c, order - 1 - j) for j, c in enumerate(reversed(numerator))]
    return Enclosure.exact(
        [sum((c * (t + offset) ** m / factorial(m) for c, m in terms), Fraction(0)) for t in range(count)]
    )


@lru_cache(maxsize=64)
def _scaled(p: poly.Integers, period_s: Fraction, bits: int) -> tuple[int, Enclosure]:
    """Exponent k and the monic polynomial in w, ``x = 2**k w``."""
    monic = normalised(p, period_s)
    exponent = bound_exponent([log2(abs(c.numerator)) - log2(c.denominator) if c else None for c in monic])
    return exponent, Enclosure.rounded([c * Fraction(2) ** (-exponent * i) for i, c in enumerate(monic)], bits)


def _integrated(p: poly.Integers, integrations: int, period_s: Fraction, bits: int) -> tuple[int, Enclosure]:
    exponent, modulus = _scaled(p, period_s, bits)
    zeros = integers([0] * integrations)
    return exponent, Enclosure(np.concatenate([modulus.mid, zeros]), np.concatenate([modulus.rad, zeros]), bits)


@lru_cache(maxsize=64)
def _integrated_exponential(
    p: poly.Integers, integrations: int, period_s: Fraction, bits: int, time: Fraction = Fraction(1)
) -> Enclosure:
    exponent, modulus = _integrated(p, integrations, period_s, bits)
    return _exponential_modulo(modulus, exponent, time)


def _integer_numerator(numerator: poly.Rationals, exponent: int) -> tuple[Fraction, poly.Integers]:
    """``numerator(2**k w)`` as a rational factor and an integer polynomial in w."""
    n = len(numerator) - 1
    scaled = [c * Fraction(2) ** (exponent * (n - i)) for i, c in enumerate(numerator)]
    (whole,) = poly.integer_form(scaled)
    lead = next(c for c in scaled if c)
    return lead / whole[0], whole


def _top_coefficients(p: poly.Integers, modulus: Enclosure) -> Enclosure:
    """Leading coefficients of ``p(w) w^i mod modulus``, i = order-1 down to 0."""
    order, bits = len(modulus) - 1, modulus.bits
    mid = integers([0] * (order - len(p)) + [c << bits for c in p])
    row, tops = Enclosure(mid, mid * 0, bits), []
    for _ in range(order):
        tops.append(row.entry(0))
        row = _times_w(row, modulus)
    mids, rads = zip(*reversed(tops), strict=True)
    return Enclosure(integers(mids), integers(rads), bits)


def _exponential_modulo(modulus: Enclosure, exponent: int, time: Fraction = Fraction(1)) -> Enclosure:
    """``exp(time 2**exponent w) mod modulus(w)``, descending powers of w; time from 0 to 1."""
    order, bits = len(modulus) - 1, modulus.bits
    if order == 0:
        return Enclosure(integers([]), integers([]), bits)
    unit = Enclosure(integers([0] * (order - 1) + [1 << bits]), integers([0] * order), bits)
    if time == 0:
        return unit
    squarings = max(0, exponent + _norm_bits(modulus) + 1)
    term, total, m = unit, unit, 0
    # ||w^m 2**(exponent - squarings) mod modulus|| <= 2**-m, so the terms from here on sum to less than a unit.
    while factorial(m) >> (bits - m if bits > m else 0) == 0:
        m += 1
        term = _times_w(term, modulus)
        shift = squarings - exponent
        term = (term.halved(shift) if shift >= 0 else _enlarged(term, -shift)).divided(m)
        term = term if time == 1 else _times_ratio(term, time)
        total = total + term
    total = total.widened(2)
    for _ in range(squarings):
        total = _reduced(total.convolve(total), modulus)
        # Once a radius is above 1 every squaring squares it: nothing would be left but its digits.
        if max(total.rad) >> 4 * bits:
            raise Unresolved
    return total


def _enlarged(v: Enclosure, times: int) -> Enclosure:
    return Enclosure(v.mid << times, v.rad << times, v.bits)


def _times_ratio(v: Enclosure, ratio: Fraction) -> Enclosure:
    return Enclosure(v.mid * ratio.numerator, v.rad * ratio.numerator, v.bits).divided(ratio.denominator)


def _norm_bits(modulus: Enclosure) -> int:
    """Exponent b with ``||w v mod modulus||_1 <= 2**b ||v||_1``."""
    reach = int(sum(abs(modulus.mid[1:]) + modulus.rad[1:])) + (1 << modulus.bits)
    return reach.bit_length() - modulus.bits


def _times_w(v: Enclosure, modulus: Enclosure) -> Enclosure:
    """``w v(w) mod modulus``."""
    lead_mid, lead_rad = v.entry(0)
    zero = integers([0])
    raised = Enclosure(np.concatenate([v.mid[1:], zero]), np.concatenate([v.rad[1:], zero]), v.bits)
    return raised - modulus[1:].times(lead_mid, lead_rad)


def _reduced(v: Enclosure, modulus: Enclosure) -> Enclosure:
    """``v mod modulus`` by synthetic division, the highest power first."""
    order, bits = len(modulus) - 1, v.bits
    mid, rad = v.mid.copy(), v.rad.copy()
    tail_mid, tail_rad = modulus.mid[1:], modulus.rad[1:]
    for i in range(len(mid) - order):
        lead, spread = mid[i], rad[i]
        mid[i + 1 : i + 1 + order] -= tail_mid * lead >> bits
        rad[i + 1 : i + 1 + order] += (abs(tail_mid) * spread + tail_rad * (abs(lead) + spread) >> bits) + 2
    return Enclosure(mid[-order:], rad[-order:], bits)


def _power_sums(modulus: Enclosure, count: int) -> Enclosure:
    """``sum root^i`` for i = count-1 down to 0, by Newton's identities."""
    bits, n = modulus.bits, len(modulus) - 1
    sums: list[tuple[int, int]] = [(n << bits, 0)]
    for k in range(1, count):
        sums.append(_newton_sum(modulus, sums, k))
    mids, rads = zip(*reversed(sums), strict=True)
    return Enclosure(integers(mids), integers(rads), bits)


def _newton_sum(modulus: Enclosure, sums: list[tuple[int, int]], k: int) -> tuple[int, int]:
    """``s_k = -(a_1 s_(k-1) + ... + a_(k-1) s_1 + k a_k)``."""
    bits = modulus.bits
    last_mid, last_rad = modulus.entry(k)
    if k == 1:
        return -last_mid, last_rad
    earlier = [sums[k - i] for i in range(1, k)]
    mids, rads = zip(*earlier, strict=True)
    mid, rad = modulus[1:k].dot(Enclosure(integers(mids), integers(rads), bits))
    return -mid - k * last_mid, rad + k * last_rad


def _from_power_sums(traces: list[tuple[int, int]], bits: int) -> Enclosure:
    """Monic polynomial from its power sums ``t_1 .. t_n``: ``k a_k = -(t_k + a_1 t_(k-1) + ...)``."""
    coefficients: list[tuple[int, int]] = [(1 << bits, 0)]
    for k in range(1, len(traces) + 1):
        mids, rads = zip(*coefficients, strict=True)
        sums_mid, sums_rad = zip(*reversed(traces[:k]), strict=True)
        mid, rad = Enclosure(integers(mids), integers(rads), bits).dot(
            Enclosure(integers(sums_mid), integers(sums_rad), bits)
        )
        coefficients.append((-mid // k, rad // k + 2))
    mids, rads = zip(*coefficients, strict=True)
    return Enclosure(integers(mids), integers(rads), bits)
