import math

import numpy as np
import pytest

from farhold.domain.epoch import YEAR_S
from farhold.errors import DomainError, FarholdError, LedgerError, OutputExistsError
from farhold.files import FolderLock
from farhold.ledger import Book, NewEntries, RosterChange, opening
from farhold.ledger.audit import audit

G0 = 9.80665
COLUMNS = [
    "seq",
    "node",
    "class",
    "epoch_tdb",
    "cause",
    "source",
    "dv_m_s",
    "isp_s",
    "mass_before_kg",
    "mass_after_kg",
    "propellant_kg",
    "margin_kg",
    "note",
]
BALANCE_COLUMNS = [
    "node",
    "class",
    "status",
    "formation",
    "slot",
    "loaded_kg",
    "spent_kg",
    "mass_kg",
    "margin_kg",
    "usable_kg",
    "life_years",
]


def burn(book, node, dv_m_s=1.0, cause="reshape", **more):
    return NewEntries.of(node, book.last_epoch, cause, dv_m_s, **more)


def test_book_opens_with_one_load_per_node(book, swarm):
    entries = book.entries()
    assert list(entries.columns) == COLUMNS
    assert entries["cause"].tolist() == ["load"] * 6
    assert str(entries["epoch_tdb"].dtype) == "datetime64[ns]"
    np.testing.assert_array_equal(entries["mass_after_kg"], swarm.mass_kg)
    np.testing.assert_allclose(-entries["propellant_kg"], swarm.loaded_kg, rtol=1e-14)


def test_balances_at_the_opening_are_the_load(book):
    balances = book.balances()
    assert list(balances.columns) == BALANCE_COLUMNS
    probe = balances[balances["node"] == "P00002"].iloc[0]
    reserve_kg = 0.006 + 9.406 * math.expm1(0.2 / (65.0 * G0))
    assert (probe["spent_kg"], probe["margin_kg"], probe["status"]) == (0.0, 0.0, "active")
    assert probe["usable_kg"] == pytest.approx(0.3 - reserve_kg, rel=1e-12)
    speed_m_s = 65.0 * G0 * math.log(9.7 / (9.7 - probe["usable_kg"]))
    assert probe["life_years"] == pytest.approx(speed_m_s / (1.05 + 0.05 * 2), rel=1e-12)


def test_commit_runs_the_mass_through_the_rocket_equation(book):
    entries = NewEntries.of(
        ["P00003", "H0", "P00003"],
        np.array([20, 10, 10]) * 86_400_000_000_000 + book.last_epoch.ns,
        "reshape",
        [0.5, 1.0, 0.25],
        margin_kg=[0.002, 0.0, 0.001],
    )
    book.commit(entries, demand_m_s_yr=0.5, source="test")
    statement = book.statement("P00003")
    assert statement["dv_m_s"].tolist() == [0.0, 0.25, 0.5]
    assert statement["mass_after_kg"].iloc[-1] == pytest.approx(9.7 * math.exp(-0.75 / (65 * G0)), rel=1e-14)
    hub = book.statement("H0").iloc[-1]
    assert hub["isp_s"] == pytest.approx(210 * 0.94)
    row = book.balances().set_index("node").loc["P00003"]
    assert row["margin_kg"] == pytest.approx(0.003)
    assert row["spent_kg"] == pytest.approx(9.7 - row["mass_kg"], rel=1e-12)
    assert book.state().mass_kg[3] == row["mass_kg"]
    assert book.entries()["seq"].tolist() == list(range(9))


def test_attitude_entries_use_the_attitude_thruster(book):
    book.commit(burn(book, ["H0", "P00002"], 0.1, "attitude"))
    assert book.entries()["isp_s"].tolist()[-2:] == [60.0, 65.0]


def test_leak_takes_its_mass_and_no_speed(book):
    book.commit(burn(book, "P00002", 0.0, "leak", propellant_kg=0.001))
    line = book.statement("P00002").iloc[-1]
    assert line["mass_before_kg"] - line["mass_after_kg"] == pytest.approx(0.001, rel=1e-10)
    assert audit(book.path)["result"].eq("ok").all()


def test_roster_change_shows_in_roster_state_and_balances(book):
    later = book.last_epoch.plus(86400.0)
    change = RosterChange.of(["P00002", "P00003"], later, formation="wide", slot=["W1", "W2"])
    lost = RosterChange.of(["H1"], later, status="lost")
    book.commit(NewEntries.none(), change)
    book.commit(NewEntries.none(), lost)
    state = Book.open(book.path).state()
    assert state.formation.tolist()[2:4] == ["wide", "wide"]
    assert state.since_s.tolist() == [0, 86400, 86400, 86400, 0, 0]
    assert state.alive.tolist() == [True, False, True, True, True, True]
    assert book.roster()["slot"].tolist()[1:4] == ["S1", "W1", "W2"]
    assert book.balances().set_index("node").loc["H1", "life_years"] == 0.0
    assert book.last_epoch == later


