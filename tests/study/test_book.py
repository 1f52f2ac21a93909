"""Quotes in the book: what they change, and what the ledger refuses."""

import hashlib

import numpy as np
import pytest

import farhold as fh
from farhold.ledger.entries import NewEntries
from farhold.ledger.roster import RosterChange
from farhold.study.book import PostResult

G0 = 9.80665
ISP_S = {"probe": 65.0 * 0.9, "hub": 210.0}


@pytest.fixture
def ledger(tern, tmp_path):
    return fh.Ledger.create(tmp_path / "book", tern)


@pytest.fixture
def quote(tern):
    return fh.quote(tern, to="far", over_days=30.0)


def files(ledger):
    paths = sorted(path for path in ledger.path.rglob("*") if path.is_file())
    return {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in paths}


def refused(ledger, quote, exit_code, **options):
    before = files(ledger)
    with pytest.raises(fh.FarholdError) as caught:
        ledger.post(quote, **options)
    assert caught.value.exit_code == exit_code
    assert files(ledger) == before
    return str(caught.value)


def test_fresh_ledger_holds_the_swarm_as_loaded(ledger, tern):
    balances, roster = ledger.balances(), ledger.roster()
    assert balances["node"].tolist() == tern.nodes.node.tolist()
    np.testing.assert_array_equal(balances["mass_kg"], tern.nodes.mass_kg)
    assert not balances[["spent_kg", "margin_kg"]].to_numpy().any()
    assert set(roster["formation"]) == {"nearby"}
    assert ledger.title == tern.title
    assert set(ledger.entries()["cause"]) == {"load"}


def test_fresh_ledger_already_knows_the_price_of_holding(ledger, quote):
    life = ledger.balances()["life_years"]
    assert np.isfinite(life).all()
    assert (life < 100.0).any()
    # the farther slots of the quote's end shorten it
    ledger.post(quote)
    assert (ledger.balances()["life_years"] < life).all()


def test_posting_lowers_the_balances_by_the_rocket_equation(ledger, quote):
    before = ledger.balances().set_index("node")
    done = ledger.post(quote)
    after = ledger.balances().set_index("node")
    dv = quote.nodes.set_index("node")["dv_total_m_s"]
    isp = before["class"].map(ISP_S).to_numpy(dtype=float)
    expected = before["mass_kg"] * np.exp(-dv / (isp * G0))
    np.testing.assert_allclose(after["mass_kg"], expected, rtol=1e-12)
    np.testing.assert_allclose(after["spent_kg"], before["mass_kg"] - expected, rtol=1e-9)
    np.testing.assert_allclose(after["margin_kg"].sum(), quote.summary["propellant"]["margin_kg"], rtol=1e-12)
    assert isinstance(done, PostResult)
    assert done.summary == {
        "kind": "post",
        "schema": 1,
        "quote": quote.summary["quote"],
        "ledger_head": ledger.head,
        "entries": 24,
        "nodes": 12,
    }


def test_balances_after_posting_agree_with_what_the_quote_said(ledger, quote):
    ledger.post(quote)
    balances = ledger.balances().set_index("node")
    nodes = quote.nodes.set_index("node")
    np.testing.assert_allclose(balances["usable_kg"], nodes["usable_kg"], rtol=1e-10)
    np.testing.assert_allclose(balances["life_years"], nodes["life_years"], rtol=1e-9)
    assert balances["slot"].tolist() == nodes["slot"].tolist()
    assert set(balances["formation"]) == {"far"}


def test_posting_enters_departure_and_arrival_of_each_node(ledger, quote):
    ledger.post(quote)
    lines = ledger.statement("P03")
    assert lines["cause"].tolist() == ["load", "reshape", "reshape"]
    assert lines["note"].tolist()[1:] == ["departure", "arrival"]
    assert set(lines["source"].tolist()[1:]) == {quote.summary["quote"]}
    mine = quote.impulses[quote.impulses["node"] == "P03"]
    np.testing.assert_allclose(
        lines["dv_m_s"].to_numpy()[1:],
        np.linalg.norm(mine[["dv_x_m_s", "dv_y_m_s", "dv_z_m_s"]].to_numpy(), axis=1),
        rtol=1e-12,
    )
    assert lines["epoch_tdb"].tolist()[1:] == mine["epoch_tdb"].tolist()
    assert (lines["mass_before_kg"].to_numpy()[1:] == lines["mass_after_kg"].to_numpy()[:-1]).all()


