"""Which of some things goes with which of others, so that the pairs cost least in all."""

from __future__ import annotations

from math import inf

from realize.checks.chain import Real


def assigned(cost: Real) -> list[int]:
    """Column of each row in the assignment of least total cost; no more rows than columns.

    Notes
    -----
    Where every row has its cheapest column to itself, that is it; else shortest augmenting paths (Kuhn 1955, Munkres
    1957) with row and column potentials.
    """
    nearest = cost.argmin(axis=1)
    if len(set(nearest.tolist())) == len(nearest):
        return [int(j) for j in nearest]
    row_of = [-1] * cost.shape[1]
    row_price, column_price = [0.0] * cost.shape[0], [0.0] * cost.shape[1]
    costs = cost.tolist()
    for row in range(cost.shape[0]):
        _augment(costs, row, row_of, row_price, column_price)
    column_of = {i: j for j, i in enumerate(row_of) if i >= 0}
    return [column_of[i] for i in range(cost.shape[0])]


def _augment(
    cost: list[list[float]], row: int, row_of: list[int], row_price: list[float], column_price: list[float]
) -> None:
    """Give one more row a column, moving others along the cheapest chain of exchanges."""
    columns = range(len(row_of))
    reach, came_from, settled = [inf] * len(row_of), [-1] * len(row_of), [False] * len(row_of)
    column, at, length = -1, row, 0.0
    reached = [(row, 0.0)]
    while at >= 0:
        for j in columns:
            step = length + cost[at][j] - row_price[at] - column_price[j]
            if not settled[j] and step < reach[j]:
                reach[j], came_from[j] = step, column
        column = min((j for j in columns if not settled[j]), key=lambda j: reach[j])
        settled[column], length, at = True, reach[column], row_of[column]
        if at >= 0:
            reached.append((at, length))
    for i, when in reached:
        row_price[i] += length - when
    for j in columns:
        if settled[j]:
            column_price[j] -= length - reach[j]
    while column >= 0:
        before = came_from[column]
        row_of[column] = row if before < 0 else row_of[before]
        column = before
