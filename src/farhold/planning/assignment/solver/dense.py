"""Exact pairing on a square cost matrix, by SciPy: for up to some thousands of nodes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import linear_sum_assignment
from scipy.sparse import csr_array
from scipy.sparse.csgraph import maximum_bipartite_matching

__all__ = ["MOST", "bottleneck", "fits_under", "least_sum"]

MOST = 5000


def least_sum(cost: NDArray[np.float64]) -> NDArray[np.int64]:
    """Column (n,) of each row of the square `cost` (n, n) with least sum; infinite entries are forbidden.

    Source: Crouse 2016, On implementing 2D rectangular assignment algorithms, IEEE TAES 52, 1679 (SciPy).

    Raises
    ------
    ValueError
        No pairing avoids the forbidden entries.
    """
    _, column = linear_sum_assignment(cost)
    return np.asarray(column, dtype=np.int64)


def fits_under(cost: NDArray[np.float64], cap: float) -> bool:
    """Whether some pairing of all rows of the square `cost` uses entries of at most `cap` only.

    Source: Hopcroft and Karp 1973, SIAM J. Comput. 2, 225 (SciPy). A maximum matching that leaves a row over
    proves that none exists (Koenig's theorem).
    """
    allowed = csr_array(cost <= cap)
    matched = maximum_bipartite_matching(allowed, perm_type="column")
    return bool((matched >= 0).all())


def bottleneck(cost: NDArray[np.float64]) -> float:
    """Least possible largest entry of a pairing of the square `cost` (n, n).

    Bisection over the entries between what every row and column must pay at least and what the pairing of
    least sum pays at most.
    """
    rows = np.arange(len(cost))
    high = float(cost[rows, least_sum(cost)].max())
    low = max(float(cost.min(axis=1).max()), float(cost.min(axis=0).max()))
    values = np.unique(cost[(cost >= low) & (cost <= high)])
    first, last = 0, values.size - 1
    while first < last:
        middle = (first + last) // 2
        if fits_under(cost, float(values[middle])):
            last = middle
        else:
            first = middle + 1
    return float(values[first])