def test_posted_ledger_passes_its_audit(ledger, quote):
    ledger.post(quote)
    assert set(ledger.audit()["result"]) == {"ok"}


def test_roster_dates_the_new_slots_from_the_arrival(ledger, quote):
    ledger.post(quote)
    assert set(ledger.roster()["since"].astype(str)) == {"2035-04-19"}


def test_second_posting_is_refused(ledger, quote):
    ledger.post(quote)
    text = refused(ledger, quote, 4)
    assert text == (
        f"{ledger.path}: quote {quote.summary['quote'][:12]} was posted already, in commit 1 (price a new quote)"
    )


def test_stale_quote_is_refused_and_names_the_nodes_that_changed(tern, ledger, quote):
    # a rival for the probes alone: the hubs stay as they were
    rival = fh.quote(tern, to="six", over_days=20.0)
    ledger.post(rival)
    moved = sorted(rival.nodes["node"][rival.nodes["impulses"] > 0])
    text = refused(ledger, quote, 4)
    assert text == (
        f"{ledger.path}: 6 node(s) of this quote changed since it was priced: {', '.join(moved)} "
        "(--requote prices it again on the present state)"
    )


def test_requote_prices_on_the_present_state_and_is_entered(tern, ledger, quote):
    ledger.post(fh.quote(tern, to="six", over_days=20.0))
    done = ledger.post(quote, requote=True)
    assert done.summary["quote"] != quote.summary["quote"]
    # not before the rival's arrival
    last = ledger.entries()["epoch_tdb"].max()
    assert str(last) == "2035-05-09 00:00:00"
    assert set(ledger.roster()["formation"]) == {"far"}
    assert set(ledger.audit()["result"]) == {"ok"}


def test_requote_of_an_unchanged_ledger_is_the_same_quote(ledger, quote):
    assert ledger.post(quote, requote=True).summary["quote"] == quote.summary["quote"]


def test_requote_without_its_case_is_refused(make_case, tmp_path):
    case = make_case()
    ledger, quote = fh.Ledger.create(tmp_path / "book", case), fh.quote(case, to="far", over_days=30.0)
    case.path.unlink()
    assert str(case.path) in refused(ledger, quote, 2, requote=True)


def test_quote_finds_its_case_from_another_folder(write_case, tmp_path, monkeypatch):
    write_case()
    monkeypatch.chdir(tmp_path)
    case = fh.load("tern.toml")
    ledger, quote = fh.Ledger.create("book", case), fh.quote(case, to="far", over_days=30.0)
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    assert ledger.post(quote, requote=True).summary["quote"] == quote.summary["quote"]


def test_ledger_of_another_case_is_refused(make_case, quote, tmp_path):
    other = make_case({'propellant = "0.30 kg"': 'propellant = "0.29 kg"'})
    ledger = fh.Ledger.create(tmp_path / "other", other)
    text = refused(ledger, quote, 4)
    head = quote.summary["provenance"]["ledger_head"][:12]
    assert text == (
        f"{ledger.path}: this quote was priced on another ledger: its head {head} is not in this one "
        "(price it again with --ledger, or post it with --requote)"
    )


def test_quote_that_some_node_cannot_afford_is_refused(make_case, tmp_path):
    case = make_case({'propellant = "0.30 kg"': 'propellant = "9 g"'})
    ledger, quote = fh.Ledger.create(tmp_path / "book", case), fh.quote(case, to="far", over_days=30.0)
    names = quote.summary["cannot_afford"]
    text = refused(ledger, quote, 3)
    assert len(names) > 1
    assert f"{len(names)} nodes cannot afford it: {', '.join(names)}" in text


