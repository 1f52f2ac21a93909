"""Auction of the slots among the rows: each free row takes its cheapest slot and lowers that slot's price v.

Source: Bertsekas 1988, Ann. Oper. Res. 14, 105 (epsilon scaling); here each row keeps its cheapest slots and
the value beyond which all others lie. As v only falls, the list stays exact until its second best passes it.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.pairing.layout import LEAF, fit_planes, lift, settle
from farhold.kernels.pairing.tree import cheapest, price

__all__ = ["auction", "best_of_all", "level_asides", "level_empties"]


@kernel
def _sink(heap, aside_v):
    """Restore the heap (largest v first) after its first entry fell."""
    p, own = 0, heap[0]
    while True:
        q = 2 * p + 1
        if q >= heap.size:
            break
        if q + 1 < heap.size and aside_v[heap[q + 1]] > aside_v[heap[q]]:
            q += 1
        if aside_v[heap[q]] <= aside_v[own]:
            break
        heap[p] = heap[q]
        p = q
    heap[p] = own


@kernel
def _two_best(i, width, count, list_slot, list_cost, slots):
    """Return the best slot in the list of row i, its value, and the second best value."""
    best = second = np.inf
    slot = -1
    for e in range(i * width, i * width + count[i]):
        x = list_cost[e] - slots.v[list_slot[e]]
        if x < second:
            if x < best:
                second, best, slot = best, x, list_slot[e]
            else:
                second = x
    return slot, best, second


@kernel
def _ask(i, width, rows, slots, count, beyond, list_slot, list_cost, stack, stack_bound, found, worth):
    """Fill the list of row i anew from the tree."""
    m = cheapest(i, width, rows, slots, stack, stack_bound, found, worth)
    count[i] = m
    beyond[i] = worth[0] if m == width else np.inf
    for e in range(m):
        list_slot[i * width + e] = found[e]
        list_cost[i * width + e] = worth[e] + slots.v[found[e]]


@kernel
def auction(
    eps, only_one, rows, slots, width, count, beyond, list_slot, list_cost, taken, holder, aside_v, refresh,
    moments, most_bids, enough_left,
):  # fmt: skip
    """Let free rows bid until `enough_left` are left or `most_bids` were made; returns the bids and who is left.

    only_one : what a row with a single allowed slot bids for it
    width, count, beyond, list_slot, list_cost : lists of all rows, kept up to date
    taken (n,), holder (max(n, m),) : who holds what, -1 for nobody; pairs worse than `eps` are dissolved first
    aside_v (max(0, n - m),) : prices of standing aside, the holders beyond the m slots
    """
    n, m = taken.size, slots.v.size
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    found, worth = np.empty(width, np.int64), np.empty(width)
    queue = np.empty(n + 1, np.int64)
    heap = np.argsort(-aside_v)
    head = tail = waiting = bids = 0
    lift(slots)
    fit_planes(slots, moments)
    for i in range(n):
        j = taken[i]
        if j >= 0:
            _, best, _ = _two_best(i, width, count, list_slot, list_cost, slots)
            best = min(best, beyond[i])
            if heap.size:
                best = min(best, rows.aside[i] - aside_v[heap[0]])
            paid = price(i, j, rows, slots) - slots.v[j] if j < m else rows.aside[i] - aside_v[j - m]
            if paid > best + eps:
                taken[i], holder[j] = -1, -1
        if taken[i] < 0:
            queue[tail] = i
            tail += 1
            waiting += 1
    while waiting > enough_left and bids < most_bids:
        i = queue[head]
        head = head + 1 if head < n else 0
        waiting -= 1
        slot, best, second = _two_best(i, width, count, list_slot, list_cost, slots)
        if slot < 0 or second > beyond[i]:
            _ask(i, width, rows, slots, count, beyond, list_slot, list_cost, stack, stack_bound, found, worth)
            slot, best, second = _two_best(i, width, count, list_slot, list_cost, slots)
        for e in range(min(2, heap.size)):
            # the two best of the heap are the root and one of its children
            k = e if e == 0 or heap.size < 3 or aside_v[heap[1]] >= aside_v[heap[2]] else 2
            x = rows.aside[i] - aside_v[heap[k]]
            if x < best:
                second, best, slot = best, x, m + heap[k]
            elif x < second:
                second = x
        bids += 1
        if slot < 0:
            continue
        if second == np.inf:
            second = best + only_one
        if slot < m:
            slots.v[slot] -= (second - best) + eps
            settle(slot, slots)
        else:
            aside_v[slot - m] -= (second - best) + eps
            _sink(heap, aside_v)
        other = holder[slot]
        holder[slot], taken[i] = i, slot
        if other >= 0:
            taken[other] = -1
            queue[tail] = other
            tail = tail + 1 if tail < n else 0
            waiting += 1
        if bids % refresh == 0:
            fit_planes(slots, moments)
    return bids, waiting


@kernel
def level_empties(rows, slots, taken):
    """Lower v so that all rows which leave slots empty pay the same for each slot they hold."""
    level = -np.inf
    for i in range(rows.real, taken.size):
        if taken[i] >= 0:
            level = max(level, slots.empty[taken[i]] - slots.v[taken[i]])
    if level > -np.inf:
        for j in range(slots.v.size):
            slots.v[j] = min(slots.v[j], slots.empty[j] - level)


@kernel
def level_asides(aside_v):
    """Lower the prices of standing aside to their least."""
    if aside_v.size:
        aside_v[:] = aside_v.min()


@kernel
def best_of_all(rows, slots, width, count, beyond, list_slot, list_cost, aside_v, best, slot, moments):
    """Write each row's least price less v over all slots, and the slot, (n,); the lists are kept up to date."""
    m = slots.v.size
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    found, worth = np.empty(width, np.int64), np.empty(width)
    lift(slots)
    fit_planes(slots, moments)
    for i in range(best.size):
        slot[i], best[i], _ = _two_best(i, width, count, list_slot, list_cost, slots)
        if slot[i] < 0 or best[i] > beyond[i]:
            _ask(i, width, rows, slots, count, beyond, list_slot, list_cost, stack, stack_bound, found, worth)
            slot[i], best[i], _ = _two_best(i, width, count, list_slot, list_cost, slots)
        if aside_v.size and rows.aside[i] - aside_v[0] < best[i]:
            best[i], slot[i] = rows.aside[i] - aside_v[0], m
