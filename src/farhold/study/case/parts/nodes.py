"""Nodes of a case: counted with a prefix, or listed in a file."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from farhold.domain.node_class import NodeClass
from farhold.errors import CaseError, Fault
from farhold.study.case.faults import FaultList, unknown_fault
from farhold.study.case.lines import KeyPath
from farhold.study.case.record import NodeTable
from farhold.study.case.schema.case_file import CaseFile, CountedNodes
from farhold.study.case.schema.fields import NAME_FORM, NAME_RULE
from farhold.study.case.sources import Sources
from farhold.study.case.tables import MOST_FAULTS, Columns, Table

__all__ = ["COLUMNS", "counted_names", "resolve_nodes"]

COLUMNS = Columns(
    names=("node", "class"),
    numbers=(),
    optional_numbers=("propellant_kg", "solar_area_m2", "mass_kg"),
)


@dataclass(slots=True)
class _Gathered:
    """Columns of the nodes so far."""

    node: list[str] = field(default_factory=list)
    class_index: list[int] = field(default_factory=list)
    dry_mass_kg: list[float] = field(default_factory=list)
    loaded_kg: list[float] = field(default_factory=list)
    solar_area_m2: list[float] = field(default_factory=list)
    first: dict[str, str] = field(default_factory=dict)


def counted_names(prefix: str, count: int) -> list[str]:
    """Name `count` nodes ``prefix`` and number, of 2, 4 or 6 digits: H01 to H16, P0001 to P0960."""
    digits = len(str(count))
    width = digits + digits % 2
    return [f"{prefix}{k:0{width}d}" for k in range(1, count + 1)]


def resolve_nodes(
    schema: CaseFile, classes: tuple[NodeClass, ...], sources: Sources, faults: FaultList
) -> NodeTable | None:
    """Make the table of nodes; None where a file could not be read. What is wrong is added to `faults`."""
    found = _Gathered()
    complete = True
    for position, block in enumerate(schema.swarm):
        path: KeyPath = ("swarm", position)
        if isinstance(block, CountedNodes):
            _add_counted(block, path, classes, found, faults)
            continue
        try:
            table = sources.table(block.file, COLUMNS)
        except CaseError as error:
            complete = False
            _take(error, (*path, "file"), faults)
            continue
        _add_listed(table, (*path, "file"), classes, found, faults)
    if not complete:
        return None
    dry = np.array(found.dry_mass_kg, dtype=float)
    loaded = np.array(found.loaded_kg, dtype=float)
    return NodeTable(
        node=np.array(found.node, dtype=np.str_),
        class_index=np.array(found.class_index, dtype=np.int64),
        mass_kg=dry + loaded,
        dry_mass_kg=dry,
        loaded_kg=loaded,
        solar_area_m2=np.array(found.solar_area_m2, dtype=float),
    )


def _take(error: CaseError, path: KeyPath, faults: FaultList) -> None:
    """Add the faults of a file: without a place to the key that names it, with a place as they are."""
    for fault in error.faults:
        if fault.where:
            faults.add_plain(path, [fault])
        else:
            faults.add_fault(path, fault)


def _add_counted(
    block: CountedNodes, path: KeyPath, classes: tuple[NodeClass, ...], found: _Gathered, faults: FaultList
) -> None:
    names = counted_names(block.prefix, block.count)
    if NAME_FORM.fullmatch(names[-1]) is None:
        faults.add((*path, "prefix"), f"makes the name {names[-1]!r}, which is not lawful", NAME_RULE)
        return
    twice = [name for name in names if name in found.first]
    if twice:
        what = f"makes the node name {twice[0]!r} a second time ({len(twice)} in all)"
        faults.add((*path, "prefix"), what, "names that no other block makes")
    index = next(k for k, one in enumerate(classes) if one.name == block.class_)
    chosen = classes[index]
    found.first.update(dict.fromkeys(names, ""))
    found.node += names
    found.class_index += [index] * block.count
    found.dry_mass_kg += [chosen.dry_mass_kg] * block.count
    found.loaded_kg += [chosen.propellant_kg] * block.count
    found.solar_area_m2 += [chosen.solar_area_m2] * block.count


def _add_listed(
    table: Table, path: KeyPath, classes: tuple[NodeClass, ...], found: _Gathered, faults: FaultList
) -> None:
    known = {one.name: k for k, one in enumerate(classes)}
    wrong: list[Fault] = []
    given = {
        name: table.number[name].tolist() if name in table.number else [float("nan")] * len(table)
        for name in COLUMNS.optional_numbers
    }
    for k, (name, class_name) in enumerate(
        zip(table.text["node"].tolist(), table.text["class"].tolist(), strict=True)
    ):
        if name in found.first:
            also = f", also at {found.first[name]}" if found.first[name] else ""
            wrong.append(Fault(table.where(k, "node"), f"node {name!r} is named twice{also}", "each name once"))
        if class_name not in known:
            wrong.append(unknown_fault(table.where(k, "class"), class_name, "class", known))
            continue
        chosen = classes[known[class_name]]
        propellant = _or(given["propellant_kg"][k], chosen.propellant_kg)
        area = _or(given["solar_area_m2"][k], chosen.solar_area_m2)
        dry = _or(given["mass_kg"][k], chosen.dry_mass_kg + propellant) - propellant
        wrong += _range_faults(table, k, propellant, area, dry)
        found.first[name] = f"{table.file}:{table.row[k]}"
        found.node.append(name)
        found.class_index.append(known[class_name])
        found.dry_mass_kg.append(dry)
        found.loaded_kg.append(propellant)
        found.solar_area_m2.append(area)
    faults.add_plain(path, wrong[:MOST_FAULTS])
    if len(wrong) > MOST_FAULTS:
        faults.add_plain(path, [Fault(table.file, f"{len(wrong) - MOST_FAULTS} more rows are wrong")])


def _or(value: float, default: float) -> float:
    return default if value != value else value


def _range_faults(table: Table, k: int, propellant: float, area: float, dry: float) -> list[Fault]:
    wrong = []
    if propellant < 0:
        wrong.append(Fault(table.where(k, "propellant_kg"), f"got {propellant:g}", "0 or more"))
    if area < 0:
        wrong.append(Fault(table.where(k, "solar_area_m2"), f"got {area:g}", "0 or more"))
    if not dry > 0:
        what = f"got {dry + propellant:g}, which leaves {dry:g} kg without the propellant of {propellant:g} kg"
        wrong.append(Fault(table.where(k, "mass_kg"), what, "the mass at load, more than the propellant"))
    return wrong
