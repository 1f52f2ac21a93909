"""A tree over the slots that finds a node's cheapest slots among all of them without looking at all.

The price of node i for slot j is f(c), c = |a_j - u_i| + |b_j - w_i|, with f(c) = scale c, or, where rate > 0,
scale (1 - exp(-rate c)). Two lower bounds of f(c) - v over the slots below a tree node let the search pass
it by:

- f of the distance to the boxes of a and of b, less the largest v below (the branch-and-bound search of
  Friedman, Bentley and Finkel 1977, ACM TOMS 3, 209);
- c is convex in the images, so it lies above its tangent plane at the centre of the box of a, while v lies
  below a fitted plane. b is taken as an affine map of a plus a rest, whose largest size below is taken off.
  For rate > 0 the chord of f over the box takes the place of the slope.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.pairing.layout import LEAF, REST, B, E, G, H, V, Y, Z

__all__ = ["cheapest", "paid", "price", "row_bound"]

_DEEPEST = 128


@kernel
def _distances(u0, u1, u2, w0, w1, w2, z, leaf, out):
    """Write |a - u| + |b - w| of all places of `leaf` into out (LEAF,)."""
    for t in range(LEAF):
        a, b, c = u0 - z[leaf, 0, t], u1 - z[leaf, 1, t], u2 - z[leaf, 2, t]
        d, e, f = w0 - z[leaf, 3, t], w1 - z[leaf, 4, t], w2 - z[leaf, 5, t]
        out[t] = np.sqrt(a * a + b * b + c * c) + np.sqrt(d * d + e * e + f * f)


@kernel
def price(i, j, rows, slots):
    """Return the price of row i for slot j, infinite where forbidden."""
    if i >= rows.real:
        return slots.empty[j]
    for s in range(rows.first[i], rows.first[i + 1]):
        if rows.column[s] == j:
            return rows.cost[s]
    k = slots.leaf_of[j]
    leaf, t, z = k - slots.leaves, j - slots.start[k], slots.image
    c = d = 0.0
    for e in range(3):
        c += (rows.image[i, e] - z[leaf, e, t]) ** 2
        d += (rows.image[i, 3 + e] - z[leaf, 3 + e, t]) ** 2
    c = np.sqrt(c) + np.sqrt(d)
    if c > rows.cap[i]:
        return np.inf
    if rows.rate[i] > 0.0:
        return -rows.scale[i] * np.expm1(-rows.rate[i] * c)
    return rows.scale[i] * c


@kernel
def paid(taken, rows, slots, aside_v):
    """Return the price of each row for what it holds, and that less its v, (n,) each; 0 where taken is -1.

    taken (n,) : slots, those from m on standing for standing aside at the prices aside_v
    """
    whole, net = np.zeros(taken.size), np.zeros(taken.size)
    for i in range(taken.size):
        j = taken[i]
        if 0 <= j < slots.v.size:
            whole[i] = price(i, j, rows, slots)
            net[i] = whole[i] - slots.v[j]
        elif j >= 0:
            whole[i] = rows.aside[i]
            net[i] = whole[i] - aside_v[j - slots.v.size]
    return whole, net


@kernel
def _bound(k, u0, u1, u2, w0, w1, w2, scale, rate, cap, T, M, limit):
    """Return what f(c) - v is at least below tree node k; any value from `limit` on may come early."""
    x0 = max(max(T[k, 0] - u0, u0 - T[k, 6]), 0.0)
    x1 = max(max(T[k, 1] - u1, u1 - T[k, 7]), 0.0)
    x2 = max(max(T[k, 2] - u2, u2 - T[k, 8]), 0.0)
    x3 = max(max(T[k, 3] - w0, w0 - T[k, 9]), 0.0)
    x4 = max(max(T[k, 4] - w1, w1 - T[k, 10]), 0.0)
    x5 = max(max(T[k, 5] - w2, w2 - T[k, 11]), 0.0)
    low = np.sqrt(x0 * x0 + x1 * x1 + x2 * x2) + np.sqrt(x3 * x3 + x4 * x4 + x5 * x5)
    if low > cap:
        return np.inf
    f_low = scale * low if rate == 0.0 else -scale * np.expm1(-rate * low)
    least = f_low - T[k, V]
    if least >= limit:
        return least
    e0, e1, e2 = T[k, Y] - u0, T[k, Y + 1] - u1, T[k, Y + 2] - u2
    d0, d1, d2 = T[k, Z] - w0, T[k, Z + 1] - w1, T[k, Z + 2] - w2
    r, s = np.sqrt(e0 * e0 + e1 * e1 + e2 * e2), np.sqrt(d0 * d0 + d1 * d1 + d2 * d2)
    slope = scale
    if rate > 0.0:
        y0, y1, y2 = (
            max(T[k, 6] - u0, u0 - T[k, 0]),
            max(T[k, 7] - u1, u1 - T[k, 1]),
            max(T[k, 8] - u2, u2 - T[k, 2]),
        )
        y3, y4, y5 = (
            max(T[k, 9] - w0, w0 - T[k, 3]),
            max(T[k, 10] - w1, w1 - T[k, 4]),
            max(T[k, 11] - w2, w2 - T[k, 5]),
        )
        high = np.sqrt(y0 * y0 + y1 * y1 + y2 * y2) + np.sqrt(y3 * y3 + y4 * y4 + y5 * y5)
        # 1 - exp(-x) >= x - x^2/2 keeps the chord from below without another exponential
        slope = rate * (scale - f_low) * max(0.0, 1.0 - 0.5 * rate * (high - low))
        centre = f_low + slope * (r + s - low)
    else:
        centre = scale * (r + s)
    i = slope / r if r > 0.0 else 0.0
    j = slope / s if s > 0.0 else 0.0
    e0, e1, e2, d0, d1, d2 = e0 * i, e1 * i, e2 * i, d0 * j, d1 * j, d2 * j
    tilt = abs(e0 + M[0] * d0 + M[3] * d1 + M[6] * d2 - T[k, G]) * T[k, H]
    tilt += abs(e1 + M[1] * d0 + M[4] * d1 + M[7] * d2 - T[k, G + 1]) * T[k, H + 1]
    tilt += abs(e2 + M[2] * d0 + M[5] * d1 + M[8] * d2 - T[k, G + 2]) * T[k, H + 2]
    return max(least, centre - T[k, B] - tilt - slope * T[k, REST])


@kernel
def row_bound(i, k, rows, slots):
    """Return what row i pays at least for any slot below tree node k, pairs with a price of their own apart."""
    T = slots.node
    x = y = 0.0
    for d in range(3):
        x += max(max(T[k, d] - rows.image[i, d], rows.image[i, d] - T[k, 6 + d]), 0.0) ** 2
        y += max(max(T[k, 3 + d] - rows.image[i, 3 + d], rows.image[i, 3 + d] - T[k, 9 + d]), 0.0) ** 2
    low = np.sqrt(x) + np.sqrt(y)
    if low > rows.cap[i]:
        return np.inf
    return rows.scale[i] * low if rows.rate[i] == 0.0 else -rows.scale[i] * np.expm1(-rows.rate[i] * low)


@kernel
def _keep(x, j, m, most, found, worth):
    """Put slot j of value x on the heap (largest first) of the `most` best so far; returns their number."""
    if m < most:
        p = m
        m += 1
        while p > 0:
            q = (p - 1) >> 1
            if worth[q] >= x:
                break
            worth[p], found[p] = worth[q], found[q]
            p = q
    else:
        p = 0
        while True:
            q = 2 * p + 1
            if q >= most:
                break
            if q + 1 < most and worth[q + 1] > worth[q]:
                q += 1
            if worth[q] <= x:
                break
            worth[p], found[p] = worth[q], found[q]
            p = q
    worth[p], found[p] = x, j
    return m


@kernel
def cheapest(i, most, rows, slots, stack, stack_bound, found, worth):
    """Find the `most` slots of row i with the least price less v, over all slots.

    found, worth (>= most,) : the slots and price less v, a heap with the largest first
    stack (128,), stack_bound (128 + LEAF,) : scratch
    Returns their number, fewer than `most` only if no others are allowed.
    """
    T, M, N, v, z = slots.node, slots.affine, slots.leaves, slots.v, slots.image
    m = 0
    leaf = stack_bound[_DEEPEST:]
    limit = np.inf
    real = i < rows.real
    u0 = u1 = u2 = w0 = w1 = w2 = scale = rate = 0.0
    cap = np.inf
    first = last = 0
    if real:
        u0, u1, u2 = rows.image[i, 0], rows.image[i, 1], rows.image[i, 2]
        w0, w1, w2 = rows.image[i, 3], rows.image[i, 4], rows.image[i, 5]
        scale, rate, cap = rows.scale[i], rows.rate[i], rows.cap[i]
        first, last = rows.first[i], rows.first[i + 1]
        for s in range(first, last):
            x = rows.cost[s] - v[rows.column[s]]
            if x < limit:
                m = _keep(x, rows.column[s], m, most, found, worth)
                if m == most:
                    limit = worth[0]
    stack[0], stack_bound[0] = 1, -np.inf
    depth = 1
    while depth > 0:
        depth -= 1
        if stack_bound[depth] >= limit:
            continue
        k = stack[depth]
        while 0 < k < N:
            left = 2 * k
            if real:
                x = _bound(left, u0, u1, u2, w0, w1, w2, scale, rate, cap, T, M, limit)
                y = _bound(left + 1, u0, u1, u2, w0, w1, w2, scale, rate, cap, T, M, limit)
            else:
                x, y = -T[left, E], -T[left + 1, E]
            near, far = (left, left + 1) if x <= y else (left + 1, left)
            if max(x, y) < limit:
                stack[depth], stack_bound[depth] = far, max(x, y)
                depth += 1
            k = near if min(x, y) < limit else 0
        if k == 0:
            continue
        if real:
            _distances(u0, u1, u2, w0, w1, w2, z, k - N, leaf)
        for t in range(slots.end[k] - slots.start[k]):
            j = slots.start[k] + t
            if real:
                c = leaf[t]
                if c > cap:
                    continue
                if rate > 0.0:
                    if scale * rate * c * (1.0 - 0.5 * rate * c) - v[j] >= limit:
                        continue
                    x = -scale * np.expm1(-rate * c) - v[j]
                else:
                    x = scale * c - v[j]
                if x < limit:
                    own = False
                    for s in range(first, last):
                        own = own or rows.column[s] == j
                    if own:
                        continue
            else:
                x = slots.empty[j] - v[j]
            if x < limit:
                m = _keep(x, j, m, most, found, worth)
                if m == most:
                    limit = worth[0]
    return m
