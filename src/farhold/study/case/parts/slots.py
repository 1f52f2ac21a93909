"""Formations of a case: slots from shapes and files, pins, least distances."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from farhold.domain.formation import Formation, SlotTable
from farhold.domain.node_class import NodeClass
from farhold.errors import CaseError, DomainError, Fault
from farhold.planning.shapes import positions
from farhold.study.case.faults import FaultList, did_you_mean, unknown_fault
from farhold.study.case.lines import KeyPath
from farhold.study.case.record import NodeTable
from farhold.study.case.schema.case_file import CaseFile, FormationTable
from farhold.study.case.schema.slots_block import ListedSlots, ShapedSlots
from farhold.study.case.sources import Sources
from farhold.study.case.tables import MOST_FAULTS, Columns, Table
from farhold.units import say_length

__all__ = ["COLUMNS", "resolve_formations"]

COLUMNS = Columns(
    names=("slot", "class"),
    numbers=("x_km", "y_km", "z_km"),
    optional_names=("node",),
    optional_numbers=("priority", "vn_m_s"),
)
_NAME_LENGTH = 32


@dataclass(slots=True)
class _Gathered:
    """Columns of the slots of one formation so far, and the place of each slot that a file gave."""

    slot: list[str] = field(default_factory=list)
    class_name: list[str] = field(default_factory=list)
    position_m: list[NDArray[np.float64]] = field(default_factory=list)
    priority: list[float] = field(default_factory=list)
    node: list[str] = field(default_factory=list)
    vn_m_s: list[float] = field(default_factory=list)
    place: list[str] = field(default_factory=list)
    numbered: Counter[str] = field(default_factory=Counter)


def resolve_formations(
    schema: CaseFile,
    classes: tuple[NodeClass, ...],
    nodes: NodeTable | None,
    sources: Sources,
    faults: FaultList,
) -> dict[str, Formation]:
    """Make the formations that could be read, in the order of the file; add what is wrong to `faults`."""
    made: dict[str, Formation] = {}
    class_of = {}
    if nodes is not None:
        names = [classes[k].name for k in nodes.class_index.tolist()]
        class_of = dict(zip(nodes.node.tolist(), names, strict=True))
    for name, table in schema.formation.items():
        path: KeyPath = ("formation", name)
        found = _gather(table, path, {one.name for one in classes}, sources, faults)
        if found is None:
            continue
        _check_twice(found, path, faults)
        if nodes is not None:
            _check_pins(found, class_of, path, faults)
        slots = SlotTable(
            slot=np.array(found.slot, dtype=np.str_),
            class_name=np.array(found.class_name, dtype=np.str_),
            position_m=np.concatenate(found.position_m),
            priority=np.array(found.priority, dtype=float),
            node=np.array(found.node, dtype=np.str_),
            vn_m_s=np.array(found.vn_m_s, dtype=float),
        )
        _check_separation(slots, schema.safety.separation, path, faults)
        start_s = 0.0 if table.start is None else table.start.seconds_since(schema.epoch)
        made[name] = Formation(name, table.rule, slots, start_s, table.axes, table.spares)
    return made


def _gather(
    table: FormationTable, path: KeyPath, classes: set[str], sources: Sources, faults: FaultList
) -> _Gathered | None:
    found = _Gathered()
    complete = True
    for position, block in enumerate(table.slots):
        here: KeyPath = (*path, "slots", position)
        if isinstance(block, ListedSlots):
            complete &= _add_listed(block, here, table.rule, classes, sources, found, faults)
        elif isinstance(block, ShapedSlots):
            complete &= _add_shaped(block, here, found, faults)
    return found if complete else None


def _add_shaped(block: ShapedSlots, path: KeyPath, found: _Gathered, faults: FaultList) -> bool:
    try:
        made = positions(
            block.shape,
            block.count,
            spacing_m=block.spacing,
            seed=block.seed,
            axis=block.axis,
            centre_m=block.centre,
            **block.own(),
        )
    except DomainError as error:
        for fault in error.faults:
            faults.add_fault((*path, fault.where), fault)
        return False
    first = found.numbered[block.class_] + 1
    last = first + block.count - 1
    found.numbered[block.class_] = last
    width = max(4, len(str(last)))
    stem = block.class_[: _NAME_LENGTH - width - 1]
    found.slot += [f"{stem}-{k:0{width}d}" for k in range(first, last + 1)]
    found.class_name += [block.class_] * block.count
    found.position_m.append(made)
    found.priority += [float("nan")] * block.count
    found.node += [""] * block.count
    found.vn_m_s += [0.0] * block.count
    found.place += [""] * block.count
    return True


def _add_listed(
    block: ListedSlots,
    path: KeyPath,
    rule: str,
    classes: set[str],
    sources: Sources,
    found: _Gathered,
    faults: FaultList,
) -> bool:
    try:
        table = sources.table(block.file, COLUMNS)
    except CaseError as error:
        for fault in error.faults:
            if fault.where:
                faults.add_plain((*path, "file"), [fault])
            else:
                faults.add_fault((*path, "file"), fault)
        return False
    wrong = _row_faults(table, rule, classes)
    faults.add_plain((*path, "file"), wrong[:MOST_FAULTS])
    if len(wrong) > MOST_FAULTS:
        faults.add_plain((*path, "file"), [Fault(table.file, f"{len(wrong) - MOST_FAULTS} more rows are wrong")])
    n = len(table)
    found.slot += table.text["slot"].tolist()
    found.class_name += table.text["class"].tolist()
    found.position_m.append(1e3 * np.column_stack([table.number[key] for key in COLUMNS.numbers]))
    found.priority += table.number["priority"].tolist() if "priority" in table.number else [float("nan")] * n
    found.node += table.text["node"].tolist() if "node" in table.text else [""] * n
    found.vn_m_s += np.nan_to_num(table.number["vn_m_s"]).tolist() if "vn_m_s" in table.number else [0.0] * n
    found.place += [f"{table.file}:{row}" for row in table.row]
    return True


def _row_faults(table: Table, rule: str, classes: set[str]) -> list[Fault]:
    wrong = [
        unknown_fault(table.where(k, "class"), name, "class", sorted(classes))
        for k, name in enumerate(table.text["class"].tolist())
        if name not in classes
    ]
    if rule != "natural" and "vn_m_s" in table.number:
        moving = np.flatnonzero(np.nan_to_num(table.number["vn_m_s"]))
        wrong += [
            Fault(table.where(k, "vn_m_s"), f"a velocity does not go with rule {rule!r}", "empty or 0")
            for k in moving[:1].tolist()
        ]
    return wrong


def _check_twice(found: _Gathered, path: KeyPath, faults: FaultList) -> None:
    for name, times in Counter(found.slot).items():
        if times > 1:
            places = [
                place or "a shape" for slot, place in zip(found.slot, found.place, strict=True) if slot == name
            ]
            faults.add(
                path, f"slot {name!r} is named {times} times (at {', '.join(places[:3])})", "each name once"
            )
            return


def _check_pins(found: _Gathered, class_of: dict[str, str], path: KeyPath, faults: FaultList) -> None:
    first: dict[str, str] = {}
    wrong: list[Fault] = []
    for slot, class_name, node, place in zip(found.slot, found.class_name, found.node, found.place, strict=True):
        where = f"{place}: node"
        if not node:
            continue
        if node not in class_of:
            wrong.append(
                Fault(where, f"there is no node {node!r}", "a node of the swarm", did_you_mean(node, class_of))
            )
        elif class_of[node] != class_name:
            what = f"node {node!r} is of class {class_of[node]!r}, slot {slot!r} is for {class_name!r}"
            wrong.append(Fault(where, what, "a node of the slot's class"))
        elif node in first:
            wrong.append(Fault(where, f"node {node!r} is pinned twice, also to {first[node]!r}", "one slot"))
        first.setdefault(node, slot)
    faults.add_plain(path, wrong[:MOST_FAULTS])


def _check_separation(slots: SlotTable, separation_m: float, path: KeyPath, faults: FaultList) -> None:
    if len(slots) < 2:
        return
    tree = cKDTree(slots.position_m)
    nearest_m = np.asarray(tree.query(slots.position_m, k=2)[0])[:, 1]
    least_m = float(nearest_m.min())
    if least_m >= separation_m * (1 - 1e-9):
        return
    # of pairs that are equally near but for roundoff, the first in the order of the slots
    k = int(np.flatnonzero(nearest_m <= least_m * (1 + 1e-9))[0])
    twin = min(i for i in tree.query_ball_point(slots.position_m[k], least_m * (1 + 1e-9)) if i != k)
    below = int(np.count_nonzero(nearest_m < separation_m * (1 - 1e-9)))
    what = (
        f"slots {slots.slot[k]!s} and {slots.slot[twin]!s} are {say_length(least_m)} apart"
        f" ({below} slots are too near to another)"
    )
    faults.add(path, what, f"{say_length(separation_m)} or more, the [safety] separation")
