"""Pairing of all nodes and slots, class by class: who may go where, who must, who stays."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.distance import cdist

from farhold.errors import CaseError, Fault, NoSolutionError
from farhold.planning.assignment.objective import Objective
from farhold.planning.assignment.proof import Certificate, certify_sum, certify_worst
from farhold.planning.assignment.solver.dense import MOST, bottleneck, least_sum
from farhold.planning.transfer.linear import LinearTransfer
from farhold.watch import SILENT, Watch

__all__ = ["Candidates", "Pairing", "Places", "pair"]


@dataclass(frozen=True, slots=True, eq=False)
class Candidates:
    """The n nodes to be paired.

    Attributes
    ----------
    name, class_name : (n,) str
    state : (n, 6) at departure, rotating axes [m], [m/s]
    excess_beta, mass_kg, isp_s : (n,)
    """

    name: NDArray[np.str_]
    class_name: NDArray[np.str_]
    state: NDArray[np.float64]
    excess_beta: NDArray[np.float64]
    mass_kg: NDArray[np.float64]
    isp_s: NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Places:
    """The m slots to be filled.

    Attributes
    ----------
    name, class_name : (m,) str
    state : (m, 6) at arrival, rotating axes [m], [m/s]
    priority : (m,) 1 is filled first, NaN where none was given
    pinned : (m,) index of the node that must take the slot, -1 for none
    held_by : (m,) index of the node that sits in the slot already, -1 for none: it may stay at no cost
    spare : (m,) bool, slots for nodes that are left over
    """

    name: NDArray[np.str_]
    class_name: NDArray[np.str_]
    state: NDArray[np.float64]
    priority: NDArray[np.float64]
    pinned: NDArray[np.int64]
    held_by: NDArray[np.int64]
    spare: NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class Pairing:
    """Who goes where, and the proof.

    Attributes
    ----------
    slot_of : (n,) index into the places, -1 for a node that keeps the slot it holds
    dv_m_s : (n,) price on the linear map, 0 for nodes that keep their slot
    value, lower_bound : of the objective, in its unit
    prices : (m,) dual prices of the places, 0 where a place took no part
    method : in words
    """

    slot_of: NDArray[np.int64]
    dv_m_s: NDArray[np.float64]
    value: float
    lower_bound: float
    prices: NDArray[np.float64]
    method: str

    @property
    def gap(self) -> float:
        """Value less bound, in the objective's unit."""
        return max(0.0, self.value - self.lower_bound)

    @property
    def gap_relative(self) -> float:
        """Gap over the value; 0 where the value is 0."""
        return self.gap / abs(self.value) if self.value else 0.0


def pair(
    linear: LinearTransfer,
    nodes: Candidates,
    places: Places,
    objective: Objective,
    *,
    formation: str = "targets",
    watch: Watch = SILENT,
) -> Pairing:
    """Pair nodes and places exactly, class by class, on the linear two-impulse price over all pairs.

    Extra nodes go to spare places, else keep the slot they hold; with fewer nodes than places those of the
    lowest priority stay empty. Ties are broken by node then slot order.

    Raises
    ------
    CaseError
        Too few nodes of a class and not every slot has a priority; a class of more than 5,000.
    NoSolutionError
        No pairing exists.
    """
    slot_of = np.full(len(nodes.name), -1, dtype=np.int64)
    dv = np.zeros(len(nodes.name))
    prices = np.zeros(len(places.name))
    certificates: list[Certificate] = []
    classes = list(dict.fromkeys(places.class_name.tolist()))
    _refuse_large(nodes, places, classes)
    watch.stage("pairing nodes and slots", len(classes))
    for name in classes:
        rows = np.flatnonzero(nodes.class_name == name)
        columns = np.flatnonzero(places.class_name == name)
        columns = _wanted(rows, columns, places, name, formation)
        certificate, chosen, price = _pair_class(linear, nodes, places, rows, columns, objective)
        certificates.append(certificate)
        prices[columns] = certificate.column_price[: columns.size]
        taken = chosen < columns.size
        slot_of[rows[taken]] = columns[chosen[taken]]
        dv[rows[taken]] = price[np.flatnonzero(taken), chosen[taken]]
        watch.advance()
    placed = np.flatnonzero(slot_of >= 0)
    slot_of[placed[places.held_by[slot_of[placed]] == placed]] = -1
    combine = max if objective.worst else sum
    value = float(combine([c.value for c in certificates])) if certificates else 0.0
    bound = float(combine([c.bound for c in certificates])) if certificates else 0.0
    method = "bottleneck matching, then dense assignment" if objective.worst else "dense assignment"
    return Pairing(slot_of, dv, value, bound, prices, f"{method} with dual prices")


