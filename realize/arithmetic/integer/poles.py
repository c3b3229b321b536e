"""Whether poles decay, exactly, and what is left to where they do not."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from realize.arithmetic.integer.layout import Layout
from realize.checks.schur import STABLE, stability
from realize.errors import Refused

#: A pole this near to the unit circle lies on it: roots are known to 256 bits.
_ON_CIRCLE = Fraction(1, 1 << 200)


def decays(a: Sequence[Fraction]) -> bool:
    """Whether all poles of a section lie inside the unit circle, by the recursion of Schur and Cohn.

    Parameters
    ----------
    a : sequence of Fraction
        Ascending powers of 1/z, without the leading 1.
    """
    return stability((Fraction(1), *a)) == STABLE


def least_margin(a: Sequence[Fraction]) -> tuple[str, Fraction]:
    """What the coefficients of a section leave to the nearest place where a pole leaves the unit circle.

    Returns
    -------
    str, Fraction
        The expression, positive where all poles decay, and its value.
    """
    return min(margins(a).items(), key=lambda entry: entry[1])


def margins(a: Sequence[Fraction]) -> dict[str, Fraction]:
    """What the coefficients of a section leave to each place where a pole may leave the unit circle, by expression."""
    a1, a2 = (*a, Fraction(0), Fraction(0))[:2]
    if len(a) < 2:
        return {"1 + a1": 1 + a1, "1 - a1": 1 - a1}
    return {"1 + a1 + a2": 1 + a1 + a2, "1 - a1 + a2": 1 - a1 + a2, "1 - a2": 1 - a2}


def refuse_growing(layout: Layout) -> None:
    """Refuse what has a pole on or outside the unit circle before anything is rounded.

    Raises
    ------
    Refused
        Then.
    """
    for k, part in enumerate(layout.parts, 1):
        if least_margin(part.ratio[1])[1] < _ON_CIRCLE:
            raise Refused(
                "[target] arithmetic",
                f"section {k} has a pole that does not decay: no bound, and no word is sure to hold its state",
                "poles that decay, beside those of the integral at z = 1",
                'arithmetic = "float32", or a transfer function whose poles decay: give a pair that rings some damping',
            )
