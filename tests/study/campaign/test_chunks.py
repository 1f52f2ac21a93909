"""Chunks as files: the same bits back, the same bytes for the same content, damage seen before it is parsed."""

import hashlib
import subprocess
import sys

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from farhold.errors import DomainError
from farhold.study.campaign.chunks import chunk_name, decode, encode, index_of, is_whole

PLAN = "5f" * 32
SHAPES = hnp.array_shapes(min_dims=0, max_dims=3, min_side=0, max_side=4)
TYPES = st.one_of(
    hnp.floating_dtypes(endianness="=", sizes=(32, 64)),
    hnp.integer_dtypes(endianness="="),
    hnp.boolean_dtypes(),
)


def bits(array):
    return array.dtype, array.shape, array.tobytes()


@given(array=TYPES.flatmap(lambda dtype: hnp.arrays(dtype, SHAPES)))
def test_array_comes_back_to_the_bit(array):
    back = decode(PLAN, 3, encode(PLAN, 3, {"a": array}))
    assert bits(back["a"]) == bits(np.asarray(array))


@pytest.mark.parametrize(
    "array",
    [
        np.array([0.0, -0.0, np.nan, -np.nan, np.inf, 5e-324]),
        np.array([0x7FF8000000000001, 0x7FF0000000000002], dtype=np.uint64).view(np.float64),
        np.array(["H01", "", "Möwe"]),
        np.array("2035-03-20T00:00:00.000000001", dtype="datetime64[ns]"),
        np.arange(12).reshape(3, 4)[:, ::2],
        np.arange(3, dtype=">i4"),
        np.empty((0, 3)),
    ],
    ids=["signs", "payloads of NaN", "text", "time", "strided", "foreign bytes", "empty"],
)
def test_odd_array_comes_back(array):
    back = decode(PLAN, 0, encode(PLAN, 0, {"a": array}))["a"]
    assert bits(back) == bits(
        np.ascontiguousarray(array).astype(array.dtype.newbyteorder("=")).reshape(array.shape)
    )


@pytest.mark.parametrize("rows", [0, 3])
def test_table_comes_back(rows):
    table = pa.table({"node": pa.array(["H01", None, "P7"][:rows], pa.string()), "dv": [0.1, 0.2, 0.3][:rows]})
    table = pa.concat_tables([table, table])
    back = decode(PLAN, 0, encode(PLAN, 0, {"t": table, "n": np.array(1)}))
    assert back["t"].to_pydict() == table.to_pydict()
    assert back["t"].schema.types[0] == pa.string()


def test_empty_chunk_comes_back():
    assert decode(PLAN, 0, encode(PLAN, 0, {})) == {}


WRITE = """
import hashlib, numpy as np
from farhold.study.campaign.chunks import encode
print(hashlib.sha256(encode("5f" * 32, 4, {"a": np.arange(1000.0), "b": np.array(["x"])})).hexdigest())
"""


def test_bytes_are_the_same_in_another_process():
    there = subprocess.run(
        [sys.executable, "-c", WRITE], capture_output=True, text=True, check=True
    ).stdout.strip()
    here = encode(PLAN, 4, {"a": np.arange(1000.0), "b": np.array(["x"])})
    assert hashlib.sha256(here).hexdigest() == there


@pytest.mark.parametrize(
    "harm", [lambda d: d[:-9], lambda d: d[:99] + bytes([d[99] ^ 1]) + d[100:], lambda _: b""]
)
def test_damage_shows_in_the_name(harm):
    data = encode(PLAN, 4, {"a": np.arange(100.0)})
    name = chunk_name(4, data)
    assert is_whole(name, data)
    assert not is_whole(name, harm(data))


@pytest.mark.parametrize(("plan", "index"), [("00" * 32, 4), (PLAN, 5)])
def test_chunk_of_another_study_or_place_is_not_taken(plan, index):
    assert decode(plan, index, encode(PLAN, 4, {"a": np.zeros(3)})) is None


def test_what_is_no_parquet_is_not_taken():
    assert decode(PLAN, 4, b"PAR1 or so") is None


@pytest.mark.parametrize(
    "name", ["chunk-1.parquet", ".chunk-000001-0123456789abcdef.parquet.1.aside", "rows.parquet"]
)
def test_other_file_is_no_chunk(name):
    assert index_of(name) is None
    assert not is_whole(name, b"")


def test_type_that_cannot_be_kept_is_refused():
    with pytest.raises(DomainError, match=r"chunk array 'z': has type complex128 \(allowed: bool, int, float"):
        encode(PLAN, 0, {"z": np.zeros(2, dtype=complex)})
