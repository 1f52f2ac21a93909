"""The workbook: formulas with their values, texts that stay texts, and tanks that follow a change."""

import math
import os
import shutil
import subprocess

import openpyxl
import pytest

from farhold.interfaces.export import export, workbook

G0 = 9.80665
OFFICE = shutil.which("soffice") or shutil.which("libreoffice")


@pytest.fixture
def path(ledger, tmp_path):
    return export(ledger, tmp_path / "book.xlsx")


def sheet_rows(path, sheet, values):
    book = openpyxl.load_workbook(path, data_only=values)
    heads, *rows = [[cell.value for cell in row] for row in book[sheet].iter_rows()]
    return [dict(zip(heads, row, strict=True)) for row in rows]


def recalculated(path, folder):
    """Have an office program compute every formula anew; openpyxl drops the values that we wrote."""
    if OFFICE is None:
        if os.environ.get("FARHOLD_VIEWERS") == "required":
            pytest.fail("FARHOLD_VIEWERS=required, and no soffice is on the PATH")
        pytest.skip("no soffice on the PATH to compute the sheet again")
    target = folder / "again"
    command = [
        OFFICE,
        f"-env:UserInstallation=file://{folder / 'profile'}",
        "--headless",
        "--convert-to",
        "xlsx",
        "--outdir",
        str(target),
        str(path),
    ]
    subprocess.run(command, check=True, capture_output=True, timeout=120)
    return target / path.name


def test_sheets_come_in_reading_order(path):
    assert openpyxl.load_workbook(path).sheetnames == ["Summary", "Balances", "Entries", "Assumptions"]


def test_entries_are_node_major_with_every_column_of_the_ledger(path, ledger):
    rows = sheet_rows(path, "Entries", values=True)
    assert list(rows[0]) == list(ledger.frame.columns)
    assert [row["seq"] for row in rows] == [1, 5, 7, 2, 4, 6, 8, 3]


def test_burn_is_a_formula_of_its_cells(path):
    row = sheet_rows(path, "Entries", values=False)[1]
    assert row["mass_before_kg"] == "=J2"
    assert row["mass_after_kg"] == "=I3*EXP(-G3/(H3*g0_m_s2))"
    assert row["propellant_kg"] == "=I3-J3"


def test_load_is_given_and_leak_follows_the_mass_before_it(path):
    load, _, leak = sheet_rows(path, "Entries", values=False)[:3]
    assert (load["mass_before_kg"], load["mass_after_kg"]) == (46, 48)
    assert (leak["mass_before_kg"], leak["mass_after_kg"]) == ("=J3", "=I4-K4")
    assert leak["propellant_kg"] == pytest.approx(0.001, abs=1e-12)


def test_entry_values_are_those_of_the_ledger(path, ledger):
    expected = ledger.frame.set_index("seq")
    got = sheet_rows(path, "Entries", values=True)
    for_each = [
        (row[name], expected.loc[row["seq"], name])
        for row in got
        for name in ("mass_before_kg", "mass_after_kg", "propellant_kg", "margin_kg", "dv_m_s")
    ]
    assert [pair[0] for pair in for_each] == pytest.approx([pair[1] for pair in for_each], abs=1e-13)


@pytest.mark.parametrize("name", ["spent_kg", "mass_kg", "margin_kg", "usable_kg"])
def test_balance_is_a_formula_with_the_value_of_the_ledger(path, ledger, name):
    assert all(str(row[name]).startswith("=") for row in sheet_rows(path, "Balances", values=False))
    got = [row[name] for row in sheet_rows(path, "Balances", values=True)]
    assert got == pytest.approx(ledger.balances()[name].tolist(), abs=1e-13)


def test_imported_texts_stay_texts(path):
    rows = sheet_rows(path, "Entries", values=False)
    cells = openpyxl.load_workbook(path)["Entries"]["M"]
    assert {row["note"] for row in rows} >= {"=1+1", "@SUM(A1)", "-2 [bold]x[/bold]", "+3", "typed twice"}
    assert {cell.data_type for cell in cells if cell.value} == {"s"}
    assert openpyxl.load_workbook(path)["Assumptions"]["D4"].data_type == "s"


