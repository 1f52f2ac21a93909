"""The demo swarm from its start to its workbook, as a user types it, in text and as JSON."""

import csv
import hashlib
import json
import math
import subprocess
import sys

import openpyxl
import pandas as pd
import pytest
from click.testing import CliRunner

from farhold.interfaces.cli import cli
from farhold.interfaces.cli.text import CAUTION

G0 = 9.80665


def call(*words, code=0):
    """Run one command at 80 columns and return what it printed on standard output."""
    done = CliRunner(env={"COLUMNS": "80"}).invoke(cli, [str(word) for word in words])
    assert done.exit_code == code, done.output
    return done


def document(*words, code=0):
    done = call(*words, "--json", "--quiet", code=code)
    assert done.stderr == ""
    return json.loads(done.stdout)


def digests(folder):
    files = (path for path in sorted(folder.rglob("*")) if path.is_file())
    return {str(path.relative_to(folder)): hashlib.sha256(path.read_bytes()).hexdigest() for path in files}


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    """Goes the whole way once; keeps every document by the name of its command."""
    home = tmp_path_factory.mktemp("run")
    case, book, kept = home / "marram" / "marram.toml", home / "book", home / "q"
    steps = {"home": home, "case": case, "book": book, "kept": kept}
    steps["start"] = call("start", home / "marram", "--json")
    steps["check"] = document("check", case)
    steps["quote"] = document("quote", case, "--to", "wide", "--over", "30 d", "--horizon", "120 d", "-o", kept)
    steps["create"] = document("ledger", "create", book, case)
    steps["post"] = document("post", kept, "--ledger", book)
    steps["balances"] = document("ledger", "balances", book)
    steps["statement"] = document("ledger", "statement", book, "P0007")
    steps["audit"] = document("ledger", "audit", book)
    for ending in ("xlsx", "csv", "parquet"):
        steps[ending] = home / f"book.{ending}"
        document("ledger", "export", book, "-o", steps[ending])
    return steps


@pytest.mark.parametrize("kind", ["check", "quote", "create", "post", "balances", "statement", "audit"])
def test_document_names_its_kind(run, kind):
    assert (run[kind]["kind"], run[kind]["schema"]) == (kind, 1)


def test_demo_change_is_proven_affordable_and_hits_every_slot(run):
    quote = run["quote"]
    assert quote["nodes"] == 976
    assert quote["affordable"] is True
    assert quote["assignment"]["proven"] is True
    assert quote["assignment"]["gap_relative"] < 1e-9
    assert quote["targeting"]["max_miss_m"] < 0.1


def test_documents_hang_together_by_their_digests(run):
    assert run["quote"]["provenance"]["ledger_head"] == run["create"]["ledger_head"]
    assert run["post"]["quote"] == run["quote"]["quote"]
    assert run["post"]["ledger_head"] != run["create"]["ledger_head"]
    heads = {run[kind]["ledger_head"] for kind in ("post", "balances", "statement", "audit")}
    assert heads == {run["post"]["ledger_head"]}
    assert json.loads((run["kept"] / "quote.json").read_text())["quote"] == run["quote"]["quote"]


def test_balances_fall_by_what_the_quote_said(run):
    rows = run["balances"]["rows"]
    assert len(rows) == 976
    assert math.fsum(row["spent_kg"] for row in rows) == pytest.approx(
        run["quote"]["propellant"]["total_kg"], rel=1e-9
    )
    assert min(row["life_years"] for row in rows) == pytest.approx(
        run["quote"]["life_after"]["min_years"], rel=1e-9
    )


def test_statement_runs_by_the_rocket_equation(run):
    rows = run["statement"]["rows"]
    assert [row["cause"] for row in rows] == ["load", "reshape", "reshape"]
    for_row = [row["mass_before_kg"] * math.exp(-row["dv_m_s"] / (row["isp_s"] * G0)) for row in rows[1:]]
    assert [row["mass_after_kg"] for row in rows[1:]] == pytest.approx(for_row, rel=1e-13)
    assert [row["epoch_tdb"][:10] for row in rows] == ["2035-03-20", "2035-03-20", "2035-04-19"]


def test_audit_finds_the_book_sound(run):
    assert {row["result"] for row in run["audit"]["rows"]} == {"ok"}


def test_workbook_has_a_row_for_every_node(run):
    pages = openpyxl.load_workbook(run["xlsx"], read_only=True)
    assert {"Summary", "Balances"} <= set(pages.sheetnames)


def test_tables_hold_every_entry(run):
    frame = pd.read_parquet(run["parquet"])
    with run["csv"].open(newline="") as lines:
        rows = list(csv.DictReader(lines))
    assert len(frame) == len(rows) == 976 + 2 * run["quote"]["moved"]
    assert [row["node"] for row in rows] == frame["node"].tolist()


def texts(run, tmp_path):
    kept = tmp_path / "q"
    return {
        "start": ["start", tmp_path / "new"],
        "check": ["check", run["case"]],
        "quote": ["quote", run["case"], "--to", "wide", "--over", "30 d", "-o", kept],
        "create": ["ledger", "create", tmp_path / "book", run["case"]],
        "post": ["post", kept, "--ledger", tmp_path / "book"],
        "balances": ["ledger", "balances", tmp_path / "book"],
        "statement": ["ledger", "statement", tmp_path / "book", "H03"],
        "audit": ["ledger", "audit", tmp_path / "book"],
    }


