"""What a quote refuses: one sentence with the place, the value, the allowed and the cure; nothing is written."""

import pytest

import farhold as fh

OVER = {"to": "far", "over_days": 30.0}


def refused(kind, case, exit_code, **asked):
    with pytest.raises(kind) as caught:
        fh.quote(case, **(OVER | asked))
    assert caught.value.exit_code == exit_code
    return str(caught.value)


WRONG = {
    "formation": (
        {"to": "fra"},
        "--to: there is no formation 'fra' (allowed: nearby, far, still, free, six; did you mean 'far'?)",
    ),
    "objective": (
        {"objective": "least-totals"},
        "--objective: there is no objective 'least-totals' (allowed: least-total, least-propellant, least-worst; "
        "did you mean 'least-total'?)",
    ),
    "no time": ({"over_days": 0.0}, "--over: got 0 d (allowed: above 0 d, up to 10 years)"),
    "time not a number": ({"over_days": float("nan")}, "--over: got nan d (allowed: above 0 d, up to 10 years)"),
    "horizon": (
        {"horizon_days": 29.5},
        "--horizon: got 29.5 d (allowed: 30 d (the transfer) to 100 years)",
    ),
    "accuracy": ({"accuracy": "rough"}, "accuracy: got 'rough' (allowed: draft default fine)"),
}


@pytest.mark.parametrize(("asked", "text"), WRONG.values(), ids=WRONG)
def test_quote_refuses_what_it_does_not_know(tern, asked, text):
    assert refused(fh.FarholdError, tern, 2, **asked) == text


def test_quote_refuses_an_unknown_formation_to_leave(tern):
    assert "did you mean 'nearby'?" in refused(fh.CaseError, tern, 2, from_="nerby")


def test_quote_refuses_an_epoch_that_is_none(tern):
    text = refused(fh.FarholdError, tern, 2, depart="tomorrow")
    assert text.startswith("--depart: 'tomorrow' is not an epoch (allowed: ISO 8601")


def test_quote_refuses_to_depart_before_the_case(tern):
    assert refused(fh.CaseError, tern, 2, depart="2035-03-19T23:59:59") == (
        "--depart: got 2035-03-19T23:59:59 (allowed: 2035-03-20T00:00:00 TDB, where the swarm is known, or later)"
    )


def test_quote_refuses_to_depart_before_the_last_entry_of_the_ledger(tern, tmp_path):
    ledger = fh.Ledger.create(tmp_path / "book", tern)
    ledger.post(fh.quote(tern, **OVER, ledger=ledger.path))
    asked = {"to": "still", "ledger": ledger.path, "depart": "2035-04-18T00:00:00"}
    assert refused(fh.CaseError, tern, 2, **asked) == (
        "--depart: got 2035-04-18T00:00:00 (allowed: 2035-04-19T00:00:00 TDB, where the swarm is known, or later)"
    )
    next_one = fh.quote(tern, to="still", over_days=30.0, ledger=ledger.path)
    assert next_one.summary["depart"] == "2035-04-19T00:00:00"
    assert next_one.summary["from"] == "far"


def test_quote_refuses_to_leave_where_the_ledger_says_nobody_is(tern, tmp_path):
    ledger = fh.Ledger.create(tmp_path / "book", tern)
    assert refused(fh.CaseError, tern, 2, from_="still", ledger=ledger.path) == (
        "--from: the ledger has the swarm in 'nearby', not in 'still' (allowed: nearby; leave --from out: with a "
        "ledger its roster says where nodes sit)"
    )


@pytest.mark.parametrize(
    "swap",
    [{'propellant = "0.30 kg"': 'propellant = "0.31 kg"'}, {'share = "5 %"': 'share = "6 %"'}, {"L4": "L5"}],
    ids=["tank", "margin", "title"],
)
def test_quote_refuses_the_ledger_of_another_case(tern, make_case, tmp_path, swap):
    ledger = fh.Ledger.create(tmp_path / "book", tern)
    text = refused(fh.LedgerError, make_case(swap), 4, ledger=ledger.path)
    assert "this ledger was opened with another swarm or other margins ('Tern: a trial at L4')" in text
    assert text.endswith("open one for this case with: farhold ledger create LEDGER CASE)")


def test_quote_refuses_a_folder_that_is_no_ledger(tern, tmp_path):
    text = refused(fh.FarholdError, tern, 2, ledger=tmp_path / "none")
    assert "does not exist" in text


def test_quote_at_a_singular_time_names_all_nodes_and_the_good_times(tern, tmp_path):
    before = sorted(tmp_path.iterdir())
    with pytest.raises(fh.NoSolutionError) as caught:
        fh.quote(tern, to="far", over_days=365.25)
    (fault,) = caught.value.faults
    names = tern.nodes.node.tolist()
    assert caught.value.exit_code == 5
    assert fault.where == "transfer over 365.25 d"
    assert fault.what == "two impulses are singular at this time for 12 nodes: " + ", ".join(names)
    first, second = fault.allowed.removeprefix("transfer times of ").split(" or ")
    assert first.startswith("1 d to ")
    assert second.endswith(" d")
    assert fault.hint == "choose another --over"
    assert sorted(tmp_path.iterdir()) == before


@pytest.mark.parametrize("edge", [0, 1])
def test_times_that_a_singular_quote_calls_good_are_good(tern, edge):
    with pytest.raises(fh.NoSolutionError) as caught:
        fh.quote(tern, to="far", over_days=182.6)
    window = caught.value.faults[0].allowed.removeprefix("transfer times of ").split(" or ")[0]
    days = float(window.split(" to ")[edge].removesuffix(" d"))
    assert fh.quote(tern, to="far", over_days=days).summary["targeting"]["max_miss_m"] < 0.1


def test_quote_at_half_a_period_is_fine_for_nodes_that_stay_in_the_plane(make_case):
    # only the motion along N is singular there
    flat = """
[formation.row]
rule = "rotating"
[[formation.row.slots]]
class = "probe"
shape = "line"
axis = "T"
length = "200 km"
count = 9
[[formation.row.slots]]
class = "hub"
shape = "line"
axis = "R"
length = "50 km"
centre = ["100 km", "0 km", "0 km"]
count = 3
"""
    wide = flat.replace("formation.row", "formation.rows").replace("200 km", "380 km")
    case = make_case(more=flat + wide)
    quote = fh.quote(case, from_="row", to="rows", over_days=182.6)
    assert quote.summary["targeting"]["max_miss_m"] < 0.1


def test_quote_refuses_too_few_nodes(make_case):
    case = make_case({'count = 9\nspacing = "5 km"': 'count = 10\nspacing = "5 km"'})
    text = refused(fh.CaseError, case, 2, from_="far", to="nearby")
    assert text == (
        "formation nearby: 10 slots for class probe but 9 nodes to fill them (allowed: as many nodes as slots, or "
        "a priority on every slot of the class; drop 1 slots, or give each slot a priority (1 is filled first))"
    )
