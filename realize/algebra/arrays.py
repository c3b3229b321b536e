"""Small helpers on arrays, where numpy's own would load masked arrays, a tenth of the start-up time."""

from __future__ import annotations

from typing import TypeVar

import numpy as np
import numpy.typing as npt

Scalar = TypeVar("Scalar", np.float64, np.int64)


def distinct(values: npt.NDArray[Scalar]) -> npt.NDArray[Scalar]:
    """The values in ascending order, each once.

    Notes
    -----
    What ``numpy.unique`` does.
    """
    ascending = np.sort(values.ravel())
    new = np.ones(ascending.size, dtype=bool)
    new[1:] = ascending[1:] != ascending[:-1]
    return ascending[new]


def middle(values: npt.NDArray[np.float64]) -> float:
    """The median of some values, at least one."""
    ascending = np.sort(values.ravel())
    half = ascending.size // 2
    return float(ascending[half] if ascending.size % 2 else (ascending[half - 1] + ascending[half]) / 2)
