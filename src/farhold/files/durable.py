"""Durable writes: a file or a folder is there whole or not at all.

Everything is written aside in the same folder, under a hidden name ending in ``.aside``, flushed to the disk
and then renamed. A process killed at any instant leaves at most such an aside name behind.
"""

from __future__ import annotations

import contextlib
import errno
import os
import shutil
import uuid
from collections.abc import Callable, Iterator
from pathlib import Path

from farhold.errors import FarholdError, Fault, OutputExistsError

__all__ = [
    "ASIDE_SUFFIX",
    "aside_of",
    "durable_folder",
    "explained",
    "refuse_existing",
    "sync_folder",
    "write_bytes_durably",
]

ASIDE_SUFFIX = ".aside"

_REASONS = {
    errno.ENOENT: ("does not exist", "create the folder first"),
    errno.ENOTDIR: ("is not a folder", "name a folder"),
    errno.EISDIR: ("is a folder, not a file", "name a file"),
    errno.EACCES: (
        "may not be written here: permission denied",
        "choose another folder or change its permissions",
    ),
    errno.EPERM: (
        "may not be written here: permission denied",
        "choose another folder or change its permissions",
    ),
    errno.EROFS: ("lies on a read-only file system", "choose another folder"),
    errno.ENOSPC: ("cannot be written: the disk is full", "free some space and run it again"),
    errno.EDQUOT: ("cannot be written: the disk quota is used up", "free some space and run it again"),
    errno.ENAMETOOLONG: ("has too long a name", "choose a shorter name"),
}


@contextlib.contextmanager
def explained(path: Path) -> Iterator[None]:
    """Turn an operating-system error inside the block into one sentence about `path`.

    Raises
    ------
    FarholdError
        With the reason and the cure; the block raised OSError. One about a file elsewhere passes unchanged.
    """
    try:
        yield
    except FarholdError:
        raise
    except OSError as error:
        culprit = error.filename
        if isinstance(culprit, str | Path) and not Path(culprit).absolute().is_relative_to(path.absolute().parent):
            raise
        what, hint = _REASONS.get(error.errno or 0, (f"cannot be used: {error.strerror or error}", ""))
        raise FarholdError(Fault(str(path), what, hint=hint)) from error


def sync_folder(path: Path) -> None:
    """Flush a folder's names to the disk, so that a rename in it survives a power cut."""
    if os.name == "nt":
        return
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def aside_of(path: Path) -> Path:
    """Name a file or folder beside `path` that no reader takes for the real one."""
    return path.with_name(f".{path.name}.{uuid.uuid4().hex[:12]}{ASIDE_SUFFIX}")


def _need_parent(path: Path) -> None:
    parent = path.parent
    if not parent.exists():
        raise FarholdError(Fault(str(parent), "does not exist", "an existing folder", "create the folder first"))
    if not parent.is_dir():
        raise FarholdError(Fault(str(parent), "is not a folder", "an existing folder"))


def write_bytes_durably(path: Path | str, data: bytes) -> None:
    """Write a file so that it is there whole or not at all, replacing what was there.

    Raises
    ------
    FarholdError
        The folder is missing, no folder or not writable, or the disk is full; nothing is left behind.
    """
    path = Path(path)
    _need_parent(path)
    aside = aside_of(path)
    with explained(path):
        try:
            with open(aside, "xb") as stream:
                stream.write(data)
                stream.flush()
                os.fsync(stream.fileno())
            os.replace(aside, path)
            sync_folder(path.parent)
        finally:
            aside.unlink(missing_ok=True)


def refuse_existing(path: Path | str, force: bool = False) -> None:
    """Refuse an output that is already there; an empty folder counts as not there.

    Raises
    ------
    OutputExistsError
        The output exists and `force` is false.
    """
    path = Path(path)
    if force or not (path.exists() or path.is_symlink()):
        return
    with explained(path):
        if path.is_dir() and not any(path.iterdir()):
            return
    raise OutputExistsError(Fault(str(path), "exists already", hint="--force replaces it, or choose another name"))


def _sync_tree(folder: Path) -> None:
    for root, _, names in os.walk(folder):
        for name in names:
            with open(Path(root, name), "rb+") as stream:
                os.fsync(stream.fileno())
        sync_folder(Path(root))


def _refuse_strangers(path: Path, aside: Path, disposable: Callable[[str], bool]) -> None:
    ours = {entry.name for entry in aside.iterdir()}
    strangers = sorted(e.name for e in path.iterdir() if e.name not in ours and not disposable(e.name))
    if strangers:
        raise OutputExistsError(
            Fault(
                str(path),
                f"holds {strangers[0]!r}, which this output does not replace",
                hint="move it away or choose another folder",
            )
        )


def _nothing(_name: str) -> bool:
    return False


@contextlib.contextmanager
def durable_folder(
    path: Path | str, force: bool = False, disposable: Callable[[str], bool] = _nothing
) -> Iterator[Path]:
    """Give a folder aside to write into; when the block ends well, it takes its place in one rename.

    Parameters
    ----------
    path : path of the folder to appear; its parent must exist
    force : replace a folder that is there; what else it holds is never deleted, it is refused
    disposable : which names of the replaced folder may vanish beside those that are written anew

    Yields
    ------
    Path
        The folder to write into, in the parent of `path`. It is removed when the block raises.

    Raises
    ------
    OutputExistsError
        The folder exists and is not empty, and `force` is false; or it holds something else; or it is a file.
    FarholdError
        The parent is missing, no folder or not writable, or the disk is full.
    """
    path = Path(path).resolve()
    _need_parent(path)
    refuse_existing(path, force)
    if path.exists() and not path.is_dir():
        raise OutputExistsError(Fault(str(path), "is a file, not a folder", hint="choose another name"))
    aside, former = aside_of(path), aside_of(path)
    with explained(path):
        aside.mkdir()
        try:
            yield aside
            _sync_tree(aside)
            if path.exists():
                _refuse_strangers(path, aside, disposable)
                os.rename(path, former)
            os.rename(aside, path)
            sync_folder(path.parent)
        finally:
            if former.exists() and not path.exists():
                os.rename(former, path)
            shutil.rmtree(aside, ignore_errors=True)
            shutil.rmtree(former, ignore_errors=True)