def test_state_is_rebuilt_whole_from_the_ledger(book, swarm):
    again = Book.open(book.path).state()
    assert again.classes == swarm.classes
    for name in set(swarm.__dataclass_fields__) - {"classes"}:
        np.testing.assert_array_equal(getattr(again, name), getattr(swarm, name), err_msg=name)


def test_terms_are_read_back_as_they_were(book, swarm, make_terms):
    terms, again = make_terms(swarm), Book.open(book.path).terms
    assert (again.title, again.epoch, again.margins) == (terms.title, terms.epoch, terms.margins)
    assert again.digest() == terms.digest()


def test_demand_is_kept_until_it_is_stated_anew(book):
    book.commit(burn(book, "H0"))
    assert book.demand_m_s_yr().tolist() == [1.0] * 6
    book.commit(burn(book, "H0"), demand_m_s_yr=np.arange(6.0))
    assert Book.open(book.path).demand_m_s_yr().tolist() == [0, 1, 2, 3, 4, 5]


def test_head_depends_on_content_alone(tmp_path, book, swarm, make_terms, monkeypatch):
    monkeypatch.setattr("time.time", lambda: 4e9)
    (tmp_path / "elsewhere").mkdir()
    other = Book.create(tmp_path / "elsewhere" / "b", make_terms(swarm), swarm, demand_m_s_yr=2.0)
    assert other.head == book.head == opening(make_terms(swarm), swarm).digest
    assert book.commit(burn(book, "H0"), demand_m_s_yr=3.0) == other.commit(burn(other, "H0"), demand_m_s_yr=3.0)


@pytest.mark.parametrize("change", ["title", "mass", "slot", "status"])
def test_head_differs_when_the_content_differs(swarm, make_swarm, make_terms, change):
    other, status = make_swarm(), None
    if change == "mass":
        other.mass_kg[5] = np.nextafter(other.mass_kg[5], 10.0)
    if change == "slot":
        other.slot[5] = "S9"
    if change == "status":
        status = ["active"] * 5 + ["spare"]
    terms = make_terms(other, "another" if change == "title" else "Marram")
    assert opening(terms, other, status=status).digest != opening(make_terms(swarm), swarm).digest


def test_post_of_a_quote_priced_without_the_ledger_is_taken(book, swarm, make_terms):
    bound = opening(make_terms(swarm), swarm).digest
    head = book.post(bound, "q" * 64, burn(book, "P00002"))
    assert head == Book.open(book.path).head
    assert book.posted_sources() == {"q" * 64}
    assert book.statement("P00002")["source"].tolist() == ["case", "q" * 64]


def test_post_twice_is_refused(book):
    bound = book.head
    book.post(bound, "q" * 64, burn(book, "P00002"))
    with pytest.raises(LedgerError, match=r"quote qqqqqqqqqqqq was posted already, in commit 1") as caught:
        book.post(book.head, "q" * 64, burn(book, "P00002"))
    assert caught.value.exit_code == 4


def test_post_on_a_stale_head_names_the_nodes(book):
    bound = book.head
    book.commit(burn(book, ["P00002", "P00004"]))
    book.commit(NewEntries.none(), RosterChange.of(["P00005"], book.last_epoch, slot=["S9"]))
    before = book.head
    with pytest.raises(LedgerError) as caught:
        book.post(bound, "q", burn(book, ["P00002", "P00003"]), nodes=["P00005"])
    fault = caught.value.faults[0]
    assert fault.what == "2 node(s) of this quote changed since it was priced: P00002, P00005"
    assert fault.hint.startswith("--requote")
    assert Book.open(book.path).head == before


def test_post_names_ten_stale_nodes_and_counts_the_rest(tmp_path, make_swarm, make_terms):
    swarm = make_swarm(16)
    book = Book.create(tmp_path / "b", make_terms(swarm), swarm)
    bound = book.head
    book.commit(burn(book, swarm.node))
    with pytest.raises(LedgerError, match=r"16 node.* H0, H1, P00002.*P00009 and 6 more"):
        book.post(bound, "q", burn(book, swarm.node))


def test_post_is_not_blocked_by_an_unrelated_commit(book):
    bound = book.head
    book.commit(burn(book, "H0"))
    book.post(bound, "q", burn(book, "P00002"))
    assert audit(book.path)["result"].eq("ok").all()


def test_post_of_a_quote_of_another_ledger_is_refused(book):
    with pytest.raises(LedgerError, match="priced on another ledger: its head aaaaaaaaaaaa is not in this one"):
        book.post("a" * 64, "q", burn(book, "H0"))


