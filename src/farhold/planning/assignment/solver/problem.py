"""What is to be paired when no matrix can be held: images of nodes and slots, and what bends the price."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from farhold.errors import DomainError, Fault

__all__ = ["Problem", "make_problem"]


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """n nodes and m slots with c = |a_j - u_i| + |b_j - w_i| between them.

    Attributes
    ----------
    node : (n, 6) images u, w [m/s];  slot : (m, 6) images a, b [m/s]
    scale, rate : (n,) price scale c, or scale (1 - exp(-rate c)) where rate [s/m] is above 0
    cap : (n,) most c allowed [m/s]
    leave_slot : (m,) price of leaving a slot empty, if n < m; infinite where it must be filled
    leave_node : (n,) price of leaving a node aside, if n > m; infinite where it must take a slot
    special_node, special_slot, special_price : (s,) pairs with a price of their own, infinite for forbidden
    """

    node: NDArray[np.float64]
    slot: NDArray[np.float64]
    scale: NDArray[np.float64]
    rate: NDArray[np.float64]
    cap: NDArray[np.float64]
    leave_slot: NDArray[np.float64]
    leave_node: NDArray[np.float64]
    special_node: NDArray[np.int64]
    special_slot: NDArray[np.int64]
    special_price: NDArray[np.float64]

    def __post_init__(self) -> None:
        n, m = len(self.node), len(self.slot)
        sizes = {"node": n, "slot": m, "scale": n, "rate": n, "cap": n, "leave_slot": m, "leave_node": n}
        for name, size in sizes.items():
            if len(getattr(self, name)) != size:
                raise DomainError(Fault(name, f"{len(getattr(self, name))} entries", f"{size}"))
        for field in fields(self):
            if np.isnan(getattr(self, field.name)).any():
                raise DomainError(Fault(field.name, "not a number among its entries", "numbers"))
        for name in ("node", "slot", "scale", "rate"):
            if not np.isfinite(getattr(self, name)).all():
                raise DomainError(Fault(name, "an infinite entry", "finite numbers"))
        if (self.scale < 0).any() or (self.rate < 0).any():
            raise DomainError(Fault("scale, rate", "a negative entry", "0 or more"))

    def prices(self, rows: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return the prices of some rows for all slots, (len(rows), m), infinite where forbidden."""
        c = np.empty((len(rows), len(self.slot)))
        for k, i in enumerate(rows):
            gap = self.slot - self.node[i]
            c[k] = np.linalg.norm(gap[:, :3], axis=1) + np.linalg.norm(gap[:, 3:], axis=1)
        rate = self.rate[rows, None]
        bent = np.where(rate > 0.0, -np.expm1(-rate * c), c)
        price = np.where(c <= self.cap[rows, None], self.scale[rows, None] * bent, np.inf)
        for k, i in enumerate(rows):
            own = self.special_node == i
            price[k, self.special_slot[own]] = self.special_price[own]
        return price

    def paid(self, column: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return what each node pays for `column` (n,), -1 for standing aside: (n,)."""
        placed = np.flatnonzero(column >= 0)
        gap = self.slot[column[placed]] - self.node[placed]
        c = np.linalg.norm(gap[:, :3], axis=1) + np.linalg.norm(gap[:, 3:], axis=1)
        rate, scale = self.rate[placed], self.scale[placed]
        out = self.leave_node.copy()
        out[placed] = np.where(c <= self.cap[placed], scale * np.where(rate > 0, -np.expm1(-rate * c), c), np.inf)
        hit = column[self.special_node] == self.special_slot
        out[self.special_node[hit]] = self.special_price[hit]
        return out

    def value(self, column: NDArray[np.int64]) -> float:
        """Return the whole price of a pairing, with what slots left empty cost."""
        empty = np.ones(len(self.slot), dtype=np.bool_)
        empty[column[column >= 0]] = False
        return float(np.sum(self.paid(column), dtype=np.longdouble) + np.sum(self.leave_slot[empty]))


def make_problem(
    u: NDArray[np.float64],
    w: NDArray[np.float64],
    a: NDArray[np.float64],
    b: NDArray[np.float64],
    *,
    scale: NDArray[np.float64] | float = 1.0,
    rate: NDArray[np.float64] | float = 0.0,
    cap: NDArray[np.float64] | float = np.inf,
    leave_slot: NDArray[np.float64] | float = 0.0,
    leave_node: NDArray[np.float64] | float = 0.0,
    special: tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]] | None = None,
) -> Problem:
    """Build a problem from images u, w (n, 3) and a, b (m, 3); the rest as :class:`Problem` says, or one number.

    Raises
    ------
    DomainError
        Sizes that differ, NaN, a negative scale or rate.
    """
    n, m = len(u), len(a)

    def spread(value: NDArray[np.float64] | float, size: int) -> NDArray[np.float64]:
        array = np.asarray(value, dtype=np.float64)
        return np.full(size, float(array)) if array.ndim == 0 else np.ascontiguousarray(array)

    if special is None:
        nobody = np.zeros(0, dtype=np.int64)
        special = (nobody, nobody, np.zeros(0))
    return Problem(
        np.ascontiguousarray(np.hstack([u, w]), dtype=np.float64).reshape(n, 6),
        np.ascontiguousarray(np.hstack([a, b]), dtype=np.float64).reshape(m, 6),
        spread(scale, n),
        spread(rate, n),
        spread(cap, n),
        spread(leave_slot, m),
        spread(leave_node, n),
        np.asarray(special[0], dtype=np.int64),
        np.asarray(special[1], dtype=np.int64),
        np.asarray(special[2], dtype=np.float64),
    )
