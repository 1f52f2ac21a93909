"""How slots and nodes are laid out for the search, and the bounds that each tree node carries."""

from typing import NamedTuple

import numpy as np

from farhold.kernels.jit import kernel

__all__ = ["LEAF", "WIDTH", "Rows", "Slots", "fit_planes", "lift", "outline", "settle"]

LEAF = 16
"""Most slots of a leaf."""
WIDTH = 32
"""Numbers per tree node: lower and upper corners of (a, b), then the columns below."""
V, E, Y, H, G, B, Z, REST = 12, 13, 14, 17, 20, 23, 24, 27
_FEWEST = 24


class Slots(NamedTuple):
    """The m slots in the order of the tree, and the tree: node k has the children 2k and 2k + 1, root 1.

    `leaves` first leaf; `start`, `end` (2 leaves,) slots below each node; `leaf_of` (m,); `image` (leaves, 6,
    LEAF) a and b of the slots leaf by leaf; `empty` (m,) price of leaving a slot empty; `v` (m,) dual prices;
    `node` (2 leaves, WIDTH) bounds; `affine` (12,) matrix and offset of b as a map of a.
    """

    leaves: int
    start: np.ndarray
    end: np.ndarray
    leaf_of: np.ndarray
    image: np.ndarray
    empty: np.ndarray
    v: np.ndarray
    node: np.ndarray
    affine: np.ndarray


class Rows(NamedTuple):
    """The nodes: `real` of them fly, rows beyond leave a slot empty.

    `image` (real, 6) u and w; `scale`, `rate`, `cap` (real,) of the price, `cap` the most c allowed; `aside`
    (real,) price of standing aside; `first` (real + 1,), `column`, `cost`: pairs with a price of their own,
    row by row, infinite for forbidden ones.
    """

    real: int
    image: np.ndarray
    scale: np.ndarray
    rate: np.ndarray
    cap: np.ndarray
    aside: np.ndarray
    first: np.ndarray
    column: np.ndarray
    cost: np.ndarray


@kernel
def outline(slots):
    """Write the boxes, centres and rests of all tree nodes."""
    T, z, M = slots.node, slots.image, slots.affine
    for k in range(2 * slots.leaves - 1, 0, -1):
        T[k, :6], T[k, 6:12], T[k, REST] = np.inf, -np.inf, 0.0
        if k >= slots.leaves:
            leaf = k - slots.leaves
            for t in range(slots.end[k] - slots.start[k]):
                slots.leaf_of[slots.start[k] + t] = k
                rest = 0.0
                for d in range(6):
                    T[k, d] = min(T[k, d], z[leaf, d, t])
                    T[k, 6 + d] = max(T[k, 6 + d], z[leaf, d, t])
                for d in range(3):
                    at = M[9 + d] - z[leaf, 3 + d, t]
                    for e in range(3):
                        at += M[3 * d + e] * z[leaf, e, t]
                    rest += at * at
                T[k, REST] = max(T[k, REST], np.sqrt(rest))
        else:
            for child in (2 * k, 2 * k + 1):
                for d in range(6):
                    T[k, d] = min(T[k, d], T[child, d])
                    T[k, 6 + d] = max(T[k, 6 + d], T[child, 6 + d])
                T[k, REST] = max(T[k, REST], T[child, REST])
        for d in range(3):
            T[k, Y + d] = 0.5 * (T[k, d] + T[k, 6 + d])
            T[k, H + d] = 0.5 * (T[k, 6 + d] - T[k, d])
        for d in range(3):
            at = M[9 + d]
            for e in range(3):
                at += M[3 * d + e] * T[k, Y + e]
            T[k, Z + d] = at


@kernel
def lift(slots):
    """Write the largest v, and the largest v less the price of staying empty, of all tree nodes."""
    T = slots.node
    for k in range(2 * slots.leaves - 1, 0, -1):
        if k >= slots.leaves:
            T[k, V] = T[k, E] = -np.inf
            for j in range(slots.start[k], slots.end[k]):
                T[k, V] = max(T[k, V], slots.v[j])
                T[k, E] = max(T[k, E], slots.v[j] - slots.empty[j])
        else:
            left, right = 2 * k, 2 * k + 1
            T[k, V] = max(T[left, V], T[right, V])
            T[k, E] = max(T[left, E], T[right, E])