def test_changed_since_knows_only_heads_of_the_chain(book):
    first = book.head
    book.commit(burn(book, "H0"))
    assert book.changed_since(first) == {"H0"}
    assert book.changed_since(book.head) == set()
    assert book.changed_since("0" * 64) is None


def test_correction_gives_the_mass_back_and_releases_the_margin(book, make_swarm, make_terms, tmp_path):
    swarm = make_swarm()
    without = Book.create(tmp_path / "without", make_terms(swarm), swarm)
    without.commit(burn(without, "P00002", 0.5))
    change = RosterChange.of(["P00002"], book.last_epoch, slot="S9")
    book.commit(burn(book, "P00002", 2.0, margin_kg=0.01), change)
    book.commit(burn(book, "P00002", 0.5))
    book.correct(6, "never flown")
    row = book.balances().set_index("node").loc["P00002"]
    reference = without.balances().set_index("node").loc["P00002"]
    assert row["mass_kg"] == pytest.approx(reference["mass_kg"], rel=1e-15)
    assert row["spent_kg"] == pytest.approx(reference["spent_kg"], rel=1e-10)
    assert row["margin_kg"] == 0.0
    assert row["slot"] == "S9"
    line = book.statement("P00002").iloc[-1]
    assert (line["cause"], line["source"], line["note"], line["dv_m_s"]) == (
        "correction",
        "seq:6",
        "never flown",
        -2.0,
    )
    assert audit(book.path)["result"].eq("ok").all()


@pytest.mark.parametrize(
    ("seq", "text"),
    [
        (0, "entry 0: is a load"),
        (6, "entry 6: was corrected already"),
        (7, "entry 7: is itself a correction"),
        (8, "entry 8: there is no such entry .allowed: 0 to 7"),
        (-1, "entry -1: there is no such entry"),
    ],
)
def test_correction_is_refused(book, seq, text):
    book.commit(burn(book, "H0"))
    book.correct(6, "wrong")
    with pytest.raises(LedgerError, match=text):
        book.correct(seq, "again")
    assert len(book.commits) == 3


def test_correction_of_a_leak_gives_its_mass_back(book):
    book.commit(burn(book, "P00002", 0.0, "leak", propellant_kg=0.001, margin_kg=0.0))
    book.correct(6, "a wrong gauge")
    assert book.statement("P00002").iloc[-1]["mass_after_kg"] == pytest.approx(9.7, rel=1e-15)
    assert audit(book.path)["result"].eq("ok").all()


def test_correction_needs_a_reason(book):
    book.commit(burn(book, "H0"))
    with pytest.raises(DomainError, match="--why: no reason is given"):
        book.correct(6, "  ")


@pytest.mark.parametrize(
    ("kind", "text", "make"),
    [
        (DomainError, "no node 'P0002' in the ledger .*did you mean 'P00002'", lambda b: burn(b, "P0002")),
        (DomainError, "entry of node H0.dv_m_s: got -1.0 .allowed: a finite", lambda b: burn(b, "H0", -1.0)),
        (DomainError, "entry of node H0.dv_m_s: got nan", lambda b: burn(b, "H0", np.nan)),
        (DomainError, "entry of node H0.cause: got 'load'", lambda b: burn(b, "H0", 1.0, "load")),
        (DomainError, "entry of node H0.cause: got 'jump'", lambda b: burn(b, "H0", 1.0, "jump")),
        (DomainError, "entry of node H0.isp_s: got 0.0", lambda b: burn(b, "H0", isp_s=0.0)),
        (DomainError, "H0.propellant_kg: got 1.0", lambda b: burn(b, "H0", propellant_kg=1.0)),
        (DomainError, "H0.propellant_kg: got nan", lambda b: burn(b, "H0", 0.0, "leak")),
        (
            DomainError,
            "H0.dv_m_s: got 1.0 .allowed: 0 for a leak",
            lambda b: burn(b, "H0", 1, "leak", propellant_kg=0),
        ),
        (DomainError, "H0.margin_kg: got inf", lambda b: burn(b, "H0", margin_kg=np.inf)),
        (
            LedgerError,
            r"node P00002: would burn .* kg and has 0.3 kg aboard; so would 1 other nodes",
            lambda b: burn(b, ["P00002", "P00003"], 30.0),
        ),
    ],
)
def test_unlawful_entries_are_refused_and_nothing_is_written(book, kind, text, make):
    before = sorted(p.name for p in book.path.iterdir())
    with pytest.raises(kind, match=text):
        book.commit(make(book))
    assert sorted(p.name for p in book.path.iterdir()) == before


