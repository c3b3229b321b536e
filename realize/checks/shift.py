"""The checks ``pole shift`` and ``zero shift``, and what is to be said about single roots.

A root in z stands for the rate ``ln(z)/T`` in rad/s, principal logarithm.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import pi

import numpy as np

from realize.band import frequency_text
from realize.checks.assignment import assigned
from realize.checks.chain import Real
from realize.checks.check import Asked, Check
from realize.checks.modes import damping, in_disc_words, in_words, logarithm
from realize.transfer import PulseTransferFunction, TransferFunction

#: Damping ratio below which a root counts up to the Nyquist frequency: its resonance, or its ringing, shows above the
#: band (at 0.3 it peaks by 1/(2 * 0.3), a factor of 1.7, or 4.4 dB).
LIGHTLY_DAMPED = 0.3

#: Cost of a root without a partner: above any shift that a double can hold per rate in use, so that none is left over
#: while there is a partner for it.
_NO_PARTNER = 1e12


def check_shift(
    asked: Asked,
    roots: Sequence[complex],
    deltas: Sequence[complex],
    edge_rad_s: float,
    period_s: float,
) -> Check:
    """Greatest ``|ln(z)/T - p|/|p|`` over the roots that matter.

    Parameters
    ----------
    roots : sequence of complex
        Of the design, in rad/s, every one by itself.
    deltas : sequence of complex
        Of the counterpart, as ``z - 1``, every one by itself.
    edge_rad_s : float
        Band edge: roots up to it count, and roots with a damping ratio below 0.3 up to the Nyquist frequency.

    Notes
    -----
    Roots at s = 0 must be at z = 1 exactly; the others are paired by the least total of their shifts.
    """
    origin = sum(1 for r in roots if r == 0)
    kept = sum(1 for d in deltas if d == 0)
    if kept < origin:
        near = min((d for d in deltas if d != 0), key=abs, default=None)
        where = f"; the nearest is {in_disc_words(near)}" if near is not None else ""
        wanted = "roots at s = 0 must be" if origin > 1 else "the root at s = 0 must be"
        return asked.failed(0j, None, f"{wanted} at z = 1 exactly, and {kept} of {origin} are{where}")
    finite = [r for r in roots if r]
    counted = [i for i, r in enumerate(finite) if _counts(r, edge_rad_s, pi / period_s)]
    if not counted:
        if origin:
            return asked.measured(0j, 0j, 0.0, "s = 0 is at z = 1 exactly; no other root counts")
        return asked.undefined("none lies within the band, and none up to the Nyquist frequency is lightly damped")
    left = sorted(deltas, key=abs)[origin:]
    images = [logarithm(d) / period_s for d in left]
    shift = _shifts(finite, images)
    partner = assigned(shift)
    worst = max(counted, key=lambda i: (shift[i, partner[i]], -abs(finite[i])))
    reason = f"greatest for the one at {in_words(finite[worst])}; {len(counted)} of {len(roots)} count"
    if partner[worst] >= len(images):
        return asked.failed(finite[worst], None, f"nothing is left of the one at {in_words(finite[worst])}")
    return asked.measured(finite[worst], images[partner[worst]], 100 * float(shift[worst, partner[worst]]), reason)


def root_notes(discrete: PulseTransferFunction, transfer: TransferFunction) -> tuple[str, ...]:
    """Poles that sampling cannot follow, and poles that alternate."""
    nyquist_rad_s = pi / float(discrete.period_s)
    aliased = [
        f"the pole pair at {in_words(root.value)} lies above the Nyquist frequency, "
        f"{frequency_text(nyquist_rad_s)}: samples show it at another frequency"
        for root in transfer.poles
        if root.value.imag > nyquist_rad_s
    ]
    alternating = [
        f"the pole at {in_disc_words(root.value)} alternates in sign every sample"
        for root in discrete.poles
        if root.value.imag == 0 and root.value.real < -1
    ]
    return (*aliased, *alternating)


def _counts(root: complex, edge_rad_s: float, nyquist_rad_s: float) -> bool:
    return abs(root) <= edge_rad_s or (damping(root) < LIGHTLY_DAMPED and abs(root) <= nyquist_rad_s)


def _shifts(roots: Sequence[complex], images: Sequence[complex]) -> Real:
    """Relative shift of every root to every image, with columns for roots that find none."""
    from_roots = np.array(roots)[:, None]
    shift = np.abs(np.array(images, complex)[None, :] - from_roots) / np.abs(from_roots)
    lacking = max(0, len(roots) - len(images))
    return np.append(np.minimum(shift, _NO_PARTNER / 2), np.full((len(roots), lacking), _NO_PARTNER), axis=1)
