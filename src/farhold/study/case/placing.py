"""Where nodes sit before any ledger says so: the k-th node of a class in its k-th slot, pins first."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from farhold.domain.formation import Formation
from farhold.errors import CaseError, Fault
from farhold.study.case.faults import some_names

__all__ = ["place"]


def place(
    node: NDArray[np.str_],
    class_name: NDArray[np.str_],
    formation: Formation,
    formations: Mapping[str, Formation],
    allow_unplaced: bool = False,
) -> tuple[NDArray[np.str_], NDArray[np.str_]]:
    """Place n nodes in `formation`, what is left over in its `spares`.

    Returns
    -------
    formation, slot : (n,) str, "" for a node without a place

    Raises
    ------
    CaseError
        Nodes are without a place and `allow_unplaced` is False.
    """
    where = np.full(node.size, "", dtype="<U32")
    slot = np.full(node.size, "", dtype="<U32")
    spares = [formations[formation.spares]] if formation.spares else []
    for target in (formation, *spares):
        free = where == ""
        index = _slots_of(node, class_name, free, target)
        taken = index >= 0
        where[taken] = target.name
        slot[taken] = target.slots.slot[index[taken]]
    unplaced = node[where == ""]
    if unplaced.size and not allow_unplaced:
        names = some_names(unplaced)
        what = f"{unplaced.size} of {node.size} nodes have no slot of their class: {names}"
        hint = 'add slots, take away nodes, or name a formation for the rest with spares = "..."'
        raise CaseError(Fault(f"formation.{formation.name}", what, "a slot for every node", hint))
    return where, slot


def _slots_of(
    node: NDArray[np.str_], class_name: NDArray[np.str_], free: NDArray[np.bool_], target: Formation
) -> NDArray[np.int64]:
    """Index of the slot of each node in `target`, -1 where it gets none."""
    table = target.slots
    index = np.full(node.size, -1, dtype=np.int64)
    row = {name: k for k, name in enumerate(node.tolist())}
    pinned = np.flatnonzero(table.node != "")
    for k in pinned:
        i = row.get(str(table.node[k]))
        if i is not None and free[i]:
            index[i] = k
    for name in np.unique(class_name):
        nodes = np.flatnonzero((class_name == name) & free & (index < 0))
        slots = np.flatnonzero((table.class_name == name) & (table.node == ""))
        n = min(nodes.size, slots.size)
        index[nodes[:n]] = slots[:n]
    return index
