"""How far a study is: running, stopped, finished or damaged, and the command that goes on with it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from farhold.errors import CaseError, Fault
from farhold.files import FolderLock, explained
from farhold.study.campaign.chunks import index_of, is_whole
from farhold.study.campaign.folder import CHUNKS, FINISHED, LOCK, STUDY, read_findings, read_plan, resume_line
from farhold.study.campaign.plan import Plan

__all__ = ["status"]


def status(folder: str | Path) -> dict[str, Any]:
    """Look at a study's folder without touching it.

    Returns
    -------
    dict
        The JSON document "status": ``study``, chunks ``done`` of ``total``, ``state`` (running, stopped,
        finished or damaged) and ``resume``, the command that goes on (None when there is nothing to go on
        with). A stopped study's chunks are read and counted only when whole.

    Raises
    ------
    CaseError
        The folder holds no study (exit 2).
    """
    path = Path(folder)
    if not path.is_dir():
        what = "is a file, not the folder of a study" if path.exists() else "does not exist"
        raise CaseError(Fault(str(path), what, "a folder that a study was kept in with -o DIR"))
    if not (path / STUDY).exists():
        raise CaseError(Fault(str(path), "holds no study", "a folder that a study was kept in with -o DIR"))
    running = _is_held(path)
    plan = read_plan(path)
    if plan is None:
        return _document(None, None, None, "damaged", None)
    if running:
        # its newest files may be half a moment old: they are counted, not judged
        return _document(plan, len(_names(path, plan)), plan.chunks, "running", None)
    resume = resume_line(plan.words, folder)
    whole, damaged = _counted(path, plan)
    if (path / FINISHED).exists():
        if read_findings(path, plan) is not None:
            return _document(plan, plan.chunks, plan.chunks, "finished", None)
        damaged = True
    return _document(plan, whole, plan.chunks, "damaged" if damaged else "stopped", resume)


def _document(
    plan: Plan | None, done: int | None, total: int | None, state: str, resume: str | None
) -> dict[str, Any]:
    return {
        "kind": "status",
        "schema": 1,
        "study": None if plan is None else plan.study,
        "done": done,
        "total": total,
        "state": state,
        "resume": resume,
    }


def _names(path: Path, plan: Plan) -> dict[int, list[str]]:
    names: dict[int, list[str]] = {}
    chunks = path / CHUNKS
    with explained(chunks):
        for entry in sorted(chunks.iterdir()) if chunks.is_dir() else ():
            index = index_of(entry.name)
            if index is not None and index < plan.chunks:
                names.setdefault(index, []).append(entry.name)
    return names


def _counted(path: Path, plan: Plan) -> tuple[int, bool]:
    """Count the whole chunks, and tell whether a damaged one is there."""
    done, damaged = 0, False
    for names in _names(path, plan).values():
        whole = [is_whole(name, (path / CHUNKS / name).read_bytes()) for name in names]
        done += any(whole)
        damaged |= not all(whole)
    return done, damaged


def _is_held(path: Path) -> bool:
    """Whether a live process holds the folder, without taking the lock from one that is about to."""
    lock = FolderLock(path, LOCK)
    return lock.is_held()