def _refuse_large(nodes: Candidates, places: Places, classes: list[str]) -> None:
    """Refuse classes beyond the dense solver."""
    faults = []
    for name in classes:
        n, m = int((nodes.class_name == name).sum()), int((places.class_name == name).sum())
        if max(n, m) > MOST:
            faults.append(
                Fault(
                    f"class {name}",
                    f"{n} nodes and {m} slots are to be paired",
                    f"up to {MOST} of one class in this version",
                    "split the class, or price a part of it",
                )
            )
    if faults:
        raise CaseError(faults)


def _wanted(
    rows: NDArray[np.int64], columns: NDArray[np.int64], places: Places, name: str, formation: str
) -> NDArray[np.int64]:
    """Return the places that take part: all, or with too few nodes those of highest priority."""
    main = columns[~places.spare[columns]]
    missing = main.size - rows.size
    if missing <= 0:
        return columns
    priority = places.priority[main]
    if np.isnan(priority).any():
        raise CaseError(
            Fault(
                f"formation {formation}",
                f"{main.size} slots for class {name} but {rows.size} nodes to fill them",
                "as many nodes as slots, or a priority on every slot of the class",
                f"drop {missing} slots, or give each slot a priority (1 is filled first)",
            )
        )
    cut = np.sort(priority)[rows.size - 1] if rows.size else -np.inf
    return main[priority <= cut]


def _pair_class(
    linear: LinearTransfer,
    nodes: Candidates,
    places: Places,
    rows: NDArray[np.int64],
    columns: NDArray[np.int64],
    objective: Objective,
) -> tuple[Certificate, NDArray[np.int64], NDArray[np.float64]]:
    """Pair one class; returns the certificate, each row's column (beyond the last: keeps its slot), dv."""
    dv = _prices(linear, nodes.state[rows], nodes.excess_beta[rows], places.state[columns])
    holder = places.held_by[columns]
    for k in np.flatnonzero(np.isin(holder, rows)):
        dv[np.searchsorted(rows, holder[k]), k] = 0.0
    cost = objective.weigh(dv, nodes.mass_kg[rows, None], nodes.isp_s[rows, None])
    square = unlimited = _padded(cost, places, rows, columns)
    try:
        if objective.worst and square.size:
            square = np.where(unlimited <= bottleneck(unlimited), unlimited, np.inf)
        chosen = least_sum(square)
    except ValueError:
        raise NoSolutionError(
            Fault(
                f"class {nodes.class_name[rows[0]]}",
                "no pairing respects all pinned nodes",
                hint="look at the `node` column of the slots file",
            )
        ) from None
    certificate = certify_sum(square, chosen)
    if objective.worst:
        certificate = certify_worst(unlimited, chosen, certificate)
    return certificate, chosen[: rows.size], dv


def _prices(
    linear: LinearTransfer,
    states: NDArray[np.float64],
    excess_beta: NDArray[np.float64],
    targets: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Two-impulse prices (n, m) of all pairs on the linear map [m/s]."""
    if not len(states) or not len(targets):
        return np.zeros((len(states), len(targets)))
    u, w = linear.nodes(states, excess_beta)
    a, b = linear.slots(targets)
    price: NDArray[np.float64] = cdist(u, a) + cdist(w, b)
    return price


def _padded(
    cost: NDArray[np.float64], places: Places, rows: NDArray[np.int64], columns: NDArray[np.int64]
) -> NDArray[np.float64]:
    """Make `cost` square: idle rows leave optional places empty, idle columns let extra nodes stay."""
    n, m = cost.shape
    size = max(n, m)
    square = np.zeros((size, size))
    square[:n, :m] = cost
    if m > n:
        priority = places.priority[columns]
        main = ~places.spare[columns]
        optional = places.spare[columns] | (priority == np.max(priority, where=main, initial=-np.inf))
        if main.sum() <= n:
            optional = places.spare[columns]
        square[n:, ~optional] = np.inf
    held = np.searchsorted(rows, places.held_by[columns])
    for k in np.flatnonzero(np.isin(places.held_by[columns], rows)):
        # whoever sits in one of the places cannot keep it by standing aside: somebody else may take it
        square[held[k], m:] = np.inf
    pinned = places.pinned[columns]
    for k in np.flatnonzero(pinned >= 0):
        at = np.searchsorted(rows, pinned[k])
        if at < rows.size and rows[at] == pinned[k]:
            keep = square[at, k]
            square[at, :] = np.inf
            square[:, k] = np.inf
            square[at, k] = keep
    return square
