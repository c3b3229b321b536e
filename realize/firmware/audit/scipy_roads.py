"""``Gd`` by scipy's road, from ``G(s)`` to state space and on, several times over; the one module that loads scipy.

Time is in periods. How accurate scipy is, is measured: the same design goes there in two coordinates, and with every
double on the way (coefficients, the matrices of the sampled system, the point of the unit circle) moved by a unit in
its last place; what comes back differs.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from math import tan
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt
from scipy import linalg, signal

from realize.transfer import TransferFunction

Array = npt.NDArray[Any]

#: A unit in the last place of a double, relative.
_ULP = 2.0**-52

#: How numbers are moved: not at all, then up and down in turn, with several rhythms.
_RHYTHMS = (0, 1, 2, 3)
_SIGNS = (0, 1, -1, 0)

#: What scipy calls the methods it knows, and what else it wants to know.
_NAMES: Mapping[str, Mapping[str, Any]] = {
    "step-invariant": {"method": "zoh"},
    "ramp-invariant": {"method": "foh"},
    "impulse-invariant": {"method": "impulse"},
    "forward-difference": {"method": "euler"},
    "backward-difference": {"method": "backward_diff"},
    "bilinear": {"method": "bilinear"},
    "bilinear-prewarped": {"method": "bilinear"},
    "blended-difference": {"method": "gbt", "alpha": 7 / 8},
}

#: Mapped by matrix exponentials, whose characteristic polynomials are evaluated as determinants.
MAPPED = "pole-zero-mapped"

#: Methods to which scipy has a road.
COVERED = (*_NAMES, MAPPED)


class Road(NamedTuple):
    """What one road makes of a design: a row of complex gains, and samples of the step response where it has states."""

    gains: Array
    step: Array | None


def roads(
    transfer: TransferFunction, period_s: Fraction, method: str, exact_at_rad_s: Fraction, z: Array, count: int
) -> list[Road]:
    """Every road, the plainest first.

    Parameters
    ----------
    transfer : TransferFunction
        Proper, of order 1 or more.
    period_s : Fraction
        Sample period.
    method : str
        One of :data:`COVERED`.
    exact_at_rad_s : Fraction
        For ``bilinear-prewarped``.
    z : array of complex
        Points of the unit circle.
    count : int
        Samples of the step response.

    Raises
    ------
    ValueError, ArithmeticError, numpy.linalg.LinAlgError
        When a road does not get there.
    """
    above, below = (_in_periods(p, period_s, transfer) for p in (transfer.numerator, transfer.denominator))
    angle = float(exact_at_rad_s * period_s)
    found = []
    for rhythm in _RHYTHMS:
        top, bottom = _moved(above, rhythm), _moved(below, rhythm)
        at = z * (1 + 1j * _ULP * _SIGNS[rhythm])
        turn = angle * (1 + _ULP * _SIGNS[rhythm])
        length = 2 * tan(turn / 2) / turn if method == "bilinear-prewarped" else 1.0
        for transposed in (False, True):
            if method == MAPPED:
                found.append(_mapped(transfer, top, bottom, at, rhythm, transposed))
                continue
            states = tuple(_moved(m, rhythm) for m in _discrete(_states(top, bottom, transposed), length, method))
            found.append(Road(_gains(states, at), _step(states, count)))
    return found


def _in_periods(p: Sequence[int], period_s: Fraction, transfer: TransferFunction) -> Array:
    """Coefficients for time in periods, the denominator's leading one being 1; each rounded once."""
    order = len(p) - 1
    lead = transfer.denominator[0] / period_s**transfer.order
    return np.array([float(c / period_s ** (order - i) / lead) for i, c in enumerate(p)])


def _moved(values: Array, rhythm: int) -> Array:
    """Numbers with each a unit in the last place up or down; the rhythm sets after how many the sign turns."""
    if rhythm == 0:
        return values
    signs = np.array([1 if (i // rhythm) % 2 else -1 for i in range(values.size)])
    return np.asarray(values * (1 + _ULP * signs.reshape(values.shape)))


# ---------------------------------------------------------------- state space


def _states(above: Array, below: Array, transposed: bool) -> tuple[Array, ...]:
    """Companion form, or its transpose, balanced."""
    a = linalg.companion(below)
    padded = np.append(np.zeros(len(below) - len(above)), above)
    b, d = np.eye(len(a))[:, :1], padded[:1, None]
    c = (padded[1:] - padded[0] * below[1:])[None, :]
    if transposed:
        a, b, c = a.T, c.T, b.T
    balanced, scale = linalg.matrix_balance(a, permute=False)
    diagonal = np.diag(scale)
    return balanced, b / diagonal[:, None], c * diagonal, d


def _discrete(states: tuple[Array, ...], length: float, method: str) -> tuple[Array, ...]:
    if method != "impulse-invariant":
        return tuple(signal.cont2discrete(states, length, **_NAMES[method])[:4])
    # scipy samples strictly proper systems, and takes the jump at t = 0 whole.
    a, b, c, d = states
    found = signal.cont2discrete((a, b, c, np.zeros_like(d)), length, **_NAMES[method])
    return *found[:3], found[3] - c @ b / 2 + d


def _gains(states: tuple[Array, ...], z: Array) -> Array:
    a, b, c, d = states
    matrices = z[:, None, None] * np.eye(len(a)) - a
    inner = np.linalg.solve(matrices, np.broadcast_to(b, (len(z), *b.shape)))
    return np.asarray((c @ inner + d)[:, 0, 0])


def _step(states: tuple[Array, ...], count: int) -> Array:
    a, b, c, d = states
    x, samples = np.zeros_like(b), np.empty(count)
    for k in range(count):
        samples[k] = (c @ x + d)[0, 0]
        x = a @ x + b
    return samples


# ---------------------------------------------------------------- poles and zeros


def _mapped(transfer: TransferFunction, above: Array, below: Array, z: Array, rhythm: int, transposed: bool) -> Road:
    """``K ((z - 1)/T)^k (z + 1)^excess det(zI - exp(zeros))/det(zI - exp(poles))``, roots at s = 0 taken out first."""
    k, excess = transfer.zeros_minus_poles_at_origin, transfer.relative_degree
    kept = []
    for p, exact in ((above, transfer.numerator), (below, transfer.denominator)):
        at_origin = next(i for i, c in enumerate(reversed(exact)) if c)
        kept.append(p[: len(p) - at_origin])
    ends = np.append(z, 1)
    top, bottom = (_determinants(p, ends, rhythm, transposed) for p in kept)
    shape = top / bottom * (ends + 1) ** excess
    low_frequency = kept[0][-1] / kept[1][-1]
    return Road(low_frequency * (z - 1) ** k * shape[:-1] / shape[-1], None)


def _determinants(p: Array, z: Array, rhythm: int, transposed: bool) -> Array:
    """``det(zI - exp(C))`` of the companion matrix of a polynomial; 1 for a constant."""
    if len(p) == 1:
        return np.ones(len(z), complex)
    companion = linalg.companion(p)
    balanced, _ = linalg.matrix_balance(companion.T if transposed else companion, permute=False)
    images = _moved(linalg.expm(balanced), rhythm)
    return np.asarray(np.linalg.det(z[:, None, None] * np.eye(len(images)) - images))
