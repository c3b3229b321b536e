"""The frequency response of an exact transfer function, exactly, each part rounded once.

``G(jw)`` is evaluated in integers at ``w = 2 pi f``, with f as it is written and the ``pi`` of the expressions: so a
notch at "2*pi*50" is exactly 0 at 50 Hz, and nothing is lost where terms cancel.
"""

from __future__ import annotations

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
    degree = max(len(transfer.numerator), len(transfer.denominator)) - 1
    a, b = _at(transfer.numerator, w, degree)
    c, d = _at(transfer.denominator, w, degree)
    size = c * c + d * d
    return complex(nearest(a * c + b * d, size), nearest(b * c - a * d, size)) if size else ON_POLE


def _at(p: poly.Integers, w: Fraction, degree: int) -> tuple[int, int]:
    """Real and imaginary part of ``p(jw)``, times the denominator of w to the power ``degree``."""
    parts = [0, 0]
    for power, c in enumerate(reversed(p)):
        sign = -1 if power % 4 in (2, 3) else 1
        parts[power % 2] += sign * c * w.numerator**power * w.denominator ** (degree - power)
    return parts[0], parts[1]
