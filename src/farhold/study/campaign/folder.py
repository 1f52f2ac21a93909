"""The folder of a study: its plan, one file for each finished chunk, its findings, and a lock.

``study.json``, ``chunks/chunk-000123-<digest>.parquet``, ``<table>.parquet``, ``result.json`` and, as the
last, ``finished.json``, which names the others with their digests: only with it is a study finished. All are
written aside, flushed and renamed, so that a kill at any instant loses at most the chunk at hand.
"""

from __future__ import annotations

import contextlib
import io
import json
import shlex
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from typing import Any

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from farhold.errors import CaseError, FarholdError, Fault, LedgerError, OutputExistsError
from farhold.files import ASIDE_SUFFIX, FolderLock, explained, sha256_hex, write_bytes_durably
from farhold.study.campaign.chunks import Chunk, chunk_name, decode, encode, index_of, is_whole, table_bytes
from farhold.study.campaign.declaration import Findings
from farhold.study.campaign.plan import Plan

__all__ = ["StudyFolder", "check_folder", "read_plan", "resume_line"]

STUDY, RESULT, FINISHED, CHUNKS, LOCK = "study.json", "result.json", "finished.json", "chunks", "lock"


def resume_line(words: Sequence[str], folder: str | Path | None) -> str | None:
    """Write the command line that goes on with a study; None where it was not begun by a command."""
    if not words or folder is None:
        return None
    return shlex.join([*words, "-o", str(folder), "--resume"])


def _is_litter(name: str) -> bool:
    return name == LOCK or (name.startswith(".") and name.endswith(ASIDE_SUFFIX))


def _content(path: Path) -> list[str]:
    with explained(path):
        return sorted(entry.name for entry in path.iterdir() if not _is_litter(entry.name))


def check_folder(folder: str | Path, *, resume: bool = False, force: bool = False) -> None:
    """Refuse a folder that a study cannot be written to, before anything is computed.

    Raises
    ------
    OutputExistsError
        It is a file, or not empty and neither `resume` nor `force` is given, or holds what is no study.
    FarholdError
        It cannot be read.
    """
    path = Path(folder)
    if path.is_symlink() and not path.exists():
        raise OutputExistsError(Fault(str(path), "is a link to nothing", hint="choose another name"))
    if not path.exists():
        return
    if not path.is_dir():
        raise OutputExistsError(Fault(str(path), "is a file, not a folder", hint="choose another name"))
    names = _content(path)
    if not names:
        return
    if not (resume or force):
        hint = "--resume goes on with it, --force begins anew, or choose another folder"
        raise OutputExistsError(Fault(str(path), "exists already and is not empty", hint=hint))
    ours = STUDY in names or names == [CHUNKS]
    strangers = [name for name in names if not (ours and _is_ours(name))]
    if strangers and not (resume and ours):
        what = f"holds {strangers[0]!r}, which is no part of a study"
        raise OutputExistsError(Fault(str(path), what, hint="move it away or choose another folder"))


def _is_ours(name: str) -> bool:
    return name in {STUDY, RESULT, FINISHED, CHUNKS} or name.endswith((".parquet", ".png", ".svg"))


def read_plan(path: Path) -> Plan | None:
    """Read ``study.json`` of the folder `path`; None where it is missing or damaged."""
    try:
        return Plan.from_bytes((path / STUDY).read_bytes())
    except OSError:
        return None


