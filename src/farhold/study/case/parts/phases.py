"""Timeline and measurement gaps of a case, in seconds from its epoch."""

from __future__ import annotations

from farhold.domain.epoch import Epoch
from farhold.study.case.faults import FaultList, unknown_fault
from farhold.study.case.lines import KeyPath
from farhold.study.case.record import (
    Deploy,
    Hold,
    Lose,
    Miss,
    NodeTable,
    Phase,
    Regroup,
    Reshape,
    Retire,
)
from farhold.study.case.schema.case_file import (
    CaseFile,
    DeployPhase,
    HoldPhase,
    LosePhase,
    MissPhase,
    RegroupPhase,
    ReshapePhase,
)

__all__ = ["resolve_gaps", "resolve_timeline"]


def resolve_gaps(schema: CaseFile, faults: FaultList) -> tuple[tuple[float, float], ...]:
    """Return (start, end) of the gaps of measurement [s from the epoch], sorted."""
    gaps = []
    for position, (start, end) in enumerate(schema.errors.gaps):
        if not end > start:
            what = f"ends at {end.iso()}, not after its start {start.iso()}"
            faults.add(("errors", "gaps", position), what, "a start, then an end after it")
        gaps.append((start.seconds_since(schema.epoch), end.seconds_since(schema.epoch)))
    return tuple(sorted(gaps))


def resolve_timeline(schema: CaseFile, nodes: NodeTable | None, faults: FaultList) -> tuple[Phase, ...]:
    """Return the phases in order; deploy may only come first, and nodes named must exist."""
    names = None if nodes is None else frozenset(nodes.node.tolist())
    phases: list[Phase] = []
    for position, block in enumerate(schema.timeline):
        path: KeyPath = ("timeline", position)
        if isinstance(block, DeployPhase):
            if position > 0:
                faults.add((*path, "phase"), "deploy stands after another phase", "deploy first, and once")
            phases.append(Deploy(block.to, block.over, block.release_speed, block.interval))
        elif isinstance(block, HoldPhase):
            phases.append(Hold(block.for_))
        elif isinstance(block, ReshapePhase):
            phases.append(Reshape(block.to, block.over))
        elif isinstance(block, RegroupPhase):
            phases.append(Regroup(block.over))
        elif isinstance(block, LosePhase | MissPhase):
            _check_nodes(block.nodes, names, path, faults)
            at_s = _at(block.at, schema.epoch, path, faults)
            lost = tuple(block.nodes)
            phases.append(Lose(lost, at_s) if isinstance(block, LosePhase) else Miss(lost, block.share, at_s))
        else:
            phases.append(Retire(block.dv))
    return tuple(phases)


def _check_nodes(given: list[str], known: frozenset[str] | None, path: KeyPath, faults: FaultList) -> None:
    for position, name in enumerate(given):
        place: KeyPath = (*path, "nodes", position)
        if known is not None and name not in known:
            faults.add_fault(place, unknown_fault("", name, "node", sorted(known)))
        if name in given[:position]:
            faults.add(place, f"node {name!r} is named twice", "each node once")


def _at(at: Epoch | None, epoch: Epoch, path: KeyPath, faults: FaultList) -> float | None:
    if at is None:
        return None
    if at < epoch:
        faults.add((*path, "at"), f"got {at.iso()}, before the case's epoch {epoch.iso()}", "the epoch or later")
    return at.seconds_since(epoch)
