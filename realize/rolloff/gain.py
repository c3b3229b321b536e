"""The highest gain a rolled-off transfer function reaches from the band edge up: a search that knows the poles."""

from __future__ import annotations

from fractions import Fraction
from math import exp2, isfinite, log, log2, sqrt

import numpy as np
import numpy.typing as npt

from realize.algebra import polynomial as poly
from realize.algebra.arrays import distinct
from realize.rolloff.case import Case
from realize.transfer import TransferFunction

#: Frequencies per e-fold in the search for the highest gain; four refinements of 64 steps follow around the
#: best one.
_GAINS_PER_FOLD = 100
_REFINEMENTS = 4
_REFINED_POINTS = 65

#: The gain search ends a thousand times above the bound on all poles and zeros, where the gain differs from
#: its asymptote by at most the degree times 1e-6.
_BEYOND_ROOTS = 1e3

Floats = npt.NDArray[np.float64]


def highest_gain(transfer: TransferFunction, case: Case, pole: Fraction) -> float | None:
    """Supremum of the gain from the band edge up; ``None`` where it is infinite or no double holds it.

    Parameters
    ----------
    transfer : TransferFunction
        ``case`` with its pole at ``pole``, proper.
    case : Case
        Where its other poles, and the band edge, are read from.
    pole : Fraction
        Natural frequency of the roll-off poles, in rad/s.
    """
    edge = float(case.around.band_rad_s)
    p, damping = float(pole), float(case.damping)
    poles = [root.value for root in case.transfer.poles] + [complex(-damping * p, p * sqrt(1 - damping**2))]
    if any(value.real == 0 and value.imag >= edge for value in poles):
        return None
    peaks = [peak for value in poles for peak in _resonances(value) if peak > edge]
    try:
        highest = _supremum(transfer, edge, peaks)
    except OverflowError:
        return None
    return highest if isfinite(highest) else None


def _supremum(transfer: TransferFunction, edge: float, peaks: list[float]) -> float:
    """Supremum of ``|C(jw)|``, w from ``edge`` up: a search on a fine grid that holds the likely peaks."""
    top = _BEYOND_ROOTS * max(edge, _root_bound(transfer.numerator), _root_bound(transfer.denominator))
    w = distinct(np.append(np.geomspace(edge, top, 2 + int(_GAINS_PER_FOLD * log(top / edge))), peaks))
    gains = _gains(transfer, w)
    highest = max(abs(float(transfer.feed_through)), float(gains.max()))
    for _ in range(_REFINEMENTS):
        best = int(gains.argmax())
        w = np.geomspace(w[max(best - 1, 0)], w[min(best + 1, len(w) - 1)], _REFINED_POINTS)
        gains = _gains(transfer, w)
        highest = max(highest, float(gains.max()))
    return highest


def _resonances(pole: complex) -> tuple[float, float]:
    """Where a lightly damped pair peaks, alone and beside a derivative."""
    return pole.imag, sqrt(max(pole.imag**2 - pole.real**2, 0.0))


def _gains(transfer: TransferFunction, w: Floats) -> Floats:
    """``|C(jw)|`` in floating point, s in units of a power of two amid ``w`` so that powers stay in range."""
    exponent = round((log2(w[0]) + log2(w[-1])) / 2)
    top, n = _scaled(transfer.numerator, exponent)
    bottom, d = _scaled(transfer.denominator, exponent)
    s = 1j * w / exp2(exponent)
    far = w > exp2(exponent)
    near, inverse = s[~far], 1 / s[far]
    with np.errstate(all="ignore"):  # what leaves a double's range is caught as not finite
        below = np.polyval(n, near) / np.polyval(d, near)
        beyond = np.polyval(n[::-1], inverse) / np.polyval(d[::-1], inverse) * inverse**transfer.relative_degree
    gains: Floats = np.abs(np.concatenate([below, beyond])) * float(top / bottom)
    return gains


def _scaled(p: poly.Integers, exponent: int) -> tuple[Fraction, Floats]:
    """Coefficients for s in units of ``2**exponent``: the largest magnitude, and all divided by it."""
    unit = Fraction(2) ** exponent
    exact = [c * unit ** (len(p) - 1 - i) for i, c in enumerate(p)]
    largest = max(abs(c) for c in exact)
    return largest, np.array([float(c / largest) for c in exact])


def _root_bound(p: poly.Integers) -> float:
    """No root is larger: ``2 max |c_i/c_0|^(1/i)`` (Fujiwara, Tohoku Mathematical Journal 10, 1916)."""
    logs = [(log2(abs(c)) - log2(abs(p[0]))) / i for i, c in enumerate(p) if i and c]
    return 2 * exp2(max(logs)) if logs else 0.0
