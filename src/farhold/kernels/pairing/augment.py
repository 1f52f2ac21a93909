"""Exact finish: shortest augmenting paths from all free rows at once, on lists that grow when they must.

Source: Jonker and Volgenant 1987, Computing 38, 325 (shortest augmenting paths with dual prices). The matrix
is implicit: a row shows its listed slots and a threshold beyond which all its other slots lie; when the
search front passes the threshold the list is doubled from the tree. The prices stay feasible over all pairs.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.pairing.layout import LEAF, fit_planes, lift, settle
from farhold.kernels.pairing.tree import cheapest

__all__ = ["augment"]


@kernel
def _push(key, code, m, keys, codes):
    """Put (key, code) on the heap of m entries (smallest first, four children each)."""
    p = m
    while p > 0:
        q = (p - 1) >> 2
        if keys[q] <= key:
            break
        keys[p], codes[p] = keys[q], codes[q]
        p = q
    keys[p], codes[p] = key, code


@kernel
def _pop(m, keys, codes):
    """Take the first off the heap of m entries."""
    m -= 1
    key, code = keys[m], codes[m]
    p = 0
    while True:
        first = 4 * p + 1
        if first >= m:
            break
        q = first
        for other in range(first + 1, min(first + 4, m)):
            if keys[other] < keys[q]:
                q = other
        if keys[q] >= key:
            break
        keys[p], codes[p] = keys[q], codes[q]
        p = q
    keys[p], codes[p] = key, code


@kernel
def _longer(array, size):
    """Return `array` with room for `size` entries."""
    more = np.empty(size, array.dtype)
    more[: array.size] = array
    return more


@kernel
def _relax(
    i, base, place, count, beyond, total, list_slot, list_cost, v, reach, back, done, touched, marks, keys,
    codes, size,
):  # fmt: skip
    """Bring the slots in the list of row i, and the end of the list, nearer: (marks, size, keys, codes)."""
    if size + count + 3 > keys.size:
        keys, codes = _longer(keys, 2 * size + count + 3), _longer(codes, 2 * size + count + 3)
    for e in range(place, place + count):
        j = list_slot[e]
        d = base + list_cost[e] - v[j]
        if d < reach[j] and not done[j]:
            if reach[j] == np.inf:
                touched[marks] = j
                marks += 1
            reach[j], back[j] = d, i
            _push(d, j, size, keys, codes)
            size += 1
    if beyond < np.inf:
        _push(base + beyond, total + i, size, keys, codes)
        size += 1
    return marks, size, keys, codes


@kernel
def _grow_list(
    own, rows, slots, place, count, room, beyond, list_slot, list_cost, top, stack, stack_bound, found, worth,
):  # fmt: skip
    """Double the list of a row from the tree; returns the end of all lists and the arrays, which may be new."""
    longer = min(max(8, 2 * count[own]), slots.v.size)
    if longer > found.size:
        found, worth = np.empty(2 * longer, np.int64), np.empty(2 * longer)
    q = cheapest(own, longer, rows, slots, stack, stack_bound, found, worth)
    if longer > room[own]:
        if top + longer > list_slot.size:
            list_slot = _longer(list_slot, 3 * list_slot.size // 2 + longer)
            list_cost = _longer(list_cost, list_slot.size)
        place[own], room[own] = top, longer
        top += longer
    count[own] = q
    beyond[own] = worth[0] if q == longer and longer < slots.v.size else np.inf
    for e in range(q):
        list_slot[place[own] + e] = found[e]
        list_cost[place[own] + e] = worth[e] + slots.v[found[e]]
    return top, list_slot, list_cost, found, worth


@kernel
def _reach(j, key, by, holder, root, from_free, seen, labelled, goal):
    """Go on to the holder of slot j, reached from row `by`; returns (labelled, 1 if it ends a search)."""
    i = holder[j]
    if i >= 0:
        root[i], from_free[i] = root[by], key
        seen[labelled] = i
        return labelled + 1, 0
    if goal[root[by]] < 0:
        goal[root[by]] = j
        return labelled, 1
    return labelled, 0


@kernel
def _reach_asides(
    key, by, m, holder, root, from_free, reach, back, done, touched, marks, seen, labelled, goal,
):  # fmt: skip
    """Reach all ways to stand aside at once, from row `by`; returns (marks, labelled, 1 if one was free)."""
    more = 0
    for j in range(m, reach.size):
        if reach[j] == np.inf:
            touched[marks] = j
            marks += 1
        reach[j], back[j], done[j] = key, by, True
        labelled, one = _reach(j, key, by, holder, root, from_free, seen, labelled, goal)
        more += one
    return marks, labelled, more


@kernel
def _lower(far, slots, aside_v, reach, done, touched, marks):
    """Lower the prices of all slots reached before `far` and forget the search; returns how many fell."""
    m = slots.v.size
    changes = 0
    for s in range(marks):
        j = touched[s]
        if done[j] and far > reach[j]:
            if j < m:
                slots.v[j] -= far - reach[j]
                settle(j, slots)
                changes += 1
            else:
                aside_v[j - m] -= far - reach[j]
        done[j] = False
        reach[j] = np.inf
    return changes


@kernel
def _trade(free, left, goal, back, taken, holder):
    """Exchange slots along the paths found; returns how many rows are still free, the first of `free`."""
    for s in range(left):
        j = goal[free[s]]
        while j >= 0:
            i = back[j]
            onward = taken[i]
            taken[i], holder[j] = j, i
            j = onward if i != free[s] else -1
    still = 0
    for s in range(left):
        if taken[free[s]] < 0:
            free[still] = free[s]
            still += 1
    return still


@kernel
def augment(
    rows, slots, place, count, room, beyond, list_slot, list_cost, u, taken, holder, aside_v, moments, share, few,
    most_phases,
):  # fmt: skip
    """Give every free row a slot along shortest paths.

    Returns (rows left, phases, longer lists asked for, list_slot, list_cost); rows are left after
    `most_phases`, and at once if no pairing exists: then as a negative number.
    place, count, room, beyond (n,), list_slot, list_cost : each row's list, anywhere in the two long arrays
    u (n,), slots.v, aside_v : feasible prices; taken (n,), holder (max(n, m),) : pairs on which they are tight
    share : of the free rows, how many free slots a phase reaches; with `few` rows or less it reaches one
    """
    n, m, total = taken.size, slots.v.size, holder.size
    reach, back, done = np.full(total, np.inf), np.full(total, -1, np.int64), np.zeros(total, np.bool_)
    root, from_free, goal = np.full(n, -1, np.int64), np.zeros(n), np.full(n, -1, np.int64)
    touched, seen, free = np.empty(total, np.int64), np.empty(n, np.int64), np.empty(n, np.int64)
    keys, codes = np.empty(1 << 16), np.empty(1 << 16, np.int64)
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    found, worth = np.empty(64, np.int64), np.empty(64)
    asked = changes = phases = 0
    lift(slots)
    fit_planes(slots, moments)
    top, left = (place + room).max(), (taken < 0).sum()
    free[:left] = np.flatnonzero(taken < 0)
    while left > 0 and phases < most_phases:
        phases += 1
        size = marks = goals = ends = scanned = 0
        idle_seen = aside_done = False
        far, aside_reach, aside_back = 0.0, np.inf, -1
        want = max(1, int(share * left)) if left > few else 1
        labelled = left
        for s in range(left):
            i = seen[s] = free[s]
            root[i], from_free[i], goal[i] = i, 0.0, -1
        while ends < want:
            while scanned < labelled:
                i = seen[scanned]
                scanned += 1
                if i >= rows.real:
                    # rows that leave slots empty are one and the same: the first reached stands for all
                    if idle_seen:
                        continue
                    idle_seen = True
                own = min(i, rows.real)
                base = from_free[i] - u[i]
                marks, size, keys, codes = _relax(
                    i, base, place[own], count[own], beyond[own], total, list_slot, list_cost, slots.v, reach,
                    back, done, touched, marks, keys, codes, size,
                )  # fmt: skip
                if aside_v.size and base + rows.aside[i] - aside_v[0] < aside_reach:
                    aside_reach, aside_back = base + rows.aside[i] - aside_v[0], i
                    _push(aside_reach, total + n, size, keys, codes)
                    size += 1
            if size == 0:
                break
            key, code = keys[0], codes[0]
            _pop(size, keys, codes)
            size -= 1
            if code == total + n:
                if aside_done or key > aside_reach:
                    continue
                aside_done = True
                far = max(far, key)
                marks, labelled, more = _reach_asides(
                    key, aside_back, m, holder, root, from_free, reach, back, done, touched, marks, seen, labelled,
                    goal,
                )  # fmt: skip
                goals, ends = goals + more, ends + more
            elif code >= total:
                i = code - total
                own = min(i, rows.real)
                if from_free[i] - u[i] + beyond[own] > key:
                    continue
                asked += 1
                top, list_slot, list_cost, found, worth = _grow_list(
                    own, rows, slots, place, count, room, beyond, list_slot, list_cost, top, stack, stack_bound,
                    found, worth,
                )  # fmt: skip
                base = from_free[i] - u[i]
                marks, size, keys, codes = _relax(
                    i, base, place[own], count[own], beyond[own], total, list_slot, list_cost, slots.v, reach,
                    back, done, touched, marks, keys, codes, size,
                )  # fmt: skip
            elif not done[code] and key <= reach[code]:
                done[code] = True
                far = max(far, key)
                ends += 1 if holder[code] < 0 else 0
                labelled, more = _reach(code, key, back[code], holder, root, from_free, seen, labelled, goal)
                goals += more
        for s in range(labelled):
            u[seen[s]] += far - from_free[seen[s]]
        changes += _lower(far, slots, aside_v, reach, done, touched, marks)
        if goals == 0:
            return -left, phases, asked, list_slot, list_cost
        left = _trade(free, left, goal, back, taken, holder)
        if changes > 2 * m:
            fit_planes(slots, moments)
            changes = 0
    return left, phases, asked, list_slot, list_cost
