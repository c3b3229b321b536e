"""State equations from factors, and their exact steps.

Sections of first order in series, complex where a root is: states that stay accurate where poles lie close together or
far apart. In the variable v (s, or ``z - 1``) a part is ``gain v^k prod(1 - v/zero)/prod(1 - v/pole)``.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil, log2
from typing import NamedTuple

import numpy as np

from realize.loop.response import Complex, Whole

#: Terms of the exponential series where the norm is at most 1/2: the first one left out is below 2^-20/20!, 4e-25.
_TERMS = 20


class States(NamedTuple):
    """``v x = a x + b u``, ``y = c x + d u``."""

    a: Complex
    b: Complex
    c: Complex
    d: complex

    @property
    def order(self) -> int:
        """Number of states."""
        return len(self.b)


def states(gain: float, zeros: Sequence[complex], poles: Sequence[complex]) -> States:
    """Sections in series, those without a zero first: they smooth what the others differentiate.

    Parameters
    ----------
    gain : float
        In front of the factors ``1 - v/root``, or ``v`` for a root at 0.
    zeros, poles : sequence of complex
        Every root by itself; at most as many zeros as poles, and none at 0 in both.
    """
    n = len(poles)
    a, b, out = np.zeros((n, n), complex), np.zeros(n, complex), np.zeros(n, complex)
    through: complex = gain
    for i, (pole, zero) in enumerate(_sections(zeros, poles)):
        drive = -pole if pole else 1.0
        a[i] = drive * out
        a[i, i], b[i] = pole, drive * through
        direct, tap = _output(pole, zero)
        out, through = direct * out, direct * through
        out[i] = tap
    return States(a, b, out, through)


def in_series(first: States, second: States) -> States:
    """The states of both, the output that of the second."""
    n, m = first.order, second.order
    a = np.zeros((n + m, n + m), complex)
    a[:n, :n], a[n:, n:] = first.a, second.a
    a[n:, :n] = np.outer(second.b, first.c)
    b = np.concatenate([first.b, second.b * first.d])
    c = np.concatenate([second.d * first.c, second.c])
    return States(a, b, c, second.d * first.d)


def held_change(system: States, time: float) -> Complex:
    """``exp(M t) - 1`` of the states followed by a constant input."""
    n = system.order
    m = np.zeros((n + 1, n + 1), complex)
    m[:n, :n], m[:n, n] = system.a, system.b
    return exponential_less_one(m * complex(time))


def exponential_less_one(x: Complex) -> Complex:
    """``exp(x) - 1`` by its series and doubling: ``D`` becomes ``2 D + D D``, which keeps what is small."""
    norm = float(np.abs(x).sum(axis=0).max(initial=0.0))
    halvings = max(0, ceil(log2(2 * norm))) if norm > 0 else 0
    small: Complex = x * complex(0.5**halvings)
    total = small
    for i in range(_TERMS, 1, -1):
        total = small + small @ total / i
    for _ in range(halvings):
        total = 2 * total + total @ total
    return total


def product(matrix: Complex, columns: Complex) -> Complex:
    """Matrix times many columns, term by term.

    Not by the library's matrix product: its threads cost milliseconds on arrays of this size where processors are
    busy, and its sums differ between machines.
    """
    total: Complex = matrix[:, :1] * columns[0]
    for j in range(1, len(columns)):
        total += matrix[:, j, None] * columns[j]
    return total


def sequence(change: Complex, start: Complex, count: int) -> Complex:
    """Columns ``(1 + change)^k start``, k from 0 to ``count - 1``: as many again with every doubling."""
    columns = start[:, None]
    while columns.shape[1] < count:
        columns = np.concatenate([columns, columns + product(change, columns)], axis=1)
        change = 2 * change + change @ change
    return columns[:, :count]


def moved(change: Complex, start: Complex, samples: Whole) -> Complex:
    """Columns ``(1 + change)^k start`` for each k of ``samples``."""
    columns = np.repeat(start[:, None], len(samples), axis=1)
    for j in range(int(samples.max(initial=0)).bit_length()):
        chosen = (samples >> j) & 1 == 1
        columns[:, chosen] += product(change, columns[:, chosen])
        change = 2 * change + change @ change
    return columns


def _sections(zeros: Sequence[complex], poles: Sequence[complex]) -> list[tuple[complex, complex | None]]:
    """Give every zero the nearest free pole, in ratio; poles without one first, slow before fast."""
    pairs = sorted(
        (abs(pole - zero) / (abs(pole) + abs(zero)), i, j)
        for i, pole in enumerate(poles)
        for j, zero in enumerate(zeros)
    )
    partner: dict[int, complex] = {}
    placed: set[int] = set()
    for _, i, j in pairs:
        if i not in partner and j not in placed:
            partner[i] = zeros[j]
            placed.add(j)
    order = sorted(range(len(poles)), key=lambda i: (i in partner, abs(poles[i])))
    return [(poles[i], partner.get(i)) for i in order]


def _output(pole: complex, zero: complex | None) -> tuple[complex, complex]:
    """What a section passes on directly, and from its state."""
    if zero is None:
        return 0.0, 1.0
    if zero == 0:
        return -pole, pole
    if pole == 0:
        return -1 / zero, 1.0
    return pole / zero, 1 - pole / zero
