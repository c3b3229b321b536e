"""A transfer function with a filter of given shape, its pole still open; which shapes there are, and which fit."""

from __future__ import annotations

from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.expression.ratio import MAX_DEGREE
from realize.errors import RealizeError
from realize.rolloff.criteria import Circumstances
from realize.rolloff.figures import decimal_or_quotient
from realize.rolloff.filters import Split, split
from realize.transfer import TransferFunction

#: Damping ratio offered for a pair: 1/sqrt(2), the largest bandwidth without a resonance peak, to the four
#: digits a design file would hold.
PAIR_DAMPING = Fraction(7071, 10000)

#: Number of poles, and damping ratio of a pair; 1 for equal real poles.
Shape = tuple[int, Fraction]


class Case(NamedTuple):
    """An improper transfer function with a filter of given shape, its pole still open.

    ``share`` is ``P/C`` at the band edge: the part of ``C`` that a filter on the derivative reaches; ``None``
    where ``C`` is zero there.
    """

    transfer: TransferFunction
    split: Split
    around: Circumstances
    share: complex | None
    placement: str
    order: int
    damping: Fraction

    @property
    def strictly(self) -> bool:
        """Whether the filtered part falls off at high frequency."""
        return self.order > -self.transfer.relative_degree


def cases(transfer: TransferFunction, around: Circumstances, placement: str, wanted: tuple[Shape, ...]) -> list[Case]:
    """One case a shape, with what they share computed once."""
    parts = split(transfer)
    share = _share_at(transfer, parts.improper, around.band_rad_s) if placement == "derivative" else 1 + 0j
    return [Case(transfer, parts, around, share, placement, order, damping) for order, damping in wanted]


def shapes(excess: int) -> tuple[Shape, ...]:
    """Filters worth considering: as many poles as make it proper, one more, and two poles also as a pair.

    Parameters
    ----------
    excess : int
        Degree of the numerator minus that of the denominator, at least 1.

    Returns
    -------
    tuple of (order, damping)
        Equal real poles first.
    """
    equal = tuple((order, Fraction(1)) for order in (excess, excess + 1))
    return (*equal, (2, PAIR_DAMPING)) if excess <= 2 else equal


def check_asked(
    transfer: TransferFunction, placement: str, order: int, damping: Fraction, pole_rad_s: Fraction | None
) -> None:
    """Refuse a roll-off that does not fit an improper transfer function, by the name of its key."""
    if placement not in ("derivative", "whole"):
        raise _refusal("placement", f'"{placement}"', '"derivative" or "whole"', 'placement = "derivative"')
    excess = -transfer.relative_degree
    _check_order(order, excess, transfer.order)
    _check_damping(damping, order, excess)
    if pole_rad_s is not None and pole_rad_s <= 0:
        raise _refusal("pole", f"{decimal_or_quotient(pole_rad_s)} rad/s", "a frequency above 0", 'pole = "auto"')


def _check_order(order: int, excess: int, degree: int) -> None:
    if order < excess:
        raise _refusal(
            "order",
            f"{order}, but the numerator's degree exceeds the denominator's by {excess}",
            f"at least {excess}, so that the result is proper",
            f"order = {excess}, or leave the key out",
        )
    if order + degree > MAX_DEGREE:
        raise _refusal(
            "order",
            f"{order} poles on top of the transfer function's {degree}",
            f"a degree of at most {MAX_DEGREE} together",
            f"order = {excess}",
        )


def _check_damping(damping: Fraction, order: int, excess: int) -> None:
    if not 0 < damping <= 1:
        raise _refusal(
            "damping",
            decimal_or_quotient(damping),
            "above 0, at most 1",
            f"damping = {decimal_or_quotient(PAIR_DAMPING)}",
        )
    if damping != 1 and order != 2:
        raise _refusal(
            "damping",
            f"{decimal_or_quotient(damping)} with order {order}",
            "a damping ratio other than 1 for a pair of poles only",
            "order = 2, or leave damping out" if excess <= 2 else "leave damping out",
        )


def _refusal(key: str, found: str, allowed: str, advice: str) -> RealizeError:
    return RealizeError(f"[rolloff] {key}", found, allowed, advice)


def _share_at(transfer: TransferFunction, improper: poly.Rationals, w: Fraction) -> complex | None:
    """``P(jw)/C(jw)`` from exact values; ``None`` where ``C(jw)`` is 0, or too near it for a double."""
    part = _at_imaginary(improper, w)
    n, d = (_at_imaginary(poly.rationals(p), w) for p in (transfer.numerator, transfer.denominator))
    top = (part[0] * d[0] - part[1] * d[1], part[0] * d[1] + part[1] * d[0])
    size = n[0] ** 2 + n[1] ** 2
    try:
        return complex(float((top[0] * n[0] + top[1] * n[1]) / size), float((top[1] * n[0] - top[0] * n[1]) / size))
    except (ZeroDivisionError, OverflowError):
        return None


def _at_imaginary(p: poly.Rationals, w: Fraction) -> tuple[Fraction, Fraction]:
    """Real and imaginary part of ``p(jw)``, exactly."""
    even, odd = (poly.evaluate(p[::-1][i::2][::-1], -w * w) for i in (0, 1))
    return even, odd * w