def test_margins_are_cells_with_their_reasons(path):
    rows = {row["name"]: row for row in sheet_rows(path, "Assumptions", values=True)[:5]}
    assert {name: row["value"] for name, row in rows.items()} == {
        "g0_m_s2": G0,
        "residual_share": 0.02,
        "contingency_m_s": 0.2,
        "manoeuvre_share": 0.05,
        "attitude_share": 1.0,
    }
    assert rows["residual_share"]["why"] == "propellant that cannot be drawn"
    assert rows["contingency_m_s"]["why"] == "=HYPERLINK(1)"


def test_summary_says_head_class_totals_and_the_caution(path, ledger):
    cells = [
        [cell.value for cell in row] for row in openpyxl.load_workbook(path, data_only=True)["Summary"].iter_rows()
    ]
    flat = [value for row in cells for value in row]
    assert flat[0] == ledger.title
    assert ledger.head in flat
    assert workbook.CAUTION in flat
    probe = next(row for row in cells if row[0] == "probe")
    assert probe[1:3] == [2, pytest.approx(0.6)]


def test_nodes_filter_entries_and_balances(ledger, tmp_path):
    path = export(ledger, tmp_path / "two.xlsx", nodes=["P0002", "H01"])
    assert [row["node"] for row in sheet_rows(path, "Balances", values=True)] == ["H01", "P0002"]
    assert {row["node"] for row in sheet_rows(path, "Entries", values=True)} == {"H01", "P0002"}
    assert openpyxl.load_workbook(path)["Summary"]["B3"].value == "2 of 3"


def test_many_entries_are_values_split_over_sheets(ledger, tmp_path, monkeypatch):
    monkeypatch.setattr(workbook, "LIVE_ROWS", 4)
    monkeypatch.setattr(workbook, "SHEET_ROWS", 6)
    path = export(ledger, tmp_path / "large.xlsx")
    assert openpyxl.load_workbook(path).sheetnames[2:4] == ["Entries", "Entries 2"]
    rows = sheet_rows(path, "Entries", values=False) + sheet_rows(path, "Entries 2", values=False)
    assert [row["mass_after_kg"] for row in rows] == pytest.approx(
        ledger.frame.set_index("seq")["mass_after_kg"][[row["seq"] for row in rows]].tolist(), abs=1e-13
    )
    assert [row["usable_kg"] for row in sheet_rows(path, "Balances", values=False)] == pytest.approx(
        ledger.balances()["usable_kg"].tolist(), abs=1e-13
    )


def test_office_program_computes_the_same_balances(path, ledger, tmp_path):
    bare = tmp_path / "bare.xlsx"
    openpyxl.load_workbook(path).save(bare)
    rows = sheet_rows(recalculated(bare, tmp_path), "Balances", values=True)
    for_each = ["spent_kg", "mass_kg", "margin_kg", "usable_kg"]
    got = [row[name] for row in rows for name in for_each]
    assert got == pytest.approx(ledger.balances()[for_each].to_numpy().ravel().tolist(), abs=1e-9)


def test_changed_burn_and_margin_move_the_tank_that_depends_on_them(path, tmp_path):
    book = openpyxl.load_workbook(path)
    book["Entries"]["G3"] = 1.5
    book["Assumptions"]["B3"] = 0.10
    changed = tmp_path / "changed.xlsx"
    book.save(changed)
    hub = sheet_rows(recalculated(changed, tmp_path), "Balances", values=True)[0]
    mass = 48 * math.exp(-1.5 / (210 * G0)) - 0.001
    reserve = 0.2 + 46.2 * math.expm1(0.2 / (210 * G0))
    assert hub["mass_kg"] == pytest.approx(mass, abs=1e-9)
    assert hub["spent_kg"] == pytest.approx(48 - mass, abs=1e-9)
    assert hub["usable_kg"] == pytest.approx(mass - 46 - reserve, abs=1e-9)