class StudyFolder:
    """A study's folder, held by this process; made by :meth:`held`."""

    def __init__(self, path: Path, plan: Plan) -> None:
        self.path = path
        self.plan = plan
        self._names: dict[int, str] = {}

    @classmethod
    @contextlib.contextmanager
    def held(cls, folder: str | Path, plan: Plan, *, resume: bool, force: bool) -> Iterator[StudyFolder]:
        """Lock the folder, make it if need be, and give it; :attr:`plan` is the one it was begun with.

        Raises
        ------
        OutputExistsError
            As :func:`check_folder`.
        CaseError
            Another process runs the study, or its plan is damaged.
        FarholdError
            The parent is missing, or the folder may not be written.
        """
        path = Path(folder)
        check_folder(path, resume=resume, force=force)
        if not path.parent.exists():
            raise FarholdError(Fault(str(path.parent), "does not exist", hint="create the folder first"))
        with explained(path):
            path.mkdir(exist_ok=True)
        with contextlib.ExitStack() as stack:
            try:
                stack.enter_context(FolderLock(path, LOCK))
            except LedgerError as error:
                raise CaseError(error.faults) from None
            # looked at again under the lock: another process may have begun meanwhile
            check_folder(path, resume=resume, force=force)
            yield cls(path, cls._begin(path, plan, resume))

    @staticmethod
    def _begin(path: Path, plan: Plan, resume: bool) -> Plan:
        sweep(path, _is_litter_of_writing)
        begun = read_plan(path)
        if resume and begun is not None:
            sweep(path / CHUNKS, _is_litter_of_writing)
            return begun
        if resume and (path / STUDY).exists():
            hint = "restore it, or begin anew with --force"
            raise CaseError(
                Fault(str(path / STUDY), "is damaged: its content does not match its digest", hint=hint)
            )
        # findings and chunks go before the plan is replaced: a kill between leaves a lawful unfinished study
        sweep(path, lambda name: name in (FINISHED, RESULT) or name.endswith(".parquet"))
        with explained(path):
            (path / CHUNKS).mkdir(exist_ok=True)
        sweep(path / CHUNKS, lambda name: index_of(name) is not None or _is_litter_of_writing(name))
        write_bytes_durably(path / STUDY, plan.to_bytes())
        return plan

    def verified(self, note: Callable[[str], None]) -> set[int]:
        """Read every finished chunk and give the indices of the whole ones; the others are deleted, and noted."""
        found = self.path / CHUNKS
        with explained(found):
            found.mkdir(exist_ok=True)
            names = sorted(entry.name for entry in found.iterdir())
        for name in names:
            index = index_of(name)
            if index is None:
                continue
            with explained(found / name):
                data = (found / name).read_bytes()
                if index < self.plan.chunks and index not in self._names and is_whole(name, data):
                    self._names[index] = name
                    continue
                (found / name).unlink()
            note(f"{name} is damaged; it is computed again")
        return set(self._names)

    def write(self, index: int, chunk: Chunk) -> None:
        """Keep a finished chunk.

        Raises
        ------
        FarholdError
            The disk is full, the folder was deleted or may not be written.
        """
        data = encode(self.plan.digest, index, chunk)
        name = chunk_name(index, data)
        write_bytes_durably(self.path / CHUNKS / name, data)
        self._names[index] = name

    def take(self, index: int, name: str) -> None:
        """Take note of a chunk that a worker wrote."""
        self._names[index] = name

    def count(self) -> int:
        """Count the chunks whose files are there, those of workers that were not heard any more included."""
        try:
            found = {index_of(entry.name) for entry in (self.path / CHUNKS).iterdir()}
        except OSError:
            return 0
        return len(found - {None})

    def read(self, index: int) -> Chunk | None:
        """Read a chunk back; None where it is not there or not whole."""
        try:
            name = self._names[index]
            data = (self.path / CHUNKS / name).read_bytes()
        except (OSError, KeyError):
            return None
        return decode(self.plan.digest, index, data) if is_whole(name, data) else None

    def finish(self, findings: Findings) -> None:
        """Keep the findings; the last file written says that the study is finished."""
        files = {f"{name}.parquet": table_bytes(table) for name, table in findings.tables.items()}
        text = json.dumps(findings.summary, indent=1, allow_nan=False, ensure_ascii=False)
        files[RESULT] = (text + "\n").encode()
        for name, data in files.items():
            write_bytes_durably(self.path / name, data)
        seal = {
            "plan": self.plan.digest,
            "findings": findings.digest,
            "files": {name: sha256_hex(data) for name, data in files.items()},
            "notes": findings.notes,
        }
        write_bytes_durably(self.path / FINISHED, (json.dumps(seal, indent=1, ensure_ascii=False) + "\n").encode())

    def findings(self) -> Findings | None:
        """Read the findings of a finished study; None where it is not finished or a file is not whole."""
        return read_findings(self.path, self.plan)


def _is_litter_of_writing(name: str) -> bool:
    return name != LOCK and _is_litter(name)


def sweep(path: Path, unwanted: Callable[[str], bool]) -> None:
    """Delete the files of a folder whose names are unwanted."""
    with explained(path):
        if path.is_dir():
            for entry in path.iterdir():
                if unwanted(entry.name) and not entry.is_dir():
                    entry.unlink(missing_ok=True)


def read_findings(path: Path, plan: Plan) -> Findings | None:
    """Read the findings of a finished study; None where it is not finished or a file is not whole."""
    try:
        seal: dict[str, Any] = json.loads((path / FINISHED).read_bytes())
        if seal["plan"] != plan.digest:
            return None
        files = {name: (path / name).read_bytes() for name in seal["files"]}
        if any(sha256_hex(data) != seal["files"][name] for name, data in files.items()):
            return None
        summary = json.loads(files.pop(RESULT))
        tables = {name.removesuffix(".parquet"): _frame(data) for name, data in files.items()}
        return Findings(summary, tables, list(seal["notes"]))
    except (OSError, ValueError, KeyError, TypeError, AttributeError, pa.ArrowException):
        return None


def _frame(data: bytes) -> pd.DataFrame:
    frame: pd.DataFrame = pq.read_table(io.BytesIO(data)).to_pandas()
    return frame
