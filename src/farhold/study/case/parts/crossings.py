"""What one part of a case says of another: names referred to, keys that go together.

These checks read the document as written, so that they are said together with the faults of the schema; what
is of a wrong kind is passed over here, for the schema says it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from farhold.study.case.faults import FaultList, unknown_fault
from farhold.study.case.lines import KeyPath

__all__ = ["check_crossings"]

_COLLINEAR = ("L1", "L2", "L3")
_TRIANGULAR = ("L4", "L5")
_KIND_KEYS: dict[str, tuple[tuple[str, ...], tuple[str, ...], tuple[str, ...]]] = {
    # kind: keys that are due, keys that may be given, points that have it
    "equilibrium": ((), (), _COLLINEAR + _TRIANGULAR),
    "halo": (("family",), ("az", "period", "phase"), ("L1", "L2")),
    "lyapunov": (("ay",), ("phase",), _COLLINEAR),
    "lissajous": (("ay", "az", "span"), ("phase",), _COLLINEAR),
    "short-period": (("amplitude",), ("phase",), _TRIANGULAR),
    "long-period": (("amplitude",), ("phase",), _TRIANGULAR),
    "librating": (("span",), (), _TRIANGULAR),
}
_FLOWN = tuple(kind for kind in _KIND_KEYS if kind != "librating")
_EVERY_KIND = ("point", "kind", "model", "pressure_area")
_OPTIONS = ("family", "az", "ay", "period", "amplitude", "phase", "span")


def check_crossings(document: Mapping[str, Any], faults: FaultList) -> None:
    """Add what is wrong between the parts of `document` to `faults`."""
    classes = _names(document, "class")
    formations = _names(document, "formation")
    _check_reference(document, faults)
    _check_hubs(document, faults)
    for path, block in _blocks(document.get("swarm"), ("swarm",)):
        _check_name(block, path, "class", "class", classes, faults)
    for path, block in _tables(document, "formation"):
        _check_formation(document, path, block, classes, formations, faults)
    for path, block in _blocks(document.get("timeline"), ("timeline",)):
        _check_name(block, path, "to", "formation", formations, faults)


def _check_reference(document: Mapping[str, Any], faults: FaultList) -> None:
    table = document.get("reference")
    if not isinstance(table, dict):
        return
    kind = table.get("kind", "equilibrium")
    if not isinstance(kind, str) or kind not in _KIND_KEYS:
        return
    due, free, points = _KIND_KEYS[kind]
    model = table.get("model", "circular")
    path: KeyPath = ("reference",)
    before = len(faults.faults)
    if table.get("point") in _COLLINEAR + _TRIANGULAR and table["point"] not in points:
        faults.add((*path, "kind"), f"got {kind!r} at {table['point']}", f"{kind} at {' '.join(points)}")
    for key in due:
        if key not in table:
            faults.add((*path, key), "is missing", f"a reference of kind {kind!r} needs {' '.join(due)}")
    if kind == "halo" and ("az" in table) == ("period" in table):
        faults.add(path, "a halo is sized by one of az and period", "az or period, one of them")
    for key in table:
        if key in _OPTIONS and key not in due + free:
            allowed = " ".join(_EVERY_KIND + due + free)
            faults.add((*path, key), f"key {key!r} does not go with kind {kind!r}", allowed)
    if len(faults.faults) > before:
        return
    if kind not in _FLOWN:
        what = f"kind {kind!r} is not available in this version"
        faults.add((*path, "kind"), what, " ".join(_FLOWN))
    if model == "ephemeris":
        what = "model 'ephemeris' is not available in this version"
        faults.add((*path, "model"), what, 'model = "circular"')


def _check_hubs(document: Mapping[str, Any], faults: FaultList) -> None:
    for path, table in _tables(document, "class"):
        if ("capacity" in table) != ("link_range" in table):
            here, other = ("capacity", "link_range") if "capacity" in table else ("link_range", "capacity")
            faults.add((*path, here), f"{here} is given without {other}", "both for a hub, or neither")


def _check_formation(
    document: Mapping[str, Any],
    path: KeyPath,
    table: Mapping[str, Any],
    classes: list[str],
    formations: list[str],
    faults: FaultList,
) -> None:
    for inner, block in _blocks(table.get("slots"), (*path, "slots")):
        _check_name(block, inner, "class", "class", classes, faults)
        if "file" in block and "shape" in block:
            faults.add((*inner, "shape"), "a slots block has both a file and a shape", "one of them")
    _check_name(table, path, "spares", "formation", formations, faults)
    if table.get("spares") == path[-1]:
        others = " ".join(name for name in formations if name != path[-1])
        faults.add((*path, "spares"), f"formation {path[-1]!r} names itself", others)
    reference = document.get("reference")
    point = reference.get("point") if isinstance(reference, dict) else None
    if table.get("rule") == "natural" and point in ("L1", "L2"):
        what = f"rule 'natural' at {point} is not available in this version"
        faults.add((*path, "rule"), what, "rotating or inertial; natural at L3 L4 L5")
    elif table.get("rule") == "natural" and isinstance(reference, dict):
        kind = reference.get("kind", "equilibrium")
        if kind in _FLOWN and kind != "equilibrium":
            what = f"rule 'natural' about a reference of kind {kind!r} is not available in this version"
            faults.add((*path, "rule"), what, "rotating or inertial; natural about an equilibrium")
    if table.get("axes") == "icrf" and table.get("rule") in ("rotating", "natural"):
        what = f"axes 'icrf' do not go with rule {table['rule']!r}"
        faults.add((*path, "axes"), what, 'rule = "inertial", or no axes')


def _check_name(
    block: Mapping[str, Any], path: KeyPath, key: str, noun: str, known: list[str], faults: FaultList
) -> None:
    name = block.get(key)
    if isinstance(name, str) and known and name not in known:
        faults.add_fault((*path, key), unknown_fault("", name, noun, known))


def _names(document: Mapping[str, Any], key: str) -> list[str]:
    table = document.get(key)
    return [str(name) for name in table] if isinstance(table, dict) else []


def _tables(document: Mapping[str, Any], key: str) -> Iterator[tuple[KeyPath, Mapping[str, Any]]]:
    table = document.get(key)
    if isinstance(table, dict):
        for name, inner in table.items():
            if isinstance(inner, dict):
                yield (key, name), inner


def _blocks(blocks: object, path: KeyPath) -> Iterator[tuple[KeyPath, Mapping[str, Any]]]:
    if isinstance(blocks, list):
        for position, block in enumerate(blocks):
            if isinstance(block, dict):
                yield (*path, position), block
