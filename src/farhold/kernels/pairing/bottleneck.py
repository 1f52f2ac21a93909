"""Which pairings get by with prices of at most a limit: a maximum matching on the implicit graph.

Source: Pothen and Fan 1990, ACM TOMS 16, 303 (phases of disjoint augmenting paths, depth first with look-ahead);
the edges are found by a tree of the slots, from which each slot is struck out once a phase. A phase without a
path leaves a set of rows that reach fewer slots than they are (Hall 1935), the proof that the limit is too low.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.pairing.layout import LEAF
from farhold.kernels.pairing.tree import price, row_bound

__all__ = ["dearest_least", "match_under"]


@kernel
def _strike(j, slots, open_, alive):
    """Take slot j out of the tree of open slots."""
    alive[j] = False
    k = slots.leaf_of[j]
    while k >= 1:
        open_[k] -= 1
        k >>= 1


@kernel
def _fill(slots, alive, open_):
    """Count the open slots below each tree node."""
    for k in range(2 * slots.leaves - 1, 0, -1):
        if k >= slots.leaves:
            open_[k] = 0
            for j in range(slots.start[k], slots.end[k]):
                open_[k] += 1 if alive[j] else 0
        else:
            open_[k] = open_[2 * k] + open_[2 * k + 1]


@kernel
def _near(i, limit, nearest, rows, slots, open_, alive, stack, stack_bound):
    """Find an open slot whose price for row i is at most `limit`: the cheapest if `nearest`, else any.

    Returns the slot (-1 for none) and its price.
    """
    found, least = -1, np.inf
    if i >= rows.real:
        return found, least
    for s in range(rows.first[i], rows.first[i + 1]):
        j = rows.column[s]
        if alive[j] and rows.cost[s] <= limit and rows.cost[s] < least:
            found, least = j, rows.cost[s]
    if found >= 0:
        if not nearest:
            return found, least
        limit = least
    own = rows.first[i + 1] > rows.first[i]
    depth = 0
    if open_[1] > 0:
        stack[0], stack_bound[0] = 1, 0.0
        depth = 1
    while depth > 0:
        depth -= 1
        if stack_bound[depth] > limit:
            continue
        k = stack[depth]
        while 0 < k < slots.leaves:
            left = 2 * k
            x = row_bound(i, left, rows, slots) if open_[left] > 0 else np.inf
            y = row_bound(i, left + 1, rows, slots) if open_[left + 1] > 0 else np.inf
            near, far = (left, left + 1) if x <= y else (left + 1, left)
            if max(x, y) <= limit and open_[far] > 0:
                stack[depth], stack_bound[depth] = far, max(x, y)
                depth += 1
            k = near if min(x, y) <= limit and open_[near] > 0 else 0
        if k == 0:
            continue
        for j in range(slots.start[k], slots.end[k]):
            if not alive[j]:
                continue
            x = price(i, j, rows, slots)
            if x <= limit and x < least:
                if own and _is_special(i, j, rows):
                    continue
                found, least, limit = j, x, x
                if not nearest:
                    return found, least
    return found, least


@kernel
def _is_special(i, j, rows):
    """Return whether the pair has a price of its own."""
    hit = False
    for s in range(rows.first[i], rows.first[i + 1]):
        hit = hit or rows.column[s] == j
    return hit


@kernel
def dearest_least(rows, slots):
    """Return the largest of the rows' least prices: no pairing has a smaller worst."""
    alive = np.ones(slots.v.size, np.bool_)
    open_ = np.zeros(2 * slots.leaves, np.int64)
    _fill(slots, alive, open_)
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    most = 0.0
    for i in range(rows.real):
        _, x = _near(i, np.inf, True, rows, slots, open_, alive, stack, stack_bound)
        most = max(most, x)
    return most


@kernel
def match_under(limit, hasty, rows, slots, taken, holder):
    """Enlarge a matching of prices of at most `limit` until none is larger.

    hasty : stop at the first proof that not all rows can be matched
    taken (n,), holder (>= m,) : who holds what, -1 for nobody; only rows that fly take part
    Returns (rows left free, the least limit at which more is possible or `limit` itself, phases).
    """
    n, m = rows.real, slots.v.size
    free_slot, alive = holder[:m] < 0, np.ones(m, np.bool_)
    free_open, open_ = np.zeros(2 * slots.leaves, np.int64), np.zeros(2 * slots.leaves, np.int64)
    _fill(slots, free_slot, free_open)
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    path, visited = np.empty(n + 1, np.int64), np.zeros(n, np.bool_)
    phases = 0
    while True:
        phases += 1
        alive[:], visited[:] = True, False
        _fill(slots, alive, open_)
        gained = free = 0
        for source in range(n):
            if taken[source] >= 0:
                continue
            free += 1
            depth, path[0], visited[source] = 0, source, True
            while depth >= 0:
                i = path[depth]
                j, _ = _near(i, limit, False, rows, slots, free_open, free_slot, stack, stack_bound)
                if j >= 0:
                    _strike(j, slots, free_open, free_slot)
                    if alive[j]:
                        _strike(j, slots, open_, alive)
                    while depth >= 0:
                        i = path[depth]
                        onward = taken[i]
                        taken[i], holder[j] = j, i
                        j = onward
                        depth -= 1
                    gained += 1
                    free -= 1
                    break
                j, _ = _near(i, limit, False, rows, slots, open_, alive, stack, stack_bound)
                if j < 0:
                    depth -= 1
                    continue
                _strike(j, slots, open_, alive)
                depth += 1
                path[depth] = holder[j]
                visited[holder[j]] = True
            if hasty and depth < 0 and gained == 0:
                break
        if free == 0:
            return 0, limit, phases
        if gained == 0:
            break
    # the rows visited reach no slot beyond those struck out: more is possible only by a price out of this set
    further = np.inf
    for i in range(n):
        if visited[i]:
            _, x = _near(i, further, True, rows, slots, open_, alive, stack, stack_bound)
            further = min(further, x)
    return free, further, phases
