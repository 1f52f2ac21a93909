"""The ledger's folder: immutable segments, and the head file whose rename is the commit.

A commit writes four Parquet segments (entries, roster, balances, demand), each aside, flushed, renamed, the
folder flushed; then the head file in the same way. Only what the head names exists for a reader: segments of
a writer that died are invisible, and the next writer sweeps them. Readers take no lock.
"""

from __future__ import annotations

import io
import itertools
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.dataset as pads
import pyarrow.parquet as pq

from farhold.errors import DomainError, FarholdError, Fault
from farhold.files import explained, sha256_hex, write_bytes_durably
from farhold.ledger import schema
from farhold.ledger.commits import KINDS, Commit
from farhold.ledger.head import HEAD, LOCK, Head, Record, SegmentFile, damaged, encoded, is_ours, read_head
from farhold.ledger.terms import Terms

__all__ = [
    "TABLES",
    "read_bytes",
    "read_entries",
    "read_table",
    "read_terms",
    "sweep",
    "write_commit",
    "write_opening",
]

TABLES = {
    "entries": schema.ENTRIES,
    "roster": schema.ROSTER,
    "balances": schema.BALANCES,
    "demand": schema.DEMAND,
}


def read_bytes(folder: Path, segment: SegmentFile) -> bytes:
    """Read a file that the head names, unchecked.

    Raises
    ------
    LedgerError
        It is missing or cannot be read.
    """
    path = folder / segment.name
    try:
        return path.read_bytes()
    except FileNotFoundError:
        raise damaged(path, "is missing, though the head names it") from None
    except OSError as error:
        raise damaged(path, f"cannot be read: {error.strerror}") from error


def _fits(path: Path, table: Any, expected: Any) -> Any:
    if table.schema.names != expected.names or any(column.null_count for column in table.columns):
        raise damaged(path, "has other columns than a ledger's segment, or gaps in them")
    return table.cast(expected)


def read_table(folder: Path, segment: SegmentFile, expected: Any) -> Any:
    """Read a whole Parquet segment as a table of the schema `expected`; page check sums are verified.

    Raises
    ------
    LedgerError
        The segment is missing, cut short or damaged.
    """
    path = folder / segment.name
    raw = read_bytes(folder, segment)
    try:
        table = pq.read_table(io.BytesIO(raw), page_checksum_verification=True)
        return _fits(path, table, expected)
    except FarholdError:
        raise
    except (pa.ArrowException, OSError, ValueError) as error:
        raise damaged(path, "cannot be read: the segment is cut short or damaged") from error


def read_entries(folder: Path, head: Head, nodes: Sequence[str] | None = None) -> Any:
    """Read entries of all commits in the order of their seq; of some nodes only the blocks that hold them.

    Raises
    ------
    LedgerError
        A segment is missing, cut short or damaged.
    """
    segments = [record.files["entries"] for record in head.commits if record.entries]
    if nodes is None:
        return pa.concat_tables(read_table(folder, one, schema.ENTRIES) for one in segments)
    chosen = pads.field("node").isin(pa.array(list(nodes), type=pa.string()))
    options = pads.ParquetFragmentScanOptions(page_checksum_verification=True)
    form = pads.ParquetFileFormat(default_fragment_scan_options=options)
    parts = []
    for one in segments:
        path = folder / one.name
        if not path.exists():
            raise damaged(path, "is missing, though the head names it")
        try:
            parts.append(_fits(path, pads.dataset(path, format=form).to_table(filter=chosen), schema.ENTRIES))
        except FarholdError:
            raise
        except (pa.ArrowException, OSError, ValueError) as error:
            raise damaged(path, "cannot be read: the segment is cut short or damaged") from error
    return pa.concat_tables(parts).combine_chunks()


def read_terms(folder: Path, head: Head) -> Terms:
    """Read the terms of the ledger.

    Raises
    ------
    LedgerError
        A file of them is missing or damaged.
    """
    header = read_bytes(folder, head.terms["header"])
    table = read_table(folder, head.terms["nodes"], schema.TERMS)
    try:
        return Terms.read(header, table)
    except (ValueError, KeyError, TypeError) as error:
        raise damaged(folder / head.terms["header"].name, "is cut short or damaged") from error


