"""Slots and nodes files: CSV or Parquet to checked columns, with the row of every fault."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from farhold.errors import CaseError, Fault
from farhold.study.case.faults import did_you_mean, some_names
from farhold.study.case.schema.fields import NAME_FORM, NAME_RULE

__all__ = ["MOST_FAULTS", "Columns", "Table", "read_table"]

MOST_FAULTS = 20
"""Faults said of one table; how many more there are is said in one further line."""


@dataclass(frozen=True, slots=True)
class Columns:
    """Which columns a table has: names (lawful ones), numbers, and those of either that may be left out."""

    names: tuple[str, ...]
    numbers: tuple[str, ...]
    optional_names: tuple[str, ...] = ()
    optional_numbers: tuple[str, ...] = ()

    @property
    def required(self) -> tuple[str, ...]:
        """Names of the columns that must be there."""
        return self.names + self.numbers

    @property
    def known(self) -> tuple[str, ...]:
        """Names of all columns that may be there."""
        return self.required + self.optional_names + self.optional_numbers


@dataclass(frozen=True, slots=True)
class Table:
    """A read table of n rows: `text` columns (n,) str, `number` columns (n,) float (NaN for an empty cell).

    `row` gives the place of each row as a user counts: lines of a CSV file, rows of a Parquet file from 1.
    """

    file: str
    row: tuple[int, ...]
    text: dict[str, NDArray[np.str_]]
    number: dict[str, NDArray[np.float64]]

    def __len__(self) -> int:
        return len(self.row)

    def where(self, index: int, column: str) -> str:
        """Say the place of a cell."""
        return f"{self.file}:{self.row[index]}: {column}"


def read_table(data: bytes, file: str, columns: Columns) -> Table:
    """Read and check a table.

    Parameters
    ----------
    data : the bytes of the file
    file : its name, which ends in ``.csv`` or ``.parquet``
    columns : what it holds

    Raises
    ------
    CaseError
        Unreadable or empty; a column is missing, given twice or unknown; a cell is no lawful name or no
        finite number. Up to :data:`MOST_FAULTS` cells are named.
    """
    if Path(file).suffix.lower() == ".parquet":
        header, cells, rows = _parquet_cells(data, file)
    else:
        header, cells, rows = _csv_cells(data, file)
    _check_header(header, file, columns)
    if not rows:
        raise CaseError(Fault(file, "holds no rows", "one row or more below the line of column names"))
    table = Table(file, tuple(rows), {}, {})
    faults: list[Fault] = []
    for name, column in zip(header, cells, strict=True):
        if name in columns.names or name in columns.optional_names:
            table.text[name] = _names(column, table, name, name in columns.optional_names, faults)
        else:
            table.number[name] = _numbers(column, table, name, name in columns.optional_numbers, faults)
    if faults:
        more = len(faults) - MOST_FAULTS
        faults = faults[:MOST_FAULTS] + ([Fault(file, f"{more} more cells are wrong")] if more > 0 else [])
        raise CaseError(faults)
    return table


def _csv_cells(data: bytes, file: str) -> tuple[list[str], list[list[object]], list[int]]:
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise CaseError(Fault(f"{file}:{line}", "holds bytes that are not UTF-8 text", "CSV in UTF-8")) from None
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    header: list[str] = []
    body: list[list[str]] = []
    rows: list[int] = []
    faults: list[Fault] = []
    try:
        for record in reader:
            if not any(cell.strip() for cell in record):
                continue
            if not header:
                header = [cell.strip() for cell in record]
            elif len(record) != len(header):
                what = f"has {len(record)} cells under {len(header)} column names"
                faults.append(Fault(f"{file}:{reader.line_num}", what))
            else:
                body.append(record)
                rows.append(reader.line_num)
    except csv.Error as error:
        raise CaseError(Fault(f"{file}:{reader.line_num}", f"cannot be read as CSV: {error}")) from None
    if not header:
        raise CaseError(Fault(file, "is empty", "a line of column names, then one row or more"))
    if faults:
        raise CaseError(faults[:MOST_FAULTS])
    cells: list[list[object]] = [list(column) for column in zip(*body, strict=True)] or [[] for _ in header]
    return header, cells, rows


def _parquet_cells(data: bytes, file: str) -> tuple[list[str], list[list[object]], list[int]]:
    import pyarrow as pa
    import pyarrow.parquet as pq

    try:
        table = pq.read_table(pa.BufferReader(data))
        cells = [column.to_pylist() for column in table.columns]
    except (pa.ArrowException, OSError, ValueError):
        what = "cannot be read as Parquet: the file is damaged, cut short, or of another kind"
        raise CaseError(Fault(file, what, hint="write it again, or give a .csv file")) from None
    return list(table.column_names), cells, list(range(1, table.num_rows + 1))


def _check_header(header: Sequence[str], file: str, columns: Columns) -> None:
    faults = []
    for name in columns.required:
        if name not in header:
            hint = "columns are parted by commas" if any(";" in cell or "\t" in cell for cell in header) else ""
            what = f"has no column {name!r} (its columns: {some_names(header)})"
            faults.append(Fault(file, what, ", ".join(columns.known), hint))
    if not faults:
        for name in dict.fromkeys(header):
            if name not in columns.known:
                hint = did_you_mean(name, columns.known)
                faults.append(Fault(file, f"unknown column {name!r}", ", ".join(columns.known), hint))
            elif list(header).count(name) > 1:
                faults.append(Fault(file, f"has column {name!r} twice"))
    if faults:
        raise CaseError(faults)


def _names(
    column: Sequence[object], table: Table, name: str, optional: bool, faults: list[Fault]
) -> NDArray[np.str_]:
    texts: list[str] = []
    for index, cell in enumerate(column):
        text = "" if cell is None else str(cell).strip()
        if NAME_FORM.fullmatch(text) is None and not (optional and text == ""):
            faults.append(Fault(table.where(index, name), f"{text!r} is not a lawful name", NAME_RULE))
            text = ""
        texts.append(text)
    return np.array(texts, dtype=np.str_)


def _numbers(
    column: Sequence[object], table: Table, name: str, optional: bool, faults: list[Fault]
) -> NDArray[np.float64]:
    values = np.empty(len(column))
    for index, cell in enumerate(column):
        blank = cell is None or (isinstance(cell, str) and not cell.strip())
        if blank and optional:
            values[index] = np.nan
            continue
        try:
            values[index] = float("nan") if blank or isinstance(cell, bool) else float(cell)  # type: ignore[arg-type]
        except (ValueError, TypeError):
            values[index] = np.nan
        if not np.isfinite(values[index]):
            shown = "an empty cell" if blank else f"{cell!r}"
            faults.append(Fault(table.where(index, name), f"got {shown}", "a finite number"))
    return values
