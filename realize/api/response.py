"""The frequency response of an exact transfer function, exactly, each part rounded once.

``G(jw)`` is evaluated in integers at ``w = 2 pi f``, with f as it is written and the ``pi`` of the expressions: so a
notch at "2*pi*50" is exactly 0 at 50 Hz, and nothing is lost where terms cancel.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import inf, nan

import numpy as np
import numpy.typing as npt

from realize.algebra import polynomial as poly
from realize.algebra.irrational import pi
from realize.algebra.rounding import FLOAT64
from realize.errors import Refused
from realize.transfer import TransferFunction

#: A response on a pole: infinite, and without a phase.
ON_POLE = complex(inf, nan)


def exact_response(transfer: TransferFunction, frequencies_hz: list[Fraction]) -> npt.NDArray[np.complex128]:
    """``G(j 2 pi f)``, real and imaginary part correctly rounded.

    Parameters
    ----------
    transfer : TransferFunction
        Any, improper ones too.
    frequencies_hz : list of Fraction
        Of either sign.

    Returns
    -------
    array of complex, (count,)
        :data:`ON_POLE` on a pole; a part beyond the largest double is infinite.
    """
    return np.array([_value(transfer, 2 * pi() * f) for f in frequencies_hz], dtype=np.complex128)


def nearest(numerator: int, denominator: int) -> float:
    """The double nearest a ratio (denominator positive); infinite beyond the largest."""
    try:
        return FLOAT64.round_ratio(numerator, denominator)
    except Refused:
        return inf if numerator > 0 else -inf


def _value(transfer: TransferFunction, w: Fraction) -> complex:
    n, d = transfer.numerator, transfer.denominator
    degree = max(len(n), len(d)) - 1
    (a, b), (re, im) = (_at(p, w, degree) for p in (n, d))
    size = re * re + im * im
    return complex(nearest(a * re + b * im, size), nearest(b * re - a * im, size)) if size else ON_POLE


def _at(p: poly.Integers, w: Fraction, degree: int) -> tuple[int, int]:
    """Real and imaginary part of ``p(jw)``, times the denominator of w to the power ``degree``."""
    top, bottom = w.numerator, w.denominator
    # p(jw) = even(-w^2) + jw odd(-w^2).
    even, odd = p[::-1][0::2], p[::-1][1::2]
    real, imaginary = (_homogeneous(part, -top * top, bottom * bottom) for part in (even, odd))
    return (
        real * bottom ** (degree + 2 - 2 * len(even)),
        imaginary * top * bottom ** (degree + 1 - 2 * len(odd)),
    )


def _homogeneous(ascending: Sequence[int], x: int, y: int) -> int:
    """``sum c_i x^i y^(m - i)``, m the degree of the polynomial, by Horner's rule."""
    value, power = 0, 1
    for c in reversed(ascending):
        value, power = value * x + c * power, power * y
    return value