def test_planned_margins_are_held_back_in_the_next_quote(tern, ledger, quote):
    ledger.post(quote)
    balances = ledger.balances().set_index("node")
    back = fh.quote(tern, to="nearby", over_days=30.0, ledger=ledger.path)
    nodes = back.nodes.set_index("node")
    np.testing.assert_allclose(nodes["usable_kg"] + nodes["propellant_kg"], balances["usable_kg"], rtol=1e-10)
    free = nodes["usable_kg"] - nodes["margin_kg"] - balances["margin_kg"]
    assert (free >= 0.0).all() == back.affordable


def test_planned_margins_decide_who_can_afford_the_next_quote(make_case, tmp_path):
    def twice(kilograms, name):
        case = make_case({'propellant = "0.30 kg"': f'propellant = "{kilograms!r} kg"'}, name=f"{name}.toml")
        ledger = fh.Ledger.create(tmp_path / name, case)
        ledger.post(fh.quote(case, to="far", over_days=30.0, ledger=ledger.path))
        planned = ledger.balances().set_index("node")["margin_kg"]
        back = fh.quote(case, to="nearby", over_days=30.0, ledger=ledger.path)
        nodes = back.nodes[back.nodes["class"] == "probe"].set_index("node")
        return nodes["usable_kg"] - nodes["margin_kg"], planned[nodes.index], back

    kilograms = 0.30
    for step in range(3):
        spare, planned, _ = twice(kilograms, f"s{step}")
        # enough for the way back and its own margin, but not for what is planned already
        kilograms -= float(spare.min() - 0.5 * planned.min())
    spare, planned, back = twice(kilograms, "last")
    assert (spare > 0.0).all()
    assert back.affordable is False
    assert back.summary["cannot_afford"] == spare.index[spare < planned].tolist()


def test_quote_rests_on_the_nodes_that_stay_as_well(tern, ledger):
    quote = fh.quote(tern, to="six", over_days=30.0)
    assert quote.nodes.set_index("node").loc["H02", "impulses"] == 0
    ledger._book.commit(NewEntries.none(), RosterChange.of(["H02"], tern.epoch, status="lost"))
    assert "1 node(s) of this quote changed since it was priced: H02" in refused(ledger, quote, 4)


def test_quote_that_moves_nobody_is_not_entered(tern, ledger):
    text = refused(ledger, fh.quote(tern, to="nearby", over_days=30.0), 4)
    assert "nothing is to be entered: every node already sits in its slot of 'nearby'" in text


def test_correction_gives_the_propellant_back(ledger, quote):
    ledger.post(quote)
    line = ledger.statement("P05").iloc[-1]
    head = ledger.correct(int(line["seq"]), "typed twice")
    last = ledger.statement("P05").iloc[-1]
    assert head == ledger.head
    assert (last["cause"], last["note"]) == ("correction", "typed twice")
    assert last["mass_after_kg"] == pytest.approx(line["mass_before_kg"], rel=1e-14)
    assert set(ledger.audit()["result"]) == {"ok"}


def test_ledger_opened_again_has_the_same_head(ledger, quote):
    ledger.post(quote)
    again = fh.Ledger.open(ledger.path)
    assert again.head == ledger.head
    assert again.balances().equals(ledger.balances())


def test_ledger_is_not_created_over_something(tern, ledger):
    before = files(ledger)
    with pytest.raises(fh.OutputExistsError):
        fh.Ledger.create(ledger.path, tern)
    assert files(ledger) == before


def test_case_with_a_node_without_a_place_makes_no_ledger(make_case, tmp_path):
    case = make_case({'prefix = "P"': 'prefix = "P"\n[[swarm]]\nclass = "probe"\ncount = 2\nprefix = "X"'})
    with pytest.raises(fh.CaseError, match="X01"):
        fh.Ledger.create(tmp_path / "book", case)
    assert not (tmp_path / "book").exists()
