"""The tree of the slots of a problem, and its nodes in an order that keeps neighbours together."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.kernels.pairing.layout import LEAF, WIDTH, Rows, Slots, outline
from farhold.planning.assignment.solver.problem import Problem

__all__ = ["Grown", "grow", "halve"]


@dataclass(frozen=True, slots=True, eq=False)
class Grown:
    """A problem laid out for the kernels.

    Attributes
    ----------
    rows, slots : what the kernels read
    node_order : (n,) node of each row;  slot_order : (m,) slot of each place in the tree
    count : rows, with those that leave slots empty
    moments : scratch
    """

    rows: Rows
    slots: Slots
    node_order: NDArray[np.int64]
    slot_order: NDArray[np.int64]
    count: int
    moments: NDArray[np.float64]


def halve(
    points: NDArray[np.float64], leaf: int
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """Halve points (m, d) along their widest side until at most `leaf` are left.

    Returns the order (m,) and, for node k of the tree (root 1, children 2k and 2k + 1), the first point and
    the one past the last, (2 leaves,) each.
    """
    m = len(points)
    leaves = 1
    while leaves * leaf < m:
        leaves *= 2
    order = np.arange(m)
    start, end = np.zeros(2 * leaves, dtype=np.int64), np.zeros(2 * leaves, dtype=np.int64)
    end[1] = m
    for k in range(1, leaves):
        first, last = start[k], end[k]
        middle = first + (last - first) // 2
        if last - first > 1:
            part = order[first:last]
            across = points[part]
            side = int(np.argmax(across.max(axis=0) - across.min(axis=0)))
            order[first:last] = part[np.argpartition(across[:, side], middle - first)]
        start[2 * k], end[2 * k], start[2 * k + 1], end[2 * k + 1] = first, middle, middle, last
    return order, start, end


def _affine(slot: NDArray[np.float64]) -> NDArray[np.float64]:
    """Matrix and offset (12,) of the affine map from a to b that fits all slots (m, 6) best."""
    middle = slot.mean(axis=0)
    away = slot - middle
    matrix = np.linalg.lstsq(away[:, :3], away[:, 3:], rcond=None)[0].T
    return np.concatenate([matrix.ravel(), middle[3:] - matrix @ middle[:3]])


def grow(problem: Problem) -> Grown:
    """Lay out `problem`, which has at least one node and one slot."""
    n, m = len(problem.node), len(problem.slot)
    slot_order, start, end = halve(problem.slot, LEAF)
    node_order = halve(problem.node, LEAF)[0]
    leaves = len(start) // 2
    image = np.zeros((leaves, 6, LEAF))
    leaf = np.repeat(np.arange(leaves), end[leaves:] - start[leaves:])
    image[leaf, :, np.arange(m) - start[leaves:][leaf]] = problem.slot[slot_order]
    slots = Slots(
        leaves,
        start,
        end,
        np.zeros(m, dtype=np.int64),
        image,
        np.ascontiguousarray(problem.leave_slot[slot_order]),
        np.zeros(m),
        np.zeros((2 * leaves, WIDTH)),
        _affine(problem.slot),
    )
    outline(slots)
    row_of, place_of = np.argsort(node_order), np.argsort(slot_order)
    row, place = row_of[problem.special_node], place_of[problem.special_slot]
    special = np.lexsort((place, row))
    first = np.concatenate([[0], np.cumsum(np.bincount(row, minlength=n))]).astype(np.int64)
    rows = Rows(
        n,
        np.ascontiguousarray(problem.node[node_order]),
        problem.scale[node_order],
        problem.rate[node_order],
        problem.cap[node_order],
        problem.leave_node[node_order],
        first,
        np.ascontiguousarray(place[special]),
        np.ascontiguousarray(problem.special_price[special]),
    )
    return Grown(rows, slots, node_order, slot_order, max(n, m), np.empty((2 * leaves, 14)))
