"""The lock of a folder: one writer at a time, and a dead one is no obstacle."""

from __future__ import annotations

import contextlib
import datetime as dt
import json
import os
import socket
import sys
import uuid
from collections.abc import Iterator
from pathlib import Path
from types import TracebackType
from typing import Any

from farhold.errors import Fault, LedgerError
from farhold.files.digest import canonical_json
from farhold.files.durable import aside_of, explained

__all__ = ["FolderLock"]


def _process_start(pid: int) -> str | None:
    """When a process of this machine began, in ticks since boot; None where the system does not say."""
    try:
        with open(f"/proc/{pid}/stat", encoding="utf-8", errors="replace") as stream:
            return stream.read().rpartition(")")[2].split()[19]
    except (OSError, IndexError):
        return None


def _is_alive(pid: int) -> bool:
    if sys.platform == "win32":
        return True
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except (PermissionError, OverflowError):
        return True
    return True


class FolderLock:
    """One writer at a time in a folder; use it in a ``with`` statement.

    The lock is a file that names its owner (process, host, start). It appears whole, by a hard link to a file
    written aside, and only where none is. A lock whose owner is a dead process of this host is removed and
    taken; two that try so at once are kept apart by a system lock on the folder.

    Parameters
    ----------
    folder : the folder to lock; it must exist
    name : name of the lock file

    Raises
    ------
    LedgerError
        On entering: another process holds the lock; the sentence names it.
    FarholdError
        On entering: the folder is missing or may not be written.
    """

    def __init__(self, folder: Path | str, name: str = "lock") -> None:
        self._path = Path(folder) / name
        self._token = ""

    def __enter__(self) -> FolderLock:
        self._token = uuid.uuid4().hex
        pid = os.getpid()
        owner = {
            "pid": pid,
            "host": socket.gethostname(),
            "started": _process_start(pid),
            "since": dt.datetime.now(dt.UTC).isoformat(timespec="seconds"),
            "token": self._token,
        }
        with explained(self._path.parent):
            if not self._take(owner):
                self._recover(owner)
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        with contextlib.suppress(OSError):
            if self._owner().get("token") == self._token:
                self._path.unlink()

    def is_held(self) -> bool:
        """Whether a process that lives holds the lock now; takes nothing."""
        owner = self._owner()
        return bool(owner) and not self._is_stale(owner)

    def _take(self, owner: dict[str, Any]) -> bool:
        aside = aside_of(self._path)
        try:
            with open(aside, "xb") as stream:
                stream.write(canonical_json(owner))
                stream.flush()
                os.fsync(stream.fileno())
            try:
                os.link(aside, self._path)
            except FileExistsError:
                return False
            except (OSError, AttributeError, NotImplementedError):
                return self._take_without_links(owner)
            return True
        finally:
            aside.unlink(missing_ok=True)

    def _take_without_links(self, owner: dict[str, Any]) -> bool:
        try:
            with open(self._path, "xb") as stream:
                stream.write(canonical_json(owner))
        except FileExistsError:
            return False
        return True

    def _owner(self) -> dict[str, Any]:
        try:
            owner = json.loads(self._path.read_bytes())
        except (ValueError, OSError):
            return {}
        return owner if isinstance(owner, dict) else {}

    def _is_stale(self, owner: dict[str, Any]) -> bool:
        pid = owner.get("pid")
        if owner.get("host") != socket.gethostname() or not isinstance(pid, int):
            return False
        if not _is_alive(pid):
            return True
        started, now = owner.get("started"), _process_start(pid)
        return started is not None and now is not None and started != now

    def _recover(self, owner: dict[str, Any]) -> None:
        with self._guard():
            holder = self._owner()
            if self._is_stale(holder):
                self._path.unlink(missing_ok=True)
            if not self._take(owner):
                raise self._held(self._owner())

    @contextlib.contextmanager
    def _guard(self) -> Iterator[None]:
        if sys.platform == "win32":
            yield
            return
        import fcntl

        handle = os.open(self._path.parent, os.O_RDONLY)
        try:
            fcntl.flock(handle, fcntl.LOCK_EX)
            yield
        finally:
            os.close(handle)

    def _held(self, holder: dict[str, Any]) -> LedgerError:
        if "pid" in holder:
            who = f"process {holder['pid']} on {holder.get('host')} since {holder.get('since')}"
        else:
            who = "an owner that its lock file does not name"
        return LedgerError(
            Fault(
                str(self._path.parent),
                f"is being written by {who}",
                hint=f"wait for it to end; if it is certainly dead, delete {self._path.name!r} there",
            )
        )
