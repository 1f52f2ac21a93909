"""Small stand-ins with the frames that the study floor documents; their masses come from math.exp alone."""

import math
from types import SimpleNamespace

import pandas as pd
import pytest

from farhold.domain.margins import Margins

G0 = 9.80665
CLASSES = {"hub": (46.0, 2.0, 210.0), "probe": (9.4, 0.3, 65.0)}
NODES = {"H01": "hub", "P0001": "probe", "P0002": "probe"}
MARGINS = Margins(contingency_m_s=0.2, contingency_why="=HYPERLINK(1)")


def entry_frame():
    """Five lines in order of posting, node by node interleaved: loads, burns, a leak, a reversal."""
    rows, mass = [], {}

    def add(node, day, cause, dv, isp, before, after, note="", margin=0.0):
        mass[node] = after
        rows.append(
            {
                "seq": len(rows) + 1,
                "node": node,
                "class": NODES[node],
                "epoch_tdb": pd.Timestamp("2035-03-20") + pd.Timedelta(days=day),
                "cause": cause,
                "source": "marram",
                "dv_m_s": dv,
                "isp_s": isp,
                "mass_before_kg": before,
                "mass_after_kg": after,
                "propellant_kg": before - after,
                "margin_kg": margin,
                "note": note,
            }
        )

    def burn(node, day, cause, dv, isp, note="", margin=0.0):
        before = mass[node]
        add(node, day, cause, dv, isp, before, before * math.exp(-dv / (isp * G0)), note, margin)

    for node, kind in NODES.items():
        dry, load, isp = CLASSES[kind]
        add(node, 0, "load", 0.0, isp, dry, dry + load)
    burn("P0001", 30, "reshape", 0.61, 65.0, "=1+1", 0.0005)
    burn("H01", 30, "reshape", 0.37, 210.0, "@SUM(A1)")
    burn("P0001", 31, "attitude", 0.05, 40.0, "-2 [bold]x[/bold]")
    add("H01", 40, "leak", 0.0, 210.0, mass["H01"], mass["H01"] - 0.001, "+3")
    burn("P0001", 50, "correction", -0.61, 65.0, "typed twice", -0.0005)
    frame = pd.DataFrame(rows)
    return frame.assign(epoch_tdb=frame["epoch_tdb"].astype("datetime64[ns]"))


class StubLedger:
    title = "Marram: [red]solar[/red] wind"
    head = "5f" * 32
    margins = MARGINS

    def __init__(self, frame=None):
        self.frame = entry_frame() if frame is None else frame
        self.terms = pd.DataFrame(
            {
                "node": list(NODES),
                "class": list(NODES.values()),
                "dry_mass_kg": [CLASSES[kind][0] for kind in NODES.values()],
                "loaded_kg": [CLASSES[kind][1] for kind in NODES.values()],
                "isp_s": [CLASSES[kind][2] for kind in NODES.values()],
            }
        )
        self.corrected = []

    def entries(self, nodes=None):
        frame = self.frame
        return frame if nodes is None else frame[frame["node"].isin(nodes)].reset_index(drop=True)

    def statement(self, node):
        return self.entries([node])

    def balances(self):
        rows = []
        for term in self.terms.to_dict("records"):
            mine = self.frame[self.frame["node"] == term["node"]]
            mass = mine["mass_after_kg"].iloc[-1]
            residual = MARGINS.residual * term["loaded_kg"]
            reserve = (term["dry_mass_kg"] + residual) * math.expm1(0.2 / (term["isp_s"] * G0))
            rows.append(
                {
                    "node": term["node"],
                    "class": term["class"],
                    "status": "active",
                    "formation": "wide",
                    "slot": f"s-{term['node']}",
                    "loaded_kg": term["loaded_kg"],
                    "spent_kg": mine.loc[mine["cause"] != "load", "propellant_kg"].sum(),
                    "mass_kg": mass,
                    "margin_kg": mine["margin_kg"].sum(),
                    "usable_kg": mass - term["dry_mass_kg"] - residual - reserve,
                    "life_years": 12.5,
                }
            )
        return pd.DataFrame(rows)

    def audit(self):
        return pd.DataFrame([{"check": "digests", "result": "pass", "detail": "3 segments"}])

    def correct(self, seq, why):
        self.corrected.append((seq, why))