def test_text_of_every_step_fits_80_columns(run, tmp_path):
    printed = {name: call(*words, "--quiet").stdout for name, words in texts(run, tmp_path).items()}
    # a folder's path is one word and cannot be folded
    wide = [
        line
        for text in printed.values()
        for line in text.splitlines()
        if len(line) > 80 and str(tmp_path) not in line
    ]
    assert wide == []
    assert all(printed.values())
    flat = " ".join(printed["quote"].split())
    assert "huddle to wide" in flat
    assert CAUTION in flat


FAULTS = {
    "unknown formation": (2, ["quote", "{case}", "--to", "wid", "--over", "30 d"]),
    "no unit": (2, ["quote", "{case}", "--to", "wide", "--over", "30"]),
    "missing case": (2, ["check", "{home}/none.toml"]),
    "existing output": (2, ["quote", "{case}", "--to", "wide", "--over", "30 d", "-o", "{kept}"]),
    "existing ledger": (2, ["ledger", "create", "{book}", "{case}"]),
    "second posting": (4, ["post", "{kept}", "--ledger", "{book}"]),
    "before the ledger": (
        2,
        ["quote", "{case}", "--to", "huddle", "--over", "30 d", "--ledger", "{book}", "--depart", "2035-03-21"],
    ),
    "unknown node": (2, ["ledger", "statement", "{book}", "P9999"]),
    "singular": (5, ["quote", "{case}", "--to", "wide", "--over", "182.6 d", "-o", "{home}/singular"]),
}


@pytest.mark.parametrize(("code", "words"), FAULTS.values(), ids=FAULTS)
def test_fault_is_one_document_with_its_exit_code_and_writes_nothing(run, code, words):
    before = digests(run["home"])
    fault = document(*(word.format(**run) for word in words), code=code)
    assert (fault["kind"], fault["exit"]) == ("fault", code)
    assert all(set(one) == {"where", "what", "allowed", "hint"} for one in fault["faults"])
    assert all(one["what"] for one in fault["faults"])
    assert digests(run["home"]) == before


@pytest.mark.parametrize(("code", "words"), FAULTS.values(), ids=FAULTS)
def test_fault_in_text_is_one_sentence_on_standard_error(run, code, words):
    done = call(*(word.format(**run) for word in words), "--quiet", code=code)
    assert done.stdout == ""
    assert len(done.stderr.strip().splitlines()) == 1
    assert "Traceback" not in done.stderr


def test_singular_quote_names_every_node_in_json(run):
    words = ["quote", str(run["case"]), "--to", "wide", "--over", "365.25 d"]
    (fault,) = document(*words, code=5)["faults"]
    named = fault["what"].split("nodes: ")[1].split(", ")
    assert len(named) == 976
    assert {"H01", "P0960"} <= set(named)


def test_tank_too_small_exits_3_is_saved_and_not_posted(run, tmp_path):
    poor = tmp_path / "marram"
    call("start", poor)
    case = poor / "marram.toml"
    case.write_text(case.read_text().replace('propellant = "0.30 kg"', 'propellant = "12 g"'))
    quote = document("quote", case, "--to", "wide", "--over", "30 d", "-o", tmp_path / "q", code=3)
    assert quote["affordable"] is False
    assert quote["cannot_afford"]
    document("ledger", "create", tmp_path / "book", case)
    before = digests(tmp_path)
    fault = document("post", tmp_path / "q", "--ledger", tmp_path / "book", code=3)
    assert fault["exit"] == 3
    assert digests(tmp_path) == before


def test_edited_quote_is_refused_with_one_sentence(run, tmp_path):
    folder = tmp_path / "q"
    folder.mkdir()
    for path in run["kept"].iterdir():
        (folder / path.name).write_bytes(path.read_bytes())
    text = (folder / "quote.json").read_text()
    (folder / "quote.json").write_text(text.replace('"over_days": 30.0', '"over_days": 31.0'))
    fault = document("post", folder, "--ledger", run["book"], code=2)
    assert "does not match its digest" in fault["faults"][0]["what"]


def test_damaged_ledger_fails_its_audit(run, tmp_path):
    book = tmp_path / "book"
    book.mkdir()
    for path in run["book"].iterdir():
        (book / path.name).write_bytes(path.read_bytes())
    segment = next(path for path in sorted(book.iterdir()) if path.name.endswith("entries.parquet"))
    content = bytearray(segment.read_bytes())
    content[len(content) // 2] ^= 1
    segment.write_bytes(bytes(content))
    fault = document("ledger", "audit", book, code=4)
    assert segment.name in json.dumps(fault)


def test_module_runs_as_a_program(run):
    done = subprocess.run(
        [sys.executable, "-m", "farhold", "ledger", "statement", str(run["book"]), "P0001", "--json"],
        capture_output=True,
        text=True,
        check=True,
    )
    assert json.loads(done.stdout)["kind"] == "statement"
    assert done.stderr == ""
