"""A regular lattice, filled from its centre."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from farhold.errors import DomainError, Fault

_CELLS = {
    "cubic": np.eye(3),
    "hexagonal": np.array(
        [[1.0, 0.0, 0.0], [0.5, math.sqrt(0.75), 0.0], [0.5, math.sqrt(1 / 12), math.sqrt(2 / 3)]]
    ),
}


def make(count: int, spacing_m: float, packing: str = "hexagonal") -> NDArray[np.float64]:
    """Take the (count, 3) lattice points nearest the centre, neighbours `spacing_m` [m] apart.

    `packing` is ``cubic`` or ``hexagonal``: hexagonal layers across N, each in the hollows of the one below
    (three layers repeat), the densest there is. Points at the same distance are taken in the order of their
    coordinates.
    """
    if packing not in _CELLS:
        raise DomainError(Fault("packing", f"got {packing!r}", "cubic or hexagonal"))
    cell = _CELLS[packing]
    volume = float(np.linalg.det(cell))
    # a ball this large holds at least `count` lattice points: its radius less the reach of one cell does
    reach = np.cbrt(3.0 * count * volume / (4.0 * np.pi)) + float(np.abs(cell).sum(axis=0).max())
    bounds = np.ceil(reach * np.linalg.norm(np.linalg.inv(cell), axis=0)).astype(int)
    axes = [np.arange(-n, n + 1) for n in bounds]
    points = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3) @ cell
    square = np.round(np.einsum("ij,ij->i", points, points), 9)
    near = np.flatnonzero(square <= reach * reach)
    near = near[np.lexsort((*np.round(points[near], 9).T[::-1], square[near]))][:count]
    return np.asarray(points[near] * spacing_m, dtype=float)
