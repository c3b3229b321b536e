"""A small helper on arrays, where numpy's own would load far more than it uses."""

from __future__ import annotations

from typing import TypeVar

import numpy as np
import numpy.typing as npt

Scalar = TypeVar("Scalar", np.float64, np.int64)


def distinct(values: npt.NDArray[Scalar]) -> npt.NDArray[Scalar]:
    """The values in ascending order, each once.

    Notes
    -----
    What ``numpy.unique`` does; that one loads masked arrays at its first call, a sixth of the start-up time.
    """
    ascending = np.sort(values.ravel())
    new = np.ones(ascending.size, dtype=bool)
    new[1:] = ascending[1:] != ascending[:-1]
    return ascending[new]
