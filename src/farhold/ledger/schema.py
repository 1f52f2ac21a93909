"""The columns of the book, and the one form of bytes of which digests are made.

Everything is held as Arrow tables of these schemas: no column may hold a null. A digest is taken over the
values themselves, never over Parquet bytes, so that compression, paths and clocks leave it alone.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from typing import Any

import numpy as np
import pyarrow as pa

__all__ = [
    "ALIVE",
    "BALANCES",
    "CAUSES",
    "DEMAND",
    "ENTRIES",
    "FORMAT",
    "NODES_PER_BLOCK",
    "ROSTER",
    "SCHEMA_VERSION",
    "STATUSES",
    "TERMS",
    "column",
    "content_digest",
    "table_of",
    "texts",
]

FORMAT = "farhold-ledger"
SCHEMA_VERSION = 1
NODES_PER_BLOCK = 2000

CAUSES = (
    "load",
    "deploy",
    "trim",
    "hold",
    "reshape",
    "regroup",
    "swap",
    "attitude",
    "leak",
    "retire",
    "correction",
)
STATUSES = ("active", "spare", "lost", "retired")
ALIVE = ("active", "spare")

_KINDS = {"text": pa.string(), "float": pa.float64(), "int": pa.int64(), "epoch": pa.timestamp("ns")}


def _schema(columns: str) -> Any:
    pairs = (item.split(":") for item in columns.split())
    return pa.schema([pa.field(name, _KINDS[kind], nullable=False) for name, kind in pairs])


ENTRIES = _schema(
    "seq:int node:text class:text epoch_tdb:epoch cause:text source:text dv_m_s:float isp_s:float "
    "mass_before_kg:float mass_after_kg:float propellant_kg:float margin_kg:float note:text"
)
BALANCES = _schema(
    "node:text class:text status:text formation:text slot:text loaded_kg:float spent_kg:float mass_kg:float "
    "margin_kg:float usable_kg:float life_years:float"
)
ROSTER = _schema("node:text status:text formation:text slot:text since:epoch")
DEMAND = _schema("node:text demand_m_s_yr:float")
TERMS = _schema(
    "node:text class:text dry_mass_kg:float loaded_kg:float isp_s:float attitude_isp_s:float "
    "attitude_m_s_per_year:float leak_kg_per_year:float solar_area_m2:float"
)


def texts(values: Any) -> Any:
    """Make an Arrow text array of NumPy or Python strings."""
    if isinstance(values, np.ndarray):
        values = values.tolist()
    return pa.array(values, type=pa.string())


def table_of(schema: Any, columns: Mapping[str, Any]) -> Any:
    """Make an Arrow table of `schema` from one array per column; epochs come as whole nanoseconds."""
    arrays = []
    for field in schema:
        values = columns[field.name]
        if pa.types.is_string(field.type):
            arrays.append(texts(values))
        elif pa.types.is_timestamp(field.type):
            arrays.append(pa.array(np.asarray(values, dtype=np.int64)).cast(field.type))
        else:
            arrays.append(pa.array(np.asarray(values), type=field.type))
    return pa.Table.from_arrays(arrays, schema=schema)


def column(table: Any, name: str) -> Any:
    """Take a column as a NumPy array: float64, int64 (epochs as nanoseconds) or objects of str."""
    values = table.column(name).combine_chunks()
    if pa.types.is_timestamp(values.type):
        values = values.cast(pa.int64())
    return values.to_numpy(zero_copy_only=False)


def _text_parts(values: Any) -> tuple[bytes, bytes]:
    """Lengths and joined UTF-8 of an Arrow text array, whatever slice of its buffers it is."""
    _, ends_buffer, data_buffer = values.buffers()
    if len(values) == 0:
        return b"", b""
    ends = np.frombuffer(ends_buffer, dtype=np.int32)[values.offset : values.offset + len(values) + 1]
    data = memoryview(data_buffer)[ends[0] : ends[-1]] if data_buffer is not None else memoryview(b"")
    return np.diff(ends).astype("<i8").tobytes(), bytes(data)


def content_digest(parts: Mapping[str, Any]) -> str:
    """SHA-256 over named parts, each an Arrow table or a text: 64 hexadecimal digits.

    Every column enters with its name, type, length and little-endian values, so that no two contents share
    their bytes.
    """
    digest = hashlib.sha256()

    def add(tag: str, data: bytes) -> None:
        name = tag.encode()
        digest.update(len(name).to_bytes(8, "little") + name + len(data).to_bytes(8, "little"))
        digest.update(data)

    for name, part in parts.items():
        if isinstance(part, str):
            add(f"{name}:text", part.encode("utf-8", "surrogatepass"))
            continue
        for field in part.schema:
            values = part.column(field.name).combine_chunks()
            tag = f"{name}.{field.name}:{field.type}"
            if pa.types.is_string(field.type):
                lengths, data = _text_parts(values)
                add(f"{tag}.lengths", lengths)
                add(tag, data)
            else:
                plain = column(part, field.name)
                add(tag, plain.astype(plain.dtype.newbyteorder("<")).tobytes())
    return digest.hexdigest()
