"""What a quote is bound to: its digest, the ledger's head, the nodes that are alive, the epoch asked."""

import json

import numpy as np
import pandas as pd
import pytest

import farhold as fh
from farhold.domain.epoch import Epoch
from farhold.ledger.entries import NewEntries
from farhold.ledger.roster import RosterChange
from farhold.study.case import load
from farhold.study.quote import digest_of_quote


@pytest.fixture(scope="module")
def quote(tern):
    return fh.quote(tern, to="far", over_days=30.0, horizon_days=120.0)


def test_quote_digest_leaves_out_the_seconds_alone(quote):
    summary = json.loads(json.dumps(quote.summary))
    summary["seconds"]["total"] = 999.0
    assert digest_of_quote(summary, quote.nodes, quote.impulses) == quote.summary["quote"]
    summary["dv"]["total_m_s"] = np.nextafter(summary["dv"]["total_m_s"], 9.0)
    assert digest_of_quote(summary, quote.nodes, quote.impulses) != quote.summary["quote"]


@pytest.mark.parametrize("table", ["nodes", "impulses"])
def test_quote_digest_changes_with_any_number_of_its_tables(quote, table):
    frames = {"nodes": quote.nodes.copy(), "impulses": quote.impulses.copy()}
    column = frames[table].columns[-1]
    frames[table].loc[3, column] = np.nextafter(frames[table].loc[3, column], 9.0)
    assert digest_of_quote(quote.summary, **frames) != quote.summary["quote"]


def test_quote_digest_and_head_know_no_folder_and_no_clock(write_case, tmp_path):
    runs = [
        fh.quote(load(write_case(folder=tmp_path / name, name=f"{name}.toml")), to="far", over_days=30.0)
        for name in ("here", "there")
    ]
    assert runs[0].summary["quote"] == runs[1].summary["quote"]
    assert runs[0].summary["provenance"] == runs[1].summary["provenance"]


def test_quote_is_the_same_with_the_fresh_ledger_of_its_case(quote, tern, tmp_path):
    ledger = fh.Ledger.create(tmp_path / "book", tern)
    again = fh.quote(tern, to="far", over_days=30.0, horizon_days=120.0, ledger=ledger.path)
    assert quote.summary["provenance"]["ledger_head"] == ledger.head
    assert again.summary["provenance"]["ledger_head"] == ledger.head
    assert again.summary["quote"] == quote.summary["quote"]


def test_quote_departs_when_asked(tern):
    late = fh.quote(tern, to="far", over_days=30.0, depart="2035-06-01T12:00:00")
    same = fh.quote(tern, to="far", over_days=30.0, depart=Epoch.from_iso("2035-06-01T12:00:00"))
    assert late.summary["depart"] == "2035-06-01T12:00:00"
    assert late.summary["quote"] == same.summary["quote"]
    assert late.impulses["epoch_tdb"].min() == pd.Timestamp("2035-06-01T12:00:00")


def test_quote_passes_over_nodes_that_are_lost(tern, tmp_path):
    ledger = fh.Ledger.create(tmp_path / "book", tern)
    ledger._book.commit(NewEntries.none(), RosterChange.of(["P02", "H01"], tern.epoch, status="lost"))
    with pytest.raises(fh.CaseError, match="3 slots for class hub but 2 nodes to fill them"):
        fh.quote(tern, to="far", over_days=30.0, ledger=ledger.path)
    quote = fh.quote(tern, to="six", over_days=30.0, ledger=ledger.path)
    assert quote.summary["nodes"] == 10
    assert not {"P02", "H01"} & set(quote.nodes["node"])
    assert not {"P02", "H01"} & set(quote.impulses["node"])


def test_quote_of_a_swarm_that_is_all_lost_is_refused(tern, tmp_path):
    ledger = fh.Ledger.create(tmp_path / "book", tern)
    names = ledger.roster()["node"].tolist()
    ledger._book.commit(NewEntries.none(), RosterChange.of(names, tern.epoch, status="lost"))
    with pytest.raises(fh.CaseError) as caught:
        fh.quote(tern, to="six", over_days=30.0, ledger=ledger.path)
    assert str(caught.value) == "swarm: no node is alive (allowed: one or more nodes alive)"
