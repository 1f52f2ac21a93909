"""Every case that we ship is checked and priced between two of its formations, and runs through a ledger."""

from pathlib import Path

import numpy as np
import pytest

import farhold as fh

CONFIGS = sorted((Path(__file__).parents[2] / "configs").glob("*.toml"))
CHANGES = {
    "l1_lissajous": ("knot", "wheel", 14.0),
    "l1_lyapunov": ("clutch", "fence", 15.0),
    "l2_halo": ("tight", "open", 12.0),
    "l2_wide": ("furled", "coil", 15.0),
    "l4_inertial": ("plane", "cloud", 40.0),
    "l4_short_period": ("flock", "crown", 40.0),
    "l5_long_period": ("cluster", "sheet", 45.0),
    "marram": ("huddle", "wide", 30.0),
}


def test_every_config_has_a_change_here():
    assert {path.stem for path in CONFIGS} == set(CHANGES)


@pytest.mark.parametrize("path", CONFIGS, ids=lambda path: path.stem)
def test_config_is_checked_without_a_fault(path):
    summary = fh.check(fh.load(path)).summary
    assert summary["kind"] == "check"
    assert all(0.0 < row["holding_mean_m_s_yr"] <= row["holding_max_m_s_yr"] for row in summary["formations"])


@pytest.mark.parametrize("path", CONFIGS, ids=lambda path: path.stem)
def test_config_change_is_priced_proven_posted_and_audited(path, tmp_path):
    case = fh.load(path)
    old, new, days = CHANGES[path.stem]
    quote = fh.quote(case, from_=old, to=new, over_days=days, horizon_days=2.0 * days)
    summary = quote.summary
    assert summary["affordable"] is True
    assert summary["assignment"]["proven"] is True
    assert summary["targeting"]["max_miss_m"] < 0.1
    filled = quote.nodes[quote.nodes["formation"] == new]["slot"]
    assert sorted(filled) == sorted(case.formation(new).slots.slot)
    # a swarm that starts where the case opens may enter it
    ledger = fh.Ledger.create(tmp_path / "book", case)
    again = fh.quote(case, to=new, over_days=days, ledger=ledger.path)
    ledger.post(again)
    assert set(ledger.audit()["result"]) == {"ok"}
    np.testing.assert_allclose(
        ledger.balances()["spent_kg"].sum(), again.summary["propellant"]["total_kg"], rtol=1e-9
    )


def test_config_with_spares_sends_the_rest_to_their_shelf():
    case = fh.load(next(path for path in CONFIGS if path.stem == "l4_inertial"))
    nodes = fh.quote(case, from_="plane", to="cloud", over_days=40.0).nodes
    assert nodes["formation"].value_counts().to_dict() == {"cloud": 270, "shelf": 30}
    assert not nodes.duplicated(["formation", "slot"]).any()


def test_started_case_is_the_shipped_config():
    home = Path(fh.__file__).parent / "study" / "samples"
    here = CONFIGS[0].parent
    assert [(home / name).read_bytes() for name in ("marram.toml", "wide.csv")] == [
        (here / name).read_bytes() for name in ("marram.toml", "wide.csv")
    ]
