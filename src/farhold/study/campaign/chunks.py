"""A chunk as one Parquet file: arrays and tables in, the same bits out, the same bytes for the same content.

The file has one row. Each array is one cell, a list of its values in C order, with its shape and type in the
file's metadata; each column of a table is one cell likewise. The file's name carries the start of the digest
of its bytes, so that a file is trusted only after its bytes were counted, before anything parses them.
"""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from typing import Any, TypeAlias

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from farhold.errors import DomainError, Fault
from farhold.files import canonical_json, sha256_hex

__all__ = ["Chunk", "chunk_name", "decode", "encode", "index_of", "is_whole", "table_bytes"]

Chunk: TypeAlias = Mapping[str, np.ndarray | pa.Table]

_NAME = re.compile(r"chunk-(\d{6,9})-([0-9a-f]{16})\.parquet")
_KEY = b"farhold"
_KINDS = "biufmMUS"


def chunk_name(index: int, data: bytes) -> str:
    """Name the file of chunk `index` whose bytes are `data`."""
    return f"chunk-{index:06d}-{sha256_hex(data)[:16]}.parquet"


def index_of(name: str) -> int | None:
    """Read the index out of a file name; None where it is no name of a chunk."""
    found = _NAME.fullmatch(name)
    return int(found[1]) if found else None


def is_whole(name: str, data: bytes) -> bool:
    """Whether `data` are the bytes that the file of this name was written with."""
    found = _NAME.fullmatch(name)
    return found is not None and found[2] == sha256_hex(data)[:16]


def _cell(values: pa.Array) -> pa.Array:
    return pa.LargeListArray.from_arrays(pa.array([0, len(values)], pa.int64()), values)


def _flat(name: str, array: np.ndarray) -> pa.Array:
    if array.dtype.kind not in _KINDS or array.dtype.itemsize == 0:
        raise DomainError(
            Fault(f"chunk array {name!r}", f"has type {array.dtype}", "bool, int, float, text, bytes, times")
        )
    flat = np.ascontiguousarray(array).reshape(-1)
    return pa.array(flat.tolist() if array.dtype.kind in "US" else flat.astype(flat.dtype.newbyteorder("=")))


def encode(plan_digest: str, index: int, chunk: Chunk) -> bytes:
    """Write a chunk as the bytes of a Parquet file; no time, host or process is in it.

    Raises
    ------
    DomainError
        An array's type cannot be kept.
    """
    cells: dict[str, pa.Array] = {}
    parts: list[dict[str, Any]] = []
    for name, part in chunk.items():
        if isinstance(part, pa.Table):
            merged = part.combine_chunks()
            for column, values in zip(merged.column_names, merged.columns, strict=True):
                whole = values.chunk(0) if values.num_chunks else pa.array([], values.type)
                cells[f"{name}/{column}"] = _cell(whole)
            parts.append({"name": name, "columns": merged.column_names})
        else:
            array = np.asarray(part)
            cells[name] = _cell(_flat(name, array))
            parts.append({"name": name, "dtype": array.dtype.newbyteorder("=").str, "shape": array.shape})
    about = {"plan": plan_digest, "index": index, "parts": parts}
    # a row of no columns has no length in Parquet, so there is always one
    cells["chunk"] = pa.array([index])
    table = pa.Table.from_arrays(list(cells.values()), list(cells)).replace_schema_metadata(
        {_KEY: canonical_json(about)}
    )
    sink = pa.BufferOutputStream()
    # a dictionary would take -0.0 for 0.0 and one NaN for another
    pq.write_table(table, sink, use_dictionary=False, compression="zstd", write_statistics=False)
    data: bytes = sink.getvalue().to_pybytes()
    return data


def _array(cell: pa.Array, about: Mapping[str, Any]) -> np.ndarray:
    dtype = np.dtype(about["dtype"])
    if dtype.kind in "US":
        values = np.array(cell.to_pylist(), dtype=dtype)
    else:
        values = cell.to_numpy(zero_copy_only=False).astype(dtype)
    return values.reshape(about["shape"])


def decode(plan_digest: str, index: int, data: bytes) -> Chunk | None:
    """Read a chunk back; None where the file is of another study, of another chunk or damaged."""
    try:
        table = pq.read_table(pa.BufferReader(data))
        about = json.loads(table.schema.metadata[_KEY])
        if about["plan"] != plan_digest or about["index"] != index:
            return None
        chunk: dict[str, np.ndarray | pa.Table] = {}
        for part in about["parts"]:
            name = part["name"]
            if "columns" in part:
                cells = [_only(table, f"{name}/{column}") for column in part["columns"]]
                chunk[name] = pa.Table.from_arrays(cells, part["columns"])
            else:
                chunk[name] = _array(_only(table, name), part)
    except (pa.ArrowException, OSError, ValueError, KeyError, TypeError):
        return None
    return chunk


def _only(table: pa.Table, name: str) -> pa.Array:
    return table.column(name).combine_chunks().flatten()


def table_bytes(frame: pd.DataFrame) -> bytes:
    """Write a table as the bytes of a Parquet file."""
    sink = pa.BufferOutputStream()
    pq.write_table(pa.Table.from_pandas(frame, preserve_index=False), sink)
    data: bytes = sink.getvalue().to_pybytes()
    return data