@pytest.mark.parametrize(
    ("kind", "text", "change"),
    [
        (
            LedgerError,
            "slot S2 of huddle would hold both P00002 and P00003",
            {"node": ["P00003"], "slot": "S2"},
        ),
        (
            DomainError,
            "node H0 has the status 'asleep', allowed: active",
            {"node": ["H0"], "status": "asleep"},
        ),
        (DomainError, "node 'H0' is named twice", {"node": ["H0", "H0"], "slot": ["A", "B"]}),
        (DomainError, "no node 'X' in the ledger", {"node": ["X"], "slot": "A"}),
    ],
)
def test_unlawful_roster_changes_are_refused(book, epoch, kind, text, change):
    with pytest.raises(kind, match=text):
        book.commit(NewEntries.none(), RosterChange.of(since=epoch, **change))
    assert len(Book.open(book.path).commits) == 1


def test_slots_may_be_exchanged_in_one_commit(book, epoch):
    book.commit(NewEntries.none(), RosterChange.of(["P00002", "P00003"], epoch, slot=["S3", "S2"]))
    assert book.roster()["slot"].tolist()[2:4] == ["S3", "S2"]


def test_lost_node_takes_no_entries(book, epoch):
    book.commit(NewEntries.none(), RosterChange.of(["H1"], epoch, status="lost"))
    with pytest.raises(LedgerError, match="node H1: is lost and takes no entries"):
        book.commit(burn(book, "H1"))


def test_retirement_burns_and_leaves_in_one_commit(book, epoch):
    change = RosterChange.of(["H1"], epoch, status="retired", formation="", slot="")
    book.commit(burn(book, "H1", 0.5, "retire"), change)
    assert not book.state().alive[1]
    assert audit(book.path)["result"].eq("ok").all()


@pytest.mark.parametrize("demand", [-1.0, np.nan, np.ones(5)])
def test_unlawful_demand_is_refused(book, demand):
    with pytest.raises(DomainError, match="demand_m_s_yr: "):
        book.commit(burn(book, "H0"), demand_m_s_yr=demand)


def test_statement_of_an_unknown_node_suggests_one(book):
    with pytest.raises(DomainError, match=r"no node 'P00022' in the ledger .did you mean 'P00002'"):
        book.statement("P00022")


def test_create_refuses_an_existing_ledger_and_replaces_it_when_forced(book, swarm, make_terms):
    book.commit(burn(book, "H0"))
    with pytest.raises(OutputExistsError, match="book: exists already"):
        Book.create(book.path, make_terms(swarm), swarm)
    fresh = Book.create(book.path, make_terms(swarm), swarm, force=True)
    assert len(Book.open(book.path).commits) == 1
    assert sorted(p.name for p in fresh.path.parent.iterdir()) == ["book"]


def test_create_never_replaces_a_folder_of_something_else(tmp_path, swarm, make_terms):
    (tmp_path / "notes.txt").write_text("keep")
    with pytest.raises(OutputExistsError, match=r"holds 'notes.txt', which this output does not replace"):
        Book.create(tmp_path, make_terms(swarm), swarm, force=True)
    assert [p.name for p in tmp_path.iterdir()] == ["notes.txt"]


def test_create_in_a_missing_folder_is_one_sentence(tmp_path, swarm, make_terms):
    with pytest.raises(FarholdError, match="nowhere: does not exist"):
        Book.create(tmp_path / "nowhere" / "book", make_terms(swarm), swarm)


def test_opening_refuses_a_node_lighter_than_its_dry_mass(swarm, make_terms):
    swarm.mass_kg[2] = 9.0
    with pytest.raises(DomainError, match=r"node P00002: weighs 9 kg .allowed: its dry mass of 9.4 kg or more"):
        opening(make_terms(swarm), swarm)


def test_writer_is_refused_while_another_writes_and_readers_are_not(book):
    with FolderLock(book.path):
        with pytest.raises(LedgerError, match="is being written by process"):
            book.commit(burn(book, "H0"))
        assert Book.open(book.path).head == book.head


def test_two_views_of_a_book_write_one_after_the_other(book):
    other = Book.open(book.path)
    book.commit(burn(book, "H0"))
    assert len(other.commits) == 1
    other.commit(burn(other, "H0"))
    assert len(other.commits) == 3
    assert audit(book.path)["result"].eq("ok").all()


def test_names_and_notes_that_look_like_formulas_stay_text(book):
    text = '=1+1 "é\n\U0001f6f0'
    book.commit(burn(book, "H0", note=text, source="file,1"))
    assert Book.open(book.path).statement("H0")["note"].tolist()[-1] == text


def test_life_at_the_stated_demand_empties_the_usable_tank(book):
    row = book.balances().set_index("node").loc["P00002"]
    yearly_m_s = 1.0 * 1.05 + 0.05 * 2.0
    book.commit(
        NewEntries.of(
            "P00002", book.last_epoch.plus(row["life_years"] * YEAR_S), "hold", yearly_m_s * row["life_years"]
        )
    )
    assert book.balances().set_index("node").loc["P00002", "usable_kg"] == pytest.approx(0.0, abs=1e-12)
