"""Impulses of many nodes: their sums, and laid out for lanes."""

import numpy as np

from farhold.kernels.jit import kernel

__all__ = ["totals", "turned"]


@kernel
def totals(dv):
    """Return for each node i a bound on the sum over j of |dv[i, j]|, (n,): the sum of all |components|.

    dv : (n, k, 3).  At most 1.74 times the sum; not finite where any entry is not finite.
    """
    out = np.empty(dv.shape[0])
    part = np.empty(8)
    for i in range(dv.shape[0]):
        row = dv[i].reshape(-1)
        whole = row.size // 8 * 8
        part[:] = 0.0
        for first in range(0, whole, 8):
            for c in range(8):
                part[c] += abs(row[first + c])
        total = 0.0
        for j in range(whole, row.size):
            total += abs(row[j])
        for c in range(8):
            total += part[c]
        out[i] = total
    return out


@kernel
def turned(dv, lanes):
    """Return impulses dv (w, k, 3) with the lane last, (k, 3, lanes), zero beyond w."""
    out = np.zeros((dv.shape[1], 3, lanes))
    # eight lanes at a time fill whole cache lines of the copy
    for first in range(0, dv.shape[0], 8):
        last = min(first + 8, dv.shape[0])
        for j in range(dv.shape[1]):
            for c in range(3):
                for i in range(first, last):
                    out[j, c, i] = dv[i, j, c]
    return out