def _parquet(table: Any, node_major: bool) -> bytes:
    sink = io.BytesIO()
    with pq.ParquetWriter(
        sink, table.schema, compression="zstd", write_page_checksum=True, store_schema=False
    ) as writer:
        if not node_major:
            writer.write_table(table, row_group_size=schema.NODES_PER_BLOCK)
        else:
            for start, stop in _blocks(table):
                writer.write_table(table.slice(start, stop - start), row_group_size=max(stop - start, 1))
    return sink.getvalue()


def _blocks(table: Any) -> list[tuple[int, int]]:
    """Row ranges that each hold the lines of at most 2,000 nodes."""
    nodes = schema.column(table, "node")
    if nodes.size == 0:
        return [(0, 0)]
    firsts = np.flatnonzero(np.r_[True, nodes[1:] != nodes[:-1]])
    edges = [*firsts[:: schema.NODES_PER_BLOCK].tolist(), int(nodes.size)]
    return list(itertools.pairwise(edges))


def _put(folder: Path, name: str, data: bytes) -> SegmentFile:
    write_bytes_durably(folder / name, data)
    return SegmentFile(name, sha256_hex(data))


def _record(folder: Path, commit: Commit, first_seq: int, epoch_ns: int, put: list[str]) -> Record:
    files = {}
    for kind in TABLES:
        name = f"{commit.number:06d}-{commit.digest[:12]}-{kind}.parquet"
        put.append(name)
        files[kind] = _put(folder, name, _parquet(getattr(commit, kind), kind == "entries"))
    return Record(
        number=commit.number,
        kind=commit.kind,
        source=commit.source,
        previous=commit.previous,
        digest=commit.digest,
        first_seq=first_seq,
        entries=commit.entries.num_rows,
        epoch_ns=epoch_ns,
        files=files,
    )


def _latest_ns(commit: Commit) -> int:
    epochs_ns = (schema.column(commit.roster, "since"), schema.column(commit.entries, "epoch_tdb"))
    return int(np.concatenate(epochs_ns).max())


def write_opening(folder: Path, terms: Terms, commit: Commit) -> Head:
    """Write terms, opening and head into an empty folder that nobody reads yet."""
    stem = f"terms-{terms.digest()[:12]}"
    named = {
        "header": _put(folder, f"{stem}.json", terms.header()),
        "nodes": _put(folder, f"{stem}.parquet", _parquet(terms.table(), False)),
    }
    head = Head(named, (_record(folder, commit, 0, _latest_ns(commit), []),))
    write_bytes_durably(folder / HEAD, encoded(head))
    return head


def write_commit(folder: Path, head: Head, commit: Commit) -> Head:
    """Add a commit behind `head`; the caller holds the lock. On failure its segments are taken away again.

    Raises
    ------
    FarholdError
        The folder may not be written, or the disk is full; the ledger is as before.
    """
    if commit.kind not in KINDS:
        raise DomainError(Fault("commit kind", f"got {commit.kind!r}", " ".join(KINDS)))
    put: list[str] = []
    try:
        epoch_ns = max(_latest_ns(commit), head.commits[-1].epoch_ns)
        record = _record(folder, commit, head.next_seq, epoch_ns, put)
        grown = Head(head.terms, (*head.commits, record))
        write_bytes_durably(folder / HEAD, encoded(grown))
    except BaseException:
        _discard_unless_committed(folder, commit, put)
        raise
    return grown


def _discard_unless_committed(folder: Path, commit: Commit, put: list[str]) -> None:
    """Take segments away unless the head was renamed before the failure (then the commit stands)."""
    if read_head(folder).digest == commit.digest:
        return
    for name in put:
        (folder / name).unlink(missing_ok=True)


def sweep(folder: Path, head: Head) -> list[str]:
    """Delete what dead writers left: asides, and segments that the head does not name. Needs the lock.

    Returns
    -------
    the deleted names; files that a ledger never writes are left alone
    """
    named = {one.name for record in head.commits for one in record.files.values()}
    named |= {one.name for one in head.terms.values()} | {HEAD, LOCK}
    gone = []
    with explained(folder):
        for path in sorted(folder.iterdir()):
            if path.name not in named and is_ours(path.name) and path.is_file():
                path.unlink(missing_ok=True)
                gone.append(path.name)
    return gone
