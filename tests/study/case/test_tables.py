"""Slots and nodes files: what is read, what is refused and where."""

from __future__ import annotations

import io

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from farhold.errors import CaseError
from farhold.study.case.tables import Columns, read_table

COLUMNS = Columns(("slot",), ("x_km", "y_km"), ("node",), ("priority",))
KNOWN = "slot, x_km, y_km, node, priority"
NAME = "up to 32 of A-Z a-z 0-9 _ . -, beginning with a letter or digit"


def parquet(**columns: object) -> bytes:
    sink = io.BytesIO()
    pq.write_table(pa.table(columns), sink)
    return sink.getvalue()


def test_csv_is_read_with_blank_lines_spaces_quotes_and_byte_order_mark() -> None:
    data = '\ufeffslot, x_km,y_km,priority,node\r\n"a", 1.5,-2e0,,\r\n\r\nb,3,4,2,P01\r\n'.encode()
    table = read_table(data, "s.csv", COLUMNS)
    assert table.text["slot"].tolist() == ["a", "b"]
    assert table.text["node"].tolist() == ["", "P01"]
    np.testing.assert_array_equal(table.number["x_km"], [1.5, 3.0])
    np.testing.assert_array_equal(table.number["priority"], [np.nan, 2.0])
    assert table.where(1, "x_km") == "s.csv:4: x_km"


def test_parquet_and_csv_give_the_same() -> None:
    by_csv = read_table(b"slot,x_km,y_km,priority\na,1,2,\nb,3,4,1\n", "s.csv", COLUMNS)
    data = parquet(slot=["a", "b"], x_km=[1.0, 3.0], y_km=[2, 4], priority=pa.array([None, 1], pa.int32()))
    by_parquet = read_table(data, "s.parquet", COLUMNS)
    assert by_csv.text["slot"].tolist() == by_parquet.text["slot"].tolist()
    for key in ("x_km", "y_km", "priority"):
        np.testing.assert_array_equal(by_csv.number[key], by_parquet.number[key])


@pytest.mark.parametrize(
    ("data", "text"),
    [
        (b"", "s.csv: is empty (allowed: a line of column names, then one row or more)"),
        (
            b"slot,x_km,y_km\n",
            "s.csv: holds no rows (allowed: one row or more below the line of column names)",
        ),
        (
            b"slot,x_km\na,1\n",
            f"s.csv: has no column 'y_km' (its columns: slot, x_km) (allowed: {KNOWN})",
        ),
        (
            b"slot;x_km;y_km\na;1;2\n",
            "\n".join(
                f"s.csv: has no column {name!r} (its columns: slot;x_km;y_km)"
                f" (allowed: {KNOWN}; columns are parted by commas)"
                for name in ("slot", "x_km", "y_km")
            ),
        ),
        (
            b"slot,x_km,y_km,prioritty\na,1,2,3\n",
            f"s.csv: unknown column 'prioritty' (allowed: {KNOWN}; did you mean 'priority'?)",
        ),
        (b"slot,x_km,y_km,x_km\na,1,2,3\n", "s.csv: has column 'x_km' twice"),
        (b"slot,x_km,y_km\na,1\n", "s.csv:2: has 2 cells under 3 column names"),
        (b"slot,x_km,y_km\na,abc,1\n", "s.csv:2: x_km: got 'abc' (allowed: a finite number)"),
        (b"slot,x_km,y_km\na,1,1\nb,,1\n", "s.csv:3: x_km: got an empty cell (allowed: a finite number)"),
        (b"slot,x_km,y_km\na,nan,1\n", "s.csv:2: x_km: got 'nan' (allowed: a finite number)"),
        (b"slot,x_km,y_km\na,1,-inf\n", "s.csv:2: y_km: got '-inf' (allowed: a finite number)"),
        (b"slot,x_km,y_km\n=1+1,1,1\n", f"s.csv:2: slot: '=1+1' is not a lawful name (allowed: {NAME})"),
        (b"slot,x_km,y_km\n,1,1\n", f"s.csv:2: slot: '' is not a lawful name (allowed: {NAME})"),
        (
            b"slot,x_km,y_km\n\xff\xfe,1,1\n",
            "s.csv:2: holds bytes that are not UTF-8 text (allowed: CSV in UTF-8)",
        ),
        (b'slot,x_km,y_km\n"a,1,1\n', "s.csv:2: cannot be read as CSV: unexpected end of data"),
    ],
)
def test_csv_is_refused_with_its_line(data: bytes, text: str) -> None:
    with pytest.raises(CaseError) as caught:
        read_table(data, "s.csv", COLUMNS)
    assert str(caught.value) == text


BROKEN = (
    "s.parquet: cannot be read as Parquet: the file is damaged, cut short, or of another kind"
    " (write it again, or give a .csv file)"
)


@pytest.mark.parametrize(
    "data",
    [
        b"",
        b"slot,x_km,y_km\na,1,2\n",
        b"PAR1PAR1",
        parquet(slot=["a"], x_km=[1.0], y_km=[2.0])[:-30],
        parquet(slot=["a"], x_km=[1.0], y_km=[2.0])[:40],
    ],
    ids=["empty", "csv", "marks", "no-end", "start"],
)
def test_parquet_that_is_damaged_is_refused(data: bytes) -> None:
    with pytest.raises(CaseError) as caught:
        read_table(data, "s.parquet", COLUMNS)
    assert str(caught.value) == BROKEN


def test_parquet_of_text_in_a_number_column_names_the_row() -> None:
    with pytest.raises(CaseError) as caught:
        read_table(parquet(slot=["a", "b"], x_km=["1", "far"], y_km=[1.0, 2.0]), "s.parquet", COLUMNS)
    assert str(caught.value) == "s.parquet:2: x_km: got 'far' (allowed: a finite number)"


def test_many_wrong_cells_are_counted_not_listed() -> None:
    data = b"slot,x_km,y_km\n" + b"".join(b"a%d,x,1\n" % k for k in range(50))
    with pytest.raises(CaseError) as caught:
        read_table(data, "s.csv", COLUMNS)
    assert len(caught.value.faults) == 21
    assert caught.value.faults[-1].sentence() == "s.csv: 30 more cells are wrong"
