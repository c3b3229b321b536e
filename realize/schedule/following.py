"""Which root of one operating point becomes which of the next: the pairing that moves them least in all."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from realize.checks.assignment import assigned


def followed(before: Sequence[complex], after: Sequence[complex]) -> list[int]:
    """Pair roots so that the sum of the distances they move is the least.

    Parameters
    ----------
    before, after : sequence of complex
        Equally many; both members of every pair.

    Returns
    -------
    list of int
        For each root before, the position of the one after.
    """
    old, new = (np.array(roots, complex) for roots in (before, after))
    return assigned(np.abs(new[None, :] - old[:, None])) if len(before) else []
