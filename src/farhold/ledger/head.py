"""The head file: which commits exist, in which files, chained by their digests."""

from __future__ import annotations

import dataclasses
import json
import re
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from farhold.domain.epoch import Epoch
from farhold.errors import DomainError, FarholdError, Fault, LedgerError
from farhold.files import ASIDE_SUFFIX, canonical_json, digest_of
from farhold.ledger import schema

__all__ = ["HEAD", "LOCK", "Head", "Record", "SegmentFile", "damaged", "encoded", "is_ours", "read_head"]

HEAD = "head.json"
LOCK = "lock"
_SEGMENT = re.compile(r"(\d{6,}-[0-9a-f]{12}-(entries|roster|balances|demand)|terms-[0-9a-f]{12})\.(parquet|json)")
_DAMAGE_HINT = "restore the ledger from a copy; 'farhold ledger audit' says what else is damaged"


@dataclass(frozen=True, slots=True)
class SegmentFile:
    """A file that the head names: its name in the folder and the SHA-256 of its bytes."""

    name: str
    sha256: str


@dataclass(frozen=True, slots=True)
class Record:
    """What the head says of one commit; `epoch_ns` is that of its latest entry or roster change."""

    number: int
    kind: str
    source: str
    previous: str
    digest: str
    first_seq: int
    entries: int
    epoch_ns: int
    files: dict[str, SegmentFile]


@dataclass(frozen=True, slots=True)
class Head:
    """The head file: the terms and every commit so far, from the opening."""

    terms: dict[str, SegmentFile]
    commits: tuple[Record, ...]

    @property
    def digest(self) -> str:
        """Digest of the last commit: the head that quotes are bound to."""
        return self.commits[-1].digest

    @property
    def last_epoch(self) -> Epoch:
        """Latest epoch of any entry or roster change."""
        return Epoch(self.commits[-1].epoch_ns)

    @property
    def next_seq(self) -> int:
        """Number of the next entry."""
        return self.commits[-1].first_seq + self.commits[-1].entries


def damaged(path: Path, what: str) -> LedgerError:
    """Make the error of a damaged place."""
    return LedgerError(Fault(str(path), what, hint=_DAMAGE_HINT))


def is_ours(name: str) -> bool:
    """Whether a name in the folder is one that a ledger writes."""
    ours = name in (HEAD, LOCK) or _SEGMENT.fullmatch(name) is not None
    return ours or (name.startswith(".") and name.endswith(ASIDE_SUFFIX))


def encoded(head: Head) -> bytes:
    """Give the bytes of the head file, with a check sum over its own content."""
    body: dict[str, Any] = {
        "format": schema.FORMAT,
        "schema": schema.SCHEMA_VERSION,
        "head": head.digest,
        **dataclasses.asdict(head),
    }
    return canonical_json({**body, "check": digest_of(body)}) + b"\n"


def read_head(folder: Path) -> Head:
    """Read the head file.

    Raises
    ------
    DomainError
        The folder does not exist or is no ledger (exit 2).
    LedgerError
        The head file is missing, cut short or damaged, or of another schema version (exit 4).
    """
    path = folder / HEAD
    if not folder.exists():
        raise DomainError(
            Fault(str(folder), "does not exist", "the folder of a ledger", "farhold ledger create makes one")
        )
    if not folder.is_dir():
        raise DomainError(Fault(str(folder), "is a file", "the folder of a ledger"))
    try:
        raw = path.read_bytes()
    except FileNotFoundError:
        if any(_SEGMENT.fullmatch(entry.name) for entry in folder.iterdir()):
            raise damaged(path, "the head file is missing") from None
        raise DomainError(
            Fault(str(folder), f"is not a ledger: it holds no {HEAD}", hint="farhold ledger create makes one")
        ) from None
    except OSError as error:
        raise damaged(path, f"cannot be read: {error.strerror}") from error
    return _decode(path, raw)


def _decode(path: Path, raw: bytes) -> Head:
    try:
        body = json.loads(raw)
        if body["format"] != schema.FORMAT:
            raise DomainError(Fault(str(path), f"is not the head of a ledger: format {body['format']!r}"))
        if body["schema"] != schema.SCHEMA_VERSION:
            raise LedgerError(
                Fault(
                    str(path),
                    f"has the ledger schema {body['schema']!r}",
                    f"schema {schema.SCHEMA_VERSION}",
                    "use the farhold that wrote it",
                )
            )
        if body.pop("check") != digest_of(body):
            raise damaged(path, "its content does not match its own check sum")
        head = Head(
            terms={name: SegmentFile(**one) for name, one in body["terms"].items()},
            commits=tuple(
                Record(**{**one, "files": {k: SegmentFile(**f) for k, f in one["files"].items()}})
                for one in body["commits"]
            ),
        )
        if head.digest != body["head"]:
            raise damaged(path, "names another head than its last commit")
    except FarholdError:
        raise
    except (ValueError, KeyError, TypeError, AttributeError, IndexError) as error:
        raise damaged(path, "is cut short or damaged") from error
    return head
