"""Quotes on disk: the same when read back, whole or refused with one sentence."""

import json

import pandas as pd
import pytest

import farhold as fh

FILES = ["impulses.parquet", "nodes.parquet", "quote.json", "request.json"]


@pytest.fixture(scope="module")
def quote(tern):
    return fh.quote(tern, to="far", over_days=30.0)


@pytest.fixture
def kept(quote, tmp_path):
    return quote.save(tmp_path / "q")


def refused(folder):
    with pytest.raises(fh.CaseError) as caught:
        fh.load_quote(folder)
    assert caught.value.exit_code == 2
    text = str(caught.value)
    assert "\n" not in text
    return text


def test_saved_quote_reads_back_the_same(quote, kept):
    again = fh.load_quote(kept)
    assert again.summary == quote.summary
    assert again.request == quote.request
    assert again.notes == quote.notes
    pd.testing.assert_frame_equal(again.nodes, quote.nodes, check_dtype=False)
    pd.testing.assert_frame_equal(again.impulses, quote.impulses, check_dtype=False)
    assert sorted(path.name for path in kept.iterdir()) == FILES


def test_quote_that_moves_nobody_reads_back(tern, tmp_path):
    quote = fh.quote(tern, to="nearby", over_days=30.0)
    assert fh.load_quote(quote.save(tmp_path / "q")).summary == quote.summary


def test_saved_tables_have_the_columns_of_the_design(kept):
    nodes, impulses = (pd.read_parquet(kept / f"{name}.parquet") for name in ("nodes", "impulses"))
    asked = "node class slot from_r_km from_t_km from_n_km to_r_km to_t_km to_n_km dv_total_m_s floor_m_s impulses"
    assert {*asked.split(), "propellant_kg", "usable_kg", "life_years"} <= set(nodes.columns)
    asked = "node epoch_tdb dv_r_m_s dv_t_m_s dv_n_m_s dv_x_m_s dv_y_m_s dv_z_m_s burn_s"
    assert set(asked.split()) <= set(impulses.columns)
    assert str(impulses["epoch_tdb"].dtype) == "datetime64[ns]"


def test_quote_does_not_overwrite_without_force(quote, kept):
    before = {path.name: path.read_bytes() for path in kept.iterdir()}
    with pytest.raises(fh.OutputExistsError) as caught:
        quote.save(kept)
    assert caught.value.exit_code == 2
    assert {path.name: path.read_bytes() for path in kept.iterdir()} == before


def test_quote_replaces_a_quote_with_force(tern, kept):
    other = fh.quote(tern, to="still", over_days=30.0)
    other.save(kept, force=True)
    assert fh.load_quote(kept).summary["to"] == "still"


def test_quote_replaces_nothing_else_even_with_force(quote, tmp_path):
    (tmp_path / "notes").mkdir()
    (tmp_path / "notes" / "keep.txt").write_text("mine")
    with pytest.raises(fh.FarholdError):
        quote.save(tmp_path / "notes", force=True)
    assert (tmp_path / "notes" / "keep.txt").read_text() == "mine"


@pytest.mark.parametrize("name", FILES)
def test_missing_file_is_named(kept, name):
    (kept / name).unlink()
    assert refused(kept) == f"{kept / name}: the file is missing (price the quote again)"


@pytest.mark.parametrize("name", ["impulses.parquet", "nodes.parquet"])
@pytest.mark.parametrize("size", [0, 10, 800])
def test_truncated_table_is_named(kept, name, size):
    (kept / name).write_bytes((kept / name).read_bytes()[:size])
    assert refused(kept) == f"{kept / name}: unreadable or truncated Parquet (price the quote again)"


@pytest.mark.parametrize("name", ["quote.json", "request.json"])
def test_truncated_document_is_named(kept, name):
    (kept / name).write_bytes((kept / name).read_bytes()[:40])
    assert refused(kept).startswith(f"{kept / name}: unreadable: ")


@pytest.mark.parametrize("name", ["quote.json", "request.json"])
def test_document_of_another_kind_is_refused(kept, name):
    (kept / name).write_text("[1, 2]")
    assert refused(kept) == f"{kept / name}: not a JSON document of a quote (price the quote again)"


def edit(path, change):
    document = json.loads(path.read_text())
    change(document)
    path.write_text(json.dumps(document))


EDITS = {
    "price": lambda d: d["dv"].update(total_m_s=0.1),
    "affordable": lambda d: d.update(affordable=not d["affordable"]),
    "head": lambda d: d["provenance"].update(ledger_head="0" * 64),
    "target": lambda d: d.update(to="still"),
    "digest": lambda d: d.update(quote="0" * 64),
    "field": lambda d: d.pop("life_after"),
}


@pytest.mark.parametrize("change", EDITS.values(), ids=EDITS)
def test_edited_document_is_refused(kept, change):
    edit(kept / "quote.json", change)
    assert refused(kept) == (
        f"{kept}: the quote's content does not match its digest: it was changed (price it again)"
    )


@pytest.mark.parametrize("name", ["nodes", "impulses"])
def test_edited_table_is_refused(kept, name):
    path = kept / f"{name}.parquet"
    frame = pd.read_parquet(path)
    frame.loc[0, "propellant_kg"] *= 0.5
    frame.to_parquet(path, index=False)
    assert refused(kept).endswith("does not match its digest: it was changed (price it again)")


def test_edited_seconds_do_not_matter(kept, quote):
    edit(kept / "quote.json", lambda d: d["seconds"].update(total=1e9))
    assert fh.load_quote(kept).summary["quote"] == quote.summary["quote"]


def test_request_without_what_was_asked_is_refused(kept):
    edit(kept / "request.json", lambda d: (d.pop("to"), d.pop("case_path")))
    assert refused(kept) == f"{kept / 'request.json'}: lacks case_path, to (price the quote again)"


@pytest.mark.parametrize("schema", [0, 2, None])
def test_quote_of_another_schema_is_refused(kept, schema):
    edit(kept / "quote.json", lambda d: d.update(schema=schema))
    assert refused(kept) == (
        f"{kept / 'quote.json'}: this is not a quote of schema 1 (allowed: a quote of this version)"
    )


def test_folder_that_is_not_there_is_refused(tmp_path):
    assert refused(tmp_path / "none") == (
        f"{tmp_path / 'none'}: there is no such folder (allowed: a folder written by farhold quote ... -o DIR)"
    )


def test_file_in_place_of_a_folder_is_refused(kept):
    assert "this is a file, not the folder of a quote" in refused(kept / "quote.json")
