"""Exports by ending: what is refused, what is exact, what is filtered."""

import csv
import io

import pandas as pd
import pytest

from farhold.errors import CaseError, FarholdError, OutputExistsError
from farhold.interfaces.export import EXPORTS, export

ENDINGS = list(EXPORTS)


@pytest.mark.parametrize("ending", ENDINGS)
def test_export_returns_the_file_it_wrote_and_leaves_nothing_aside(ledger, tmp_path, ending):
    path = tmp_path / f"book{ending}"
    assert export(ledger, path) == path
    assert [entry.name for entry in tmp_path.iterdir()] == [path.name]


@pytest.mark.parametrize("ending", ENDINGS)
def test_export_refuses_an_existing_file_and_keeps_it(ledger, tmp_path, ending):
    path = tmp_path / f"book{ending}"
    path.write_text("mine")
    with pytest.raises(OutputExistsError, match="exists already") as caught:
        export(ledger, path)
    assert caught.value.exit_code == 2
    assert path.read_text() == "mine"
    export(ledger, path, force=True)
    assert path.read_bytes() != b"mine"


@pytest.mark.parametrize(
    ("name", "sentence"),
    [
        (
            "book.xlx",
            "the ending '.xlx' is unknown (allowed: .xlsx, .csv, .parquet; did you mean book.xlsx?)",
        ),
        ("book", "the ending '' is unknown (allowed: .xlsx, .csv, .parquet)"),
    ],
)
def test_export_refuses_an_unknown_ending(ledger, tmp_path, name, sentence):
    with pytest.raises(FarholdError) as caught:
        export(ledger, tmp_path / name)
    assert str(caught.value) == f"{tmp_path / name}: {sentence}"
    assert not (tmp_path / name).exists()


def test_export_refuses_a_folder_in_place_of_the_file(ledger, tmp_path):
    path = tmp_path / "book.csv"
    path.mkdir()
    with pytest.raises(FarholdError) as caught:
        export(ledger, path, force=True)
    assert str(caught.value) == f"{path}: is a folder, not a file (name a file)"


def test_export_refuses_a_missing_folder(ledger, tmp_path):
    with pytest.raises(FarholdError, match="does not exist"):
        export(ledger, tmp_path / "none" / "book.csv")


def test_export_names_every_unknown_node(ledger, tmp_path):
    with pytest.raises(CaseError) as caught:
        export(ledger, tmp_path / "book.csv", nodes=["P001", "H01", "zzz"])
    assert caught.value.exit_code == 2
    assert str(caught.value).splitlines() == [
        "--nodes: no node 'P001' in this ledger (did you mean 'P0001'?)",
        "--nodes: no node 'zzz' in this ledger",
    ]
    assert list(tmp_path.iterdir()) == []


def test_export_refuses_an_empty_choice(ledger, tmp_path):
    with pytest.raises(FarholdError, match="names no node"):
        export(ledger, tmp_path / "book.csv", nodes=[])


def test_csv_numbers_and_texts_are_exact(ledger, tmp_path):
    text = export(ledger, tmp_path / "book.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(io.StringIO(text)))
    assert list(rows[0]) == list(ledger.frame.columns)
    assert [row["note"] for row in rows] == ledger.frame["note"].tolist()
    assert [float(row["mass_after_kg"]) for row in rows] == ledger.frame["mass_after_kg"].tolist()
    assert rows[0]["epoch_tdb"] == "2035-03-20T00:00:00"
    assert '"=1+1"' in text


def test_csv_epoch_keeps_its_fraction(ledger, tmp_path):
    ledger.frame.loc[0, "epoch_tdb"] = pd.Timestamp("2035-03-20T00:00:00.000250")
    first = export(ledger, tmp_path / "book.csv").read_text().splitlines()[1]
    assert '"2035-03-20T00:00:00.00025"' in first


def test_parquet_reads_back_equal(ledger, tmp_path):
    read = pd.read_parquet(export(ledger, tmp_path / "book.parquet"))
    pd.testing.assert_frame_equal(read, ledger.frame, check_dtype=False)
    assert str(read["epoch_tdb"].dtype) == "datetime64[ns]"


def test_parquet_of_equal_entries_has_equal_bytes(ledger, tmp_path):
    first, second = (export(ledger, tmp_path / f"{name}.parquet").read_bytes() for name in "ab")
    assert first == second


@pytest.mark.parametrize("ending", [".csv", ".parquet"])
def test_nodes_filter_the_entries(ledger, tmp_path, ending):
    path = export(ledger, tmp_path / f"book{ending}", nodes=["P0002"])
    read = pd.read_csv(path) if ending == ".csv" else pd.read_parquet(path)
    assert set(read["node"]) == {"P0002"}
