"""Poles and zeros in the z-plane, with the exact images of those in s."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from realize.checks import ContinuousReference
from realize.checks.assignment import assigned
from realize.checks.modes import every
from realize.transfer import PulseTransferFunction

#: Distance of a root without a partner: above any that two places in the figure can have.
_NO_PARTNER = 1e12


class Mapped(NamedTuple):
    """A root in s and where it went.

    Attributes
    ----------
    s_rad_s : complex or None
        None for a root that the method brings in.
    image : complex or None
        ``exp(sT) - 1``; None also where that is beyond a double.
    delta : complex or None
        Of the stored numbers, as ``z - 1``; None where nothing is left of it.
    """

    s_rad_s: complex | None
    image: complex | None
    delta: complex | None


class Plane(NamedTuple):
    """Every pole and every zero by itself, both members of a pair."""

    poles: tuple[Mapped, ...]
    zeros: tuple[Mapped, ...]


def plane(reference: ContinuousReference, stored: PulseTransferFunction) -> Plane:
    """Pair the roots of the design with those of the stored numbers."""
    period_s = float(reference.period_s)
    return Plane(
        _mapped(reference.poles, every(stored.poles), period_s),
        _mapped(reference.zeros, every(stored.zeros), period_s),
    )


def _mapped(roots: Sequence[complex], deltas: Sequence[complex], period_s: float) -> tuple[Mapped, ...]:
    """Each root with the stored one it is nearest to, so that the distances are least in all; then the others."""
    images = [_image(s * period_s) for s in roots]
    partners = _nearest(images, deltas)
    pairs = [Mapped(s, image, delta) for s, image, delta in zip(roots, images, partners, strict=True)]
    left = list(deltas)
    for partner in partners:
        if partner is not None:
            left.remove(partner)
    return (*pairs, *(Mapped(None, None, delta) for delta in left))


def _nearest(images: Sequence[complex | None], deltas: Sequence[complex]) -> list[complex | None]:
    if not images:
        return []
    lacking = max(0, len(images) - len(deltas))
    cost = np.full((len(images), len(deltas) + lacking), _NO_PARTNER)
    for i, image in enumerate(images):
        if image is not None:
            cost[i, : len(deltas)] = [min(abs(image - delta), _NO_PARTNER / 2) for delta in deltas]
    return [deltas[j] if j < len(deltas) else None for j in assigned(cost)]


def _image(exponent: complex) -> complex | None:
    """``exp(sT) - 1``; None where that is beyond a double."""
    with np.errstate(over="ignore", invalid="ignore"):
        image = complex(np.expm1(exponent))
    return image if np.isfinite(image) else None
