"""Entries as plain tables: comma-separated text and Parquet, with the columns of the ledger."""

from __future__ import annotations

import csv
from collections.abc import Sequence
from typing import TYPE_CHECKING

import pyarrow as pa
import pyarrow.parquet as pq

if TYPE_CHECKING:
    from farhold.study.book import Ledger

__all__ = ["render_csv", "render_parquet"]


def render_csv(ledger: Ledger, nodes: Sequence[str] | None) -> bytes:
    """Return the entries as UTF-8 text: every text quoted, numbers exact, epochs ISO 8601 in TDB."""
    frame = ledger.entries(nodes)
    epochs = frame["epoch_tdb"].dt.strftime("%Y-%m-%dT%H:%M:%S.%f").str.rstrip("0").str.rstrip(".")
    text: str = frame.assign(epoch_tdb=epochs).to_csv(
        index=False, quoting=csv.QUOTE_NONNUMERIC, lineterminator="\n"
    )
    return text.encode("utf-8", "surrogatepass")


def render_parquet(ledger: Ledger, nodes: Sequence[str] | None) -> bytes:
    """Return the entries as one Parquet file; equal entries give equal bytes."""
    sink = pa.BufferOutputStream()
    pq.write_table(pa.Table.from_pandas(ledger.entries(nodes), preserve_index=False), sink)
    data: bytes = sink.getvalue().to_pybytes()
    return data
