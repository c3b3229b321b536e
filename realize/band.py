"""The band edge: up to which frequency a design must behave as written, and on what that figure rests.

One rule for everyone who needs it: roll-off proposals, checks, the prewarped method. Frequencies are in
rad/s unless the name says otherwise; a figure that comes from a root is right to double precision.
"""

from __future__ import annotations

from fractions import Fraction

from realize.algebra.irrational import pi
from realize.algebra.roots import Root
from realize.quantity import format_engineering
from realize.transfer import TransferFunction

#: Samples per period of the fastest frequency that counts as band when the design names none. One roll-off
#: pole at 2/T, the fastest that bilinear keeps from ringing, loses atan(2 pi / (2 * 30)) = 5.98 deg at
#: rate/30: the default budget of 6 deg, so a faster band would leave no window for it.
SAMPLES_PER_BAND_PERIOD = 30

#: Factor from the highest corner to the band edge: a first-order corner has done atan(3) = 72 of its 90 deg
#: there, so what lies above is its asymptote.
CORNERS_TO_BAND = 3

#: Band edge when there is neither a rate nor a corner (a pure gain, integrator or derivative): every
#: frequency is alike to such a design, so the unit stands in, and the sentence says so.
UNIT_BAND_RAD_S = Fraction(1)


def band_edge(
    transfer: TransferFunction, period_s: Fraction | None, band_rad_s: Fraction | None
) -> tuple[Fraction, str]:
    """Highest frequency at which the controller must still behave as designed.

    Parameters
    ----------
    transfer : TransferFunction
        The transfer function as the user wrote it, before any roll-off pole: an added pole is no corner of
        the design.
    period_s : Fraction or None
        Sample period, where one is known.
    band_rad_s : Fraction or None
        The band of the design, where it names one.

    Returns
    -------
    edge_rad_s : Fraction
        The band edge.
    rests_on : str
        One sentence that says where the figure comes from.

    Notes
    -----
    Without a band in the design: the smaller of a thirtieth of the rate and three times the highest corner,
    as far as these exist. A corner is the natural frequency of a finite pole or zero away from s = 0.
    """
    if band_rad_s is not None:
        return band_rad_s, f"band edge {frequency_text(band_rad_s)}: given by the design"
    candidates = _assumptions(transfer, period_s)
    edge, reason = min(candidates, key=lambda candidate: candidate[0])
    return edge, f"band edge {frequency_text(edge)}: assumed, {reason}"


def highest_corner_rad_s(transfer: TransferFunction) -> float:
    """Greatest natural frequency among the finite poles and zeros, in rad/s; 0 when all are at s = 0."""
    return highest_frequency_rad_s(transfer.poles + transfer.zeros)


def highest_frequency_rad_s(roots: tuple[Root, ...]) -> float:
    """Greatest distance of ``roots`` from s = 0, in rad/s; 0 when there are none."""
    return max((abs(root.value) for root in roots), default=0.0)


def frequency_text(frequency_rad_s: Fraction | float) -> str:
    """A frequency for people, in Hz first: ``"20 Hz (125.66 rad/s)"``."""
    w = Fraction(frequency_rad_s)
    return f"{format_engineering(w / (2 * pi()), 'Hz')} ({format_engineering(w, 'rad/s')})"


def _assumptions(transfer: TransferFunction, period_s: Fraction | None) -> list[tuple[Fraction, str]]:
    """Every figure the band may be assumed from, with its reason; never empty."""
    candidates = []
    if period_s is not None:
        edge = 2 * pi() / (SAMPLES_PER_BAND_PERIOD * period_s)
        candidates.append((edge, f"1/{SAMPLES_PER_BAND_PERIOD} of the rate"))
    corner = highest_corner_rad_s(transfer)
    if corner > 0:
        reason = f"{CORNERS_TO_BAND} x the highest corner of the poles and zeros, {frequency_text(corner)}"
        candidates.append((CORNERS_TO_BAND * Fraction(corner), reason))
    return candidates or [(UNIT_BAND_RAD_S, "there is neither a rate nor a corner to take it from")]
