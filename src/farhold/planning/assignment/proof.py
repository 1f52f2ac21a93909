"""Proof of a pairing: dual prices and the lower bound that they certify, whoever found the pairing.

For any prices v of the columns, no pairing of all rows and columns costs less than
sum_i min_j (c_ij - v_j) + sum_j v_j (weak duality of the assignment problem; Kuhn 1955). The bound below is
evaluated over all entries of the matrix, so it holds even if the prices were wrong.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.kernels.pairing.auction import best_of_all
from farhold.planning.assignment.solver.dense import fits_under
from farhold.planning.assignment.solver.problem import Problem
from farhold.planning.assignment.solver.tree import grow

__all__ = [
    "Certificate",
    "certify_sum",
    "certify_tree",
    "certify_worst",
    "check_rows",
    "column_prices",
    "lower_bound",
]

_MOST_ROUNDS = 2000


@dataclass(frozen=True, slots=True, eq=False)
class Certificate:
    """The cost of a pairing, the bound that no pairing can undercut, and the prices that prove it."""

    value: float
    bound: float
    row_price: NDArray[np.float64]
    column_price: NDArray[np.float64]


def column_prices(cost: NDArray[np.float64], column: NDArray[np.int64]) -> NDArray[np.float64]:
    """Prices (n,) of the columns under which each row's column of an optimal pairing is its cheapest.

    Shortest paths in the exchange graph from a source that reaches each column at no cost (Bellman and
    Ford); for a pairing that is not optimal the rounds stop unfinished and the bound shows a gap.
    """
    rows = np.arange(len(cost))
    paid = cost[rows, column]
    rise = cost - paid[:, None]
    price = np.zeros(len(cost))
    tiny = 1e-15 * max(1e-300, float(np.abs(paid).max()))
    for _ in range(_MOST_ROUNDS):
        better = np.minimum(price, (price[column][:, None] + rise).min(axis=0))
        fall = float((price - better).max())
        price = better
        if fall <= tiny:
            break
    return price


def lower_bound(cost: NDArray[np.float64], price: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
    """Bound certified by column prices (n,) on the square `cost`, and the rows' prices (n,)."""
    row = (cost - price).min(axis=1)
    return float(np.sum(row, dtype=np.longdouble) + np.sum(price, dtype=np.longdouble)), row


def certify_sum(cost: NDArray[np.float64], column: NDArray[np.int64]) -> Certificate:
    """Certify the pairing row k to `column[k]` of the square `cost` (n, n)."""
    price = column_prices(cost, column)
    bound, row = lower_bound(cost, price)
    value = float(np.sum(cost[np.arange(len(cost)), column], dtype=np.longdouble))
    return Certificate(value, min(bound, value), row, price)


def certify_worst(cost: NDArray[np.float64], column: NDArray[np.int64], total: Certificate) -> Certificate:
    """Certify the largest entry of a pairing of the square `cost` (n, n) as the least possible.

    The bound is the entry itself if no pairing gets by with smaller ones, which a maximum matching shows;
    else what each row and column must pay at least. The prices are those of `total`, the sum under the cap.
    """
    value = float(cost[np.arange(len(cost)), column].max(initial=0.0))
    bound = value
    if len(cost) and fits_under(cost, float(np.nextafter(value, -np.inf))):
        bound = max(float(cost.min(axis=1).max()), float(cost.min(axis=0).max()))
    return Certificate(value, bound, total.row_price, total.column_price)


def certify_tree(
    problem: Problem, column: NDArray[np.int64], column_price: NDArray[np.float64], aside_price: float = 0.0
) -> Certificate:
    """Certify a pairing of `problem` over all pairs, by a tree of its slots that is grown anew.

    Parameters
    ----------
    column : (n,) slot of each node, -1 for nodes left aside
    column_price, aside_price : (m,) prices of the slots, and of standing aside if n > m; any prices prove a
        bound, those of the solver the best one

    Returns
    -------
    value infinite where a node has no slot or two share one; bound; row prices (n,); `column_price`
    """
    n, m = len(problem.node), len(problem.slot)
    taken = column[column >= 0]
    lawful = np.unique(taken).size == taken.size == min(n, m)
    value = problem.value(column) if lawful else np.inf
    if n == 0 or m == 0:
        return Certificate(value, value, problem.leave_node.copy(), column_price)
    grown = grow(problem)
    grown.slots.v[:] = column_price[grown.slot_order]
    aside = np.full(max(0, n - m), aside_price)
    width, count = 2, grown.count
    row, best = np.empty(count), np.empty(count, dtype=np.int64)
    best_of_all(
        grown.rows, grown.slots, width, np.zeros(count, np.int64), np.full(count, -np.inf),
        np.zeros(count * width, np.int32), np.zeros(count * width), aside, row, best, grown.moments,
    )  # fmt: skip
    bound = sum(np.sum(part, dtype=np.longdouble) for part in (row, column_price, aside))
    row_price = np.empty(n)
    row_price[grown.node_order] = row[:n]
    return Certificate(value, min(float(bound), value), row_price, column_price)


def check_rows(problem: Problem, proof: Certificate, rows: NDArray[np.int64], aside_price: float = 0.0) -> float:
    """Return by how much the row prices of `proof` exceed what a look at all slots allows, at most over `rows`.

    No tree takes part; a sound certificate gives 0 but for rounding.
    """
    n, m = len(problem.node), len(problem.slot)
    most = (problem.prices(rows) - proof.column_price).min(axis=1, initial=np.inf)
    if n > m:
        most = np.minimum(most, problem.leave_node[rows] - aside_price)
    return float((proof.row_price[rows] - most).max(initial=0.0))
