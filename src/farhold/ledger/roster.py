"""The roster: who is alive, and who sits in which slot since when."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import Epoch
from farhold.domain.state import SwarmState
from farhold.errors import DomainError, Fault, LedgerError
from farhold.ledger import schema
from farhold.ledger.entries import broadcast_text, epochs_ns
from farhold.ledger.terms import Terms

__all__ = [
    "RosterChange",
    "applied",
    "changed_nodes",
    "first_fault",
    "opening_roster",
    "refuse_the_dead",
    "swarm_state",
]

_COLUMNS = ("status", "formation", "slot")


@dataclass(frozen=True, slots=True, eq=False)
class RosterChange:
    """New places or statuses of k nodes, each named once; a None column leaves what is there.

    `status`, `formation`, `slot` : (k,) str or None; `since_ns` : (k,) int, TDB.
    """

    node: NDArray[np.object_]
    since_ns: NDArray[np.int64]
    status: NDArray[np.object_] | None = None
    formation: NDArray[np.object_] | None = None
    slot: NDArray[np.object_] | None = None

    @classmethod
    def of(
        cls,
        node: Any,
        since: Epoch | ArrayLike,
        *,
        status: Any = None,
        formation: Any = None,
        slot: Any = None,
    ) -> RosterChange:
        """Make a change of k nodes; every other value is one for all or one each."""
        nodes = np.atleast_1d(np.asarray(node)).astype(object)
        k = nodes.size
        spread = {
            name: None if value is None else broadcast_text(value, k)
            for name, value in (("status", status), ("formation", formation), ("slot", slot))
        }
        return cls(node=nodes, since_ns=epochs_ns(since, k), **spread)


def opening_roster(terms: Terms, state: SwarmState, epoch: Epoch, status: Any = None) -> Any:
    """Make the roster of a fresh book.

    Parameters
    ----------
    terms, state : the same n nodes in the same order
    epoch : the opening; `since` counts from the state's own `since_s` after the case's epoch
    status : (n,) str or one for all; None: active, lost where the state says not alive

    Returns
    -------
    pyarrow.Table of :data:`farhold.ledger.schema.ROSTER`, n rows

    Raises
    ------
    DomainError
        The nodes differ, a status is unknown, or a slot is taken twice.
    """
    if not np.array_equal(terms.node, state.node):
        raise DomainError(
            Fault("ledger opening", "the state's nodes are not those of the terms", "the same order")
        )
    if status is None:
        status = np.where(state.alive, "active", "lost")
    since_ns = terms.epoch.ns + np.rint(state.since_s * 1e9).astype(np.int64)
    roster = schema.table_of(
        schema.ROSTER,
        {
            "node": terms.node,
            "status": broadcast_text(status, len(terms)),
            "formation": state.formation,
            "slot": state.slot,
            "since": np.minimum(since_ns, epoch.ns),
        },
    )
    fault = first_fault(roster)
    if fault:
        raise DomainError(Fault("ledger opening", fault))
    return roster


def first_fault(roster: Any) -> str:
    """Say what is wrong with a roster in a phrase; "" when all is well."""
    frame = roster.to_pandas()
    unknown = ~frame["status"].isin(schema.STATUSES)
    if unknown.any():
        row = frame[unknown].iloc[0]
        return f"node {row['node']} has the status {row['status']!r}, allowed: {' '.join(schema.STATUSES)}"
    seated = frame[frame["status"].isin(schema.ALIVE) & (frame["slot"] != "")]
    twice = seated.duplicated(["formation", "slot"])
    if twice.any():
        later = seated[twice].iloc[0]
        same = (seated["formation"] == later["formation"]) & (seated["slot"] == later["slot"])
        first = seated[same].iloc[0]
        place = f"slot {later['slot']} of {later['formation']}"
        return f"{place} would hold both {first['node']} and {later['node']}"
    return ""


def applied(terms: Terms, roster: Any, change: RosterChange | None) -> Any:
    """Apply a change to a roster.

    Returns
    -------
    pyarrow.Table of :data:`farhold.ledger.schema.ROSTER`, n rows

    Raises
    ------
    DomainError
        A node is unknown or named twice, or a status is unknown.
    LedgerError
        A slot would be taken twice.
    """
    if change is None or change.node.size == 0:
        return roster
    index = terms.index_of(change.node, "roster")
    if np.unique(index).size != index.size:
        names, counts = np.unique(change.node.astype(np.str_), return_counts=True)
        raise DomainError(Fault("roster", f"node {str(names[counts > 1][0])!r} is named twice", "once per commit"))
    columns: dict[str, Any] = {name: schema.column(roster, name).copy() for name in (*_COLUMNS, "since")}
    for name in _COLUMNS:
        values = getattr(change, name)
        if values is not None:
            columns[name][index] = values
    columns["since"][index] = change.since_ns
    result = schema.table_of(schema.ROSTER, {"node": terms.node, **columns})
    fault = first_fault(result)
    if fault:
        kind = DomainError if "has the status" in fault else LedgerError
        raise kind(Fault("roster", fault))
    return result


def refuse_the_dead(terms: Terms, before: Any, after: Any, nodes: Any) -> None:
    """Refuse entries of nodes that are lost or retired both before and after the commit.

    Raises
    ------
    LedgerError
        Naming the first such node.
    """
    if len(nodes) == 0:
        return
    index = terms.index_of(nodes, "entries")
    statuses = [schema.column(one, "status").astype(np.str_)[index] for one in (before, after)]
    dead = ~np.isin(statuses[0], schema.ALIVE) & ~np.isin(statuses[1], schema.ALIVE)
    if dead.any():
        k = int(np.argmax(dead))
        raise LedgerError(
            Fault(f"node {nodes[k]}", f"is {statuses[0][k]} and takes no entries", hint="nothing was entered")
        )


def changed_nodes(before: Any, after: Any) -> NDArray[np.bool_]:
    """Which of the n nodes differ between two rosters in any column, (n,)."""
    differs = np.zeros(before.num_rows, dtype=np.bool_)
    for name in (*_COLUMNS, "since"):
        differs |= schema.column(before, name) != schema.column(after, name)
    return differs


def swarm_state(terms: Terms, roster: Any, mass_kg: NDArray[np.float64]) -> SwarmState:
    """Rebuild the swarm at its present masses from terms and roster; epochs as seconds from the case's."""
    status = schema.column(roster, "status").astype(np.str_)
    return SwarmState(
        classes=terms.classes,
        node=terms.node,
        class_index=terms.class_index,
        mass_kg=mass_kg,
        dry_mass_kg=terms.dry_mass_kg,
        loaded_kg=terms.loaded_kg,
        solar_area_m2=terms.solar_area_m2,
        alive=np.isin(status, schema.ALIVE),
        formation=schema.column(roster, "formation").astype(np.str_),
        slot=schema.column(roster, "slot").astype(np.str_),
        since_s=(schema.column(roster, "since") - terms.epoch.ns) * 1e-9,
    )
