"""Roots as the checks need them: every one by itself, as a rate in rad/s, and in words.

A root of ``G`` is in rad/s; a root of ``Gd`` is given as ``z - 1``.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import atan2, hypot, inf, log, log1p, pi

from realize.algebra.roots import Root
from realize.band import frequency_text

#: Real part that stands for the rate of a root at z = 0, which dies within one sample: the logarithm of the least
#: positive double, so that a distance from it is finite and greater than any from a root the sample can show.
_DEAD = log(5e-324)


def every(roots: Sequence[Root]) -> list[complex]:
    """Both members of each pair, and each root as often as its multiplicity."""
    members = ((r, [r.value, r.value.conjugate()] if r.is_pair else [r.value]) for r in roots)
    return [value for root, values in members for value in values for _ in range(root.multiplicity)]


def logarithm(delta: complex) -> complex:
    """``ln(1 + delta)``, principal, without loss near ``delta = 0``.

    Notes
    -----
    ``ln |z| = log1p(2 Re delta + |delta|^2)/2``; for small ``|z|`` the direct form is the accurate one. Real z < 0
    has the imaginary part pi.
    """
    re, im = 1 + delta.real, delta.imag
    size = hypot(re, im)
    if size == 0:
        return complex(_DEAD, 0)
    excess = delta.real * (2 + delta.real) + im * im
    real = log1p(excess) / 2 if excess > -0.5 else log(size)
    return complex(real, atan2(im, re) if im or re >= 0 else pi)


def damping(root: complex) -> float:
    """Damping ratio ``-Re/|root|``; infinite for a root at 0, which has none."""
    size = abs(root)
    return -root.real / size if size else inf


def in_words(root: complex) -> str:
    """A root in s for people: frequency in Hz first, and the damping ratio of a pair."""
    if root == 0:
        return "s = 0"
    kind = f"damping ratio {_shown(damping(root))}" if root.imag else "real" if root.real < 0 else "real and positive"
    return f"{frequency_text(abs(root))}, {kind}"


def in_disc_words(delta: complex) -> str:
    """A root in z for people, to the digits that tell it from 1."""
    if delta.imag == 0 and abs(delta.real) < 1e-3:
        return f"z = 1 {'-' if delta.real < 0 else '+'} {_shown(abs(delta.real))}" if delta.real else "z = 1"
    if delta.imag == 0:
        return f"z = {_shown(1 + delta.real)}"
    return f"z = {_shown(1 + delta.real)} +- {_shown(abs(delta.imag))}j"


def _shown(value: float) -> str:
    return f"{value + 0.0:.5g}"
