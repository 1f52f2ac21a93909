"""One swarm from its case to its workbook, through the real study floor."""

import hashlib
import json

import openpyxl
import pytest
from click.testing import CliRunner

from farhold.interfaces.cli import cli

CASE = """
schema = 1
title = "=Tern: [b]a trial[/b]"
epoch = "2035-03-20T00:00:00"
[reference]
point = "L4"
[class.probe]
dry_mass = "9.4 kg"
propellant = "{propellant}"
specific_impulse = "65 s"
thrust = "20 mN"
impulse_bit = "0.5 mN s"
solar_area = "0.09 m2"
solar_coefficient = 1.3
[[swarm]]
class = "probe"
count = 6
prefix = "P"
[formation.near]
rule = "inertial"
[[formation.near.slots]]
class = "probe"
shape = "ring"
radius = "100 km"
count = 6
[formation.far]
rule = "inertial"
[[formation.far.slots]]
class = "probe"
shape = "ring"
radius = "700 km"
count = 6
"""


@pytest.fixture
def swarm(tmp_path):
    path = tmp_path / "tern.toml"
    path.write_text(CASE.format(propellant="0.30 kg"))
    return path


def run(*words, code=0):
    done = CliRunner().invoke(cli, [*map(str, words), "--json"])
    assert done.exit_code == code, done.output
    return json.loads(done.stdout)


def quoted(swarm, *more, code=0):
    return run("quote", swarm, "--to", "far", "--over", "30 d", "--quiet", *more, code=code)


def digests(folder):
    files = (path for path in sorted(folder.rglob("*")) if path.is_file())
    return {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in files}


def test_quote_is_posted_read_audited_and_exported(swarm, tmp_path):
    book, kept, sheet = tmp_path / "book", tmp_path / "q", tmp_path / "book.xlsx"
    quote = quoted(swarm, "-o", kept)
    opened = run("ledger", "create", book, swarm)
    assert opened["ledger_head"] == quote["provenance"]["ledger_head"]
    posted = run("post", kept, "--ledger", book)
    assert (posted["quote"], posted["nodes"]) == (quote["quote"], 6)
    balances = run("ledger", "balances", book)
    assert balances["ledger_head"] == posted["ledger_head"]
    spent = sum(row["spent_kg"] for row in balances["rows"])
    assert spent == pytest.approx(quote["propellant"]["total_kg"], rel=1e-9)
    assert [row["cause"] for row in run("ledger", "statement", book, "P01")["rows"]] == [
        "load",
        "reshape",
        "reshape",
    ]
    assert {row["result"] for row in run("ledger", "audit", book)["rows"]} == {"ok"}
    run("ledger", "export", book, "-o", sheet)
    pages = openpyxl.load_workbook(sheet, data_only=True)
    assert pages["Summary"]["A1"].value == "=Tern: [b]a trial[/b]"
    usable = [row[11].value for row in pages["Balances"].iter_rows(min_row=2)]
    assert usable == pytest.approx([row["usable_kg"] for row in balances["rows"]], abs=1e-12)


def test_second_posting_is_refused_and_changes_nothing(swarm, tmp_path):
    book, kept = tmp_path / "book", tmp_path / "q"
    quoted(swarm, "-o", kept)
    run("ledger", "create", book, swarm)
    run("post", kept, "--ledger", book)
    before = digests(book)
    assert run("post", kept, "--ledger", book, code=4)["exit"] == 4
    assert digests(book) == before


def test_change_that_a_node_cannot_afford_is_saved_and_not_posted(swarm, tmp_path):
    swarm.write_text(CASE.format(propellant="1 g"))
    book, kept = tmp_path / "book", tmp_path / "q"
    quote = quoted(swarm, "-o", kept, code=3)
    assert quote["affordable"] is False
    assert (kept / "quote.json").exists()
    run("ledger", "create", book, swarm)
    before = digests(book)
    assert run("post", kept, "--ledger", book, code=3)["exit"] == 3
    assert digests(book) == before


def test_singular_time_exits_5_and_writes_nothing(swarm, tmp_path):
    before = digests(tmp_path)
    fault = run("quote", swarm, "--to", "far", "--over", "365.25 d", "--quiet", "-o", tmp_path / "q", code=5)
    assert fault["kind"] == "fault"
    assert digests(tmp_path) == before


def test_correction_gives_back_what_the_burn_took(swarm, tmp_path):
    book, kept = tmp_path / "book", tmp_path / "q"
    quoted(swarm, "-o", kept)
    run("ledger", "create", book, swarm)
    run("post", kept, "--ledger", book)
    last = run("ledger", "statement", book, "P03")["rows"][-1]
    run("ledger", "correct", book, last["seq"], "--why", "@typed twice")
    after = run("ledger", "statement", book, "P03")["rows"][-1]
    assert after["mass_after_kg"] == pytest.approx(last["mass_before_kg"], rel=1e-14)
    assert after["note"] == "@typed twice"
