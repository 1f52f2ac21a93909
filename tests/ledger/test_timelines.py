"""Properties of whole books: any timeline conserves mass, and replays to the same bits."""

import contextlib
import tempfile
from pathlib import Path

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from farhold.errors import LedgerError
from farhold.ledger import Book, NewEntries, RosterChange
from farhold.ledger.audit import audit
from farhold.ledger.schema import CAUSES

lines = st.tuples(
    st.integers(0, 5),
    st.sampled_from([c for c in CAUSES if c not in ("load", "correction", "leak")]),
    st.floats(0.0, 1.0),
    st.floats(0.0, 0.01),
    st.integers(0, 40),
)
commits = st.tuples(st.lists(lines, max_size=6), st.floats(0.0, 3.0), st.integers(-1, 5), st.booleans())


def run(folder, swarm, terms, timeline):
    book = Book.create(folder, terms, swarm)
    for rows, demand, moved, correct in timeline:
        nodes = swarm.node[[row[0] for row in rows]] if rows else []
        new = NewEntries.of(
            np.array(nodes, dtype=np.str_),
            book.last_epoch.ns + np.array([row[4] for row in rows], dtype=np.int64) * 86_400_000_000_000,
            [row[1] for row in rows],
            [row[2] for row in rows],
            margin_kg=[row[3] for row in rows],
        )
        change = None
        if moved >= 0:
            change = RosterChange.of([swarm.node[moved]], book.last_epoch, slot=f"N{len(book.commits)}")
        book.commit(new, change, demand)
        if correct:
            with contextlib.suppress(LedgerError):
                book.correct(len(book.entries()) - 1, "undone")
    return book


@settings(max_examples=8, deadline=None)
@given(timeline=st.lists(commits, max_size=4))
def test_any_timeline_conserves_mass_and_replays_to_the_bit(make_swarm, make_terms, timeline):
    swarm = make_swarm()
    terms = make_terms(swarm)
    with tempfile.TemporaryDirectory() as folder:
        book = run(Path(folder, "a"), swarm, terms, timeline)
        again = run(Path(folder, "b"), swarm, terms, timeline)
        entries, balances = book.entries(), book.balances()
        assert audit(book.path)["result"].eq("ok").all()
        assert again.head == book.head
        assert again.balances().equals(balances)
    total_kg = entries.groupby("node")["propellant_kg"].sum().reindex(balances["node"]).to_numpy()
    np.testing.assert_allclose(terms.dry_mass_kg - total_kg, balances["mass_kg"], rtol=1e-12)
    np.testing.assert_allclose(
        balances["spent_kg"] + balances["mass_kg"], terms.dry_mass_kg + terms.loaded_kg, rtol=1e-12
    )
    memo_kg = entries.groupby("node")["margin_kg"].sum().reindex(balances["node"]).to_numpy()
    np.testing.assert_allclose(memo_kg, balances["margin_kg"], atol=1e-15)
    flown = entries[entries["cause"] != "load"]
    chained = flown.groupby("node")["dv_m_s"].sum()
    alone = flown.groupby("node")["isp_s"].nunique()
    for node in alone[alone == 1].index:
        k = int(np.flatnonzero(swarm.node == node)[0])
        isp_s = flown.loc[flown["node"] == node, "isp_s"].iloc[0]
        expected_kg = swarm.mass_kg[k] * np.exp(-chained[node] / (isp_s * 9.80665))
        np.testing.assert_allclose(balances["mass_kg"][k], expected_kg, rtol=1e-12)