@kernel
def settle(j, slots):
    """Bring the largest v above slot j up to date after its v has changed."""
    T = slots.node
    k = slots.leaf_of[j]
    most, most_empty = -np.inf, -np.inf
    for other in range(slots.start[k], slots.end[k]):
        most = max(most, slots.v[other])
        most_empty = max(most_empty, slots.v[other] - slots.empty[other])
    while T[k, V] != most or T[k, E] != most_empty:
        T[k, V], T[k, E] = most, most_empty
        if k == 1:
            break
        most = max(most, T[k ^ 1, V])
        most_empty = max(most_empty, T[k ^ 1, E])
        k >>= 1


@kernel
def _slope(m, T, k):
    """Write the least-squares slope of v over a from the moments m (14,) into tree node k."""
    q = m[0]
    a, b, c, w = m[1] / q, m[2] / q, m[3] / q, m[4] / q
    xx, xy, xz = m[5] / q - a * a, m[6] / q - a * b, m[7] / q - a * c
    yy, yz, zz = m[8] / q - b * b, m[9] / q - b * c, m[10] / q - c * c
    p, r, s = m[11] / q - a * w, m[12] / q - b * w, m[13] / q - c * w
    ridge = 1e-6 * (xx + yy + zz) + 1e-300
    xx += ridge
    yy += ridge
    zz += ridge
    c00, c01, c02 = yy * zz - yz * yz, xz * yz - xy * zz, xy * yz - xz * yy
    c11, c12, c22 = xx * zz - xz * xz, xy * xz - xx * yz, xx * yy - xy * xy
    det = xx * c00 + xy * c01 + xz * c02
    if det > 0.0:
        T[k, G] = (c00 * p + c01 * r + c02 * s) / det
        T[k, G + 1] = (c01 * p + c11 * r + c12 * s) / det
        T[k, G + 2] = (c02 * p + c12 * r + c22 * s) / det
    else:
        T[k, G] = T[k, G + 1] = T[k, G + 2] = 0.0


@kernel
def fit_planes(slots, moments):
    """Fit a plane to v below each tree node and push it above all of them; moments (2 leaves, 14) is scratch.

    The planes stay valid while v falls.
    """
    T, z, v = slots.node, slots.image, slots.v
    y0, y1, y2 = z[0, 0, 0], z[0, 1, 0], z[0, 2, 0]
    for k in range(2 * slots.leaves - 1, 0, -1):
        if k >= slots.leaves:
            moments[k, :] = 0.0
            leaf = k - slots.leaves
            for t in range(slots.end[k] - slots.start[k]):
                a, b, c, w = z[leaf, 0, t] - y0, z[leaf, 1, t] - y1, z[leaf, 2, t] - y2, v[slots.start[k] + t]
                new = (1.0, a, b, c, w, a * a, a * b, a * c, b * b, b * c, c * c, a * w, b * w, c * w)
                for d in range(14):
                    moments[k, d] += new[d]
        else:
            for d in range(14):
                moments[k, d] = moments[2 * k, d] + moments[2 * k + 1, d]
    for k in range(1, 2 * slots.leaves):
        if k > 1 and moments[k, 0] < _FEWEST:
            for d in range(3):
                T[k, G + d] = T[k >> 1, G + d]
        elif moments[k, 0] < 5:
            for d in range(3):
                T[k, G + d] = 0.0
        else:
            _slope(moments[k], T, k)
        most = -np.inf
        for j in range(slots.start[k], slots.end[k]):
            under = slots.leaf_of[j]
            over = v[j]
            for d in range(3):
                over -= T[k, G + d] * (z[under - slots.leaves, d, j - slots.start[under]] - T[k, Y + d])
            most = max(most, over)
        T[k, B] = most