def quote_summary(affordable=True):
    return {
        "kind": "quote",
        "schema": 1,
        "quote": "ab" * 32,
        "case": "Marram: [red]solar[/red]\x1b[31m wind",
        "from": "huddle",
        "to": "wide",
        "depart": "2035-03-20T00:00:00",
        "over_days": 30.0,
        "horizon_days": 120.0,
        "objective": "least-total",
        "impulses": "two",
        "nodes": 3,
        "moved": 2,
        "dv": {
            "total_m_s": 1.8,
            "mean_m_s": 0.6,
            "median_m_s": 0.61,
            "p95_m_s": 1.1,
            "max_m_s": 1.19,
            "max_node": "P0002",
        },
        "propellant": {"total_kg": 0.025, "max_kg": 0.018, "margin_kg": 0.00125},
        "holding": {
            "old_total_m_s": 0.4,
            "new_total_m_s": 0.9,
            "net_total_m_s": 2.3,
            "before_mean_m_s_yr": 0.5,
            "after_mean_m_s_yr": 1.1,
            "after_max_m_s_yr": 1.9,
        },
        "assignment": {
            "objective": "least-total",
            "value": 1.8,
            "unit": "m/s",
            "lower_bound": 1.8,
            "gap": 0.0,
            "gap_relative": 0.0,
            "map_error_m_s": 2e-6,
            "proven": True,
            "method": "dense",
        },
        "floor": {
            "total_m_s": None,
            "ratio": None,
            "worst_ratio": None,
            "worst_node": None,
            "remainder_m_s": None,
        },
        "targeting": {"lane": "full", "model": "circular", "max_miss_m": 0.003},
        "trim": {"p99_m_s": None, "arrival_sigma_m": None},
        "separation": {
            "asked_m": 200.0,
            "closest_m": None,
            "pair": None,
            "at": None,
            "conflicts": None,
            "after_missed_burn_m": None,
        },
        "affordable": affordable,
        "cannot_afford": [] if affordable else ["P0002"],
        "life_after": {"min_years": 3.2, "median_years": 100.0, "limiting_node": "P0002", "capped": False},
        "seconds": {"total": float("nan")},
        "provenance": {"farhold": "0.1.0", "seed": None},
    }


class StubQuote:
    def __init__(self, affordable=True):
        self.affordable = affordable
        self.summary = quote_summary(affordable)
        self.notes = ["Prices are gross; the net price counts holding."]
        self.nodes = pd.DataFrame(
            {
                "node": list(NODES),
                "class": list(NODES.values()),
                "slot": ["hub-01", "probe-0001", "probe-0002"],
                "dv_total_m_s": [0.0, 0.61, 1.19],
                "propellant_kg": [0.0, 0.007, 0.018],
                "usable_kg": [1.9, 0.28, 0.26],
                "life_years": [100.0, 20.0, 3.2],
            }
        )
        self.saved = []

    def save(self, folder, force=False):
        self.saved.append((folder, force))


@pytest.fixture
def ledger():
    return StubLedger()


@pytest.fixture
def make_quote():
    return StubQuote


@pytest.fixture
def study(monkeypatch, ledger):
    """Put stand-ins in the place of the study floor; `calls` records what the commands ask for."""
    import sys

    calls = SimpleNamespace(quote=None, created=None, posted=None, priced=StubQuote(), ledger=ledger)

    def quote(case, **options):
        calls.quote = {"case": case, **options}
        return calls.priced

    def check(case):
        summary = {"kind": "check", "schema": 1, "case": case, "warnings": ["box smaller than [b]swing[/b]"]}
        return SimpleNamespace(summary=summary, lines=["16 hubs and 960 probes stand at L5."])

    def create(path, case, force=False):
        calls.created = (path, case, force)
        return calls.ledger

    def post(quote, requote=False):
        calls.posted = (quote, requote)
        return SimpleNamespace(
            summary={
                "kind": "post",
                "schema": 1,
                "quote": "ab",
                "ledger_head": "cd",
                "entries": 2,
                "nodes": 1,
            }
        )

    ledger.post = post
    modules = {
        "case": {"load": lambda path: f"case of {path}"},
        "start": {"start": lambda folder, force=False: [f"{folder}/marram.toml", f"{folder}/wide.csv"]},
        "check": {"check": check},
        "quote": {"quote": quote},
        "quote_folder": {"load_quote": lambda folder: f"quote in {folder}"},
        "book": {"Ledger": SimpleNamespace(create=create, open=lambda path: calls.ledger)},
    }
    for name, members in modules.items():
        monkeypatch.setitem(sys.modules, f"farhold.study.{name}", SimpleNamespace(**members))
    return calls
