"""Which root of one operating point becomes which of the next: the pairing that moves them least in all."""

from __future__ import annotations

from collections.abc import Sequence
from math import inf

Costs = Sequence[Sequence[float]]


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
    costs = [[abs(new - old) for new in after] for old in before]
    nearest = [min(range(len(row)), key=row.__getitem__) for row in costs]
    # Where every root has a nearest one of its own, no pairing moves any of them less.
    return nearest if len(set(nearest)) == len(nearest) else assigned(costs)


def assigned(costs: Costs) -> list[int]:
    """The assignment of least total cost: for each row its column.

    Notes
    -----
    By shortest augmenting paths with potentials, one row after the other (Kuhn, Naval Research Logistics Quarterly 2,
    1955; Tomizawa, Networks 1, 1971; both from memory). Costs less potentials stay zero along assigned edges and not
    negative elsewhere, so each path is found as by Dijkstra.
    """
    n = len(costs)
    of_row, of_column = [0.0] * n, [0.0] * (n + 1)
    owner = [-1] * (n + 1)  # the row of each column; column n is where a path starts
    for row in range(n):
        owner[n] = row
        column = n
        least, came_from, done = [inf] * n, [n] * n, [False] * (n + 1)
        while owner[column] >= 0:
            done[column] = True
            at = owner[column]
            for j in range(n):
                reduced = costs[at][j] - of_row[at] - of_column[j]
                if not done[j] and reduced < least[j]:
                    least[j], came_from[j] = reduced, column
            following = min((j for j in range(n) if not done[j]), key=least.__getitem__)
            step = least[following]
            for j in range(n + 1):
                if done[j]:
                    of_row[owner[j]] += step
                    of_column[j] -= step
                elif j < n:
                    least[j] -= step
            column = following
        while column != n:
            owner[column] = owner[came_from[column]]
            column = came_from[column]
    columns = [0] * n
    for column in range(n):
        columns[owner[column]] = column
    return columns
