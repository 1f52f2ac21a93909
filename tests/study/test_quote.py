"""What a quote says, recomputed from its own tables, the rocket equation and flights made again."""

import json
import math

import numpy as np
import pytest

import farhold as fh
from farhold.planning.assignment.objectives import OBJECTIVES

G0 = 9.80665
ISP_S = {"probe": 65.0 * 0.9, "hub": 210.0}
THRUST_N = {"probe": 0.020 * 0.9, "hub": 0.5}
DRY_KG = {"probe": 9.4, "hub": 46.0}
LOAD_KG = {"probe": 0.30, "hub": 2.0}
CR_AREA_M2 = {"probe": 1.3 * 0.09, "hub": 1.25 * 0.5}

# design section 8, the document "quote", written out by hand
FIELDS = {
    "kind": None,
    "schema": None,
    "quote": None,
    "case": None,
    "from": None,
    "to": None,
    "depart": None,
    "over_days": None,
    "horizon_days": None,
    "objective": None,
    "impulses": None,
    "nodes": None,
    "moved": None,
    "dv": {"total_m_s", "mean_m_s", "median_m_s", "p95_m_s", "max_m_s", "max_node"},
    "propellant": {"total_kg", "max_kg", "margin_kg"},
    "holding": {
        "old_total_m_s",
        "new_total_m_s",
        "net_total_m_s",
        "before_mean_m_s_yr",
        "after_mean_m_s_yr",
        "after_max_m_s_yr",
    },
    "assignment": {
        "objective",
        "value",
        "unit",
        "lower_bound",
        "gap",
        "gap_relative",
        "map_error_m_s",
        "proven",
        "method",
    },
    "floor": {"total_m_s", "ratio", "worst_ratio", "worst_node", "remainder_m_s"},
    "targeting": {"lane", "model", "max_miss_m"},
    "trim": {"p99_m_s", "arrival_sigma_m"},
    "separation": {"asked_m", "closest_m", "pair", "at", "conflicts", "after_missed_burn_m"},
    "affordable": None,
    "cannot_afford": None,
    "life_after": {"min_years", "median_years", "limiting_node", "capped"},
    "seconds": {"reference", "assignment", "targeting", "separation", "total"},
    "provenance": {"farhold", "case_sha256", "ledger_head", "seed", "numpy", "numba", "cpu"},
}


@pytest.fixture(scope="module")
def quote(tern):
    return fh.quote(tern, to="far", over_days=30.0, horizon_days=120.0)


def by_class(frame, table):
    return frame["class"].map(table).to_numpy(dtype=float)


def sizes(impulses):
    """Sizes (n, 2) of departure and arrival."""
    return np.linalg.norm(impulses[["dv_r_m_s", "dv_t_m_s", "dv_n_m_s"]].to_numpy(), axis=1).reshape(-1, 2)


def burnt_kg(mass_kg, dv_m_s, isp_s):
    return mass_kg * (1.0 - np.exp(-dv_m_s / (isp_s * G0)))


def test_quote_document_has_exactly_the_fields_of_the_design(quote):
    got = {key: set(value) if isinstance(value, dict) else None for key, value in quote.summary.items()}
    assert got == FIELDS
    assert list(quote.summary) == list(FIELDS)


def test_quote_document_is_plain_json_without_nan(quote):
    again = json.loads(json.dumps(quote.summary, allow_nan=False))
    assert again == quote.summary


def test_quote_leaves_later_parts_null(quote):
    summary = quote.summary
    later = [
        *(summary["floor"][key] for key in ("total_m_s", "ratio", "worst_ratio", "worst_node")),
        *summary["trim"].values(),
        *(value for key, value in summary["separation"].items() if key != "asked_m"),
        summary["seconds"]["separation"],
    ]
    assert later == [None] * len(later)
    assert summary["separation"]["asked_m"] == 200.0


def test_quote_says_what_was_asked(quote, tern):
    summary = quote.summary
    asked = ["kind", "schema", "case", "from", "to", "depart", "over_days", "horizon_days", "objective", "nodes"]
    assert [summary[key] for key in asked] == [
        "quote",
        1,
        "Tern: a trial at L4",
        "nearby",
        "far",
        "2035-03-20T00:00:00",
        30.0,
        120.0,
        "least-total",
        12,
    ]
    assert summary["provenance"]["case_sha256"] == tern.sha256
    assert summary["targeting"]["lane"] == "full"


def test_quote_speed_changes_are_those_of_its_impulses(quote):
    dv = sizes(quote.impulses).sum(axis=1)
    nodes, summary = quote.nodes, quote.summary["dv"]
    np.testing.assert_allclose(nodes["dv_total_m_s"], dv, rtol=1e-12)
    assert quote.impulses["node"].tolist() == np.repeat(nodes["node"], 2).tolist()
    assert summary["total_m_s"] == pytest.approx(math.fsum(dv), rel=1e-12)
    assert summary["mean_m_s"] == pytest.approx(math.fsum(dv) / 12, rel=1e-12)
    assert summary["median_m_s"] == pytest.approx(np.sort(dv)[5:7].mean(), rel=1e-12)
    assert np.sort(dv)[-2] <= summary["p95_m_s"] <= np.sort(dv)[-1]
    assert summary["max_m_s"] == dv.max()
    assert summary["max_node"] == nodes["node"][int(np.argmax(dv))]
    assert quote.summary["moved"] == 12


def test_quote_propellant_follows_the_rocket_equation(quote):
    nodes, dv = quote.nodes, sizes(quote.impulses)
    isp, mass = by_class(nodes, ISP_S), by_class(nodes, DRY_KG) + by_class(nodes, LOAD_KG)
    first = burnt_kg(mass, dv[:, 0], isp)
    second = burnt_kg(mass - first, dv[:, 1], isp)
    np.testing.assert_allclose(nodes["propellant_kg"], first + second, rtol=1e-9)
    np.testing.assert_allclose(quote.impulses["propellant_kg"].to_numpy()[::2], first, rtol=1e-9)
    np.testing.assert_allclose(nodes["propellant_kg"], burnt_kg(mass, dv.sum(axis=1), isp), rtol=1e-9)
    assert quote.summary["propellant"]["total_kg"] == pytest.approx(math.fsum(first + second), rel=1e-9)
    assert quote.summary["propellant"]["max_kg"] == pytest.approx((first + second).max(), rel=1e-9)


def test_quote_margins_are_taken_once_and_apart_from_the_price(quote):
    # 5 % of each impulse, on the mass after it, never within dv or propellant
    nodes, dv = quote.nodes, sizes(quote.impulses)
    isp, mass = by_class(nodes, ISP_S), by_class(nodes, DRY_KG) + by_class(nodes, LOAD_KG)
    first = mass - burnt_kg(mass, dv[:, 0], isp)
    second = first - burnt_kg(first, dv[:, 1], isp)
    margin = burnt_kg(first, 0.05 * dv[:, 0], isp) + burnt_kg(second, 0.05 * dv[:, 1], isp)
    np.testing.assert_allclose(nodes["margin_kg"], margin, rtol=1e-9)
    np.testing.assert_allclose(margin, 0.05 * nodes["propellant_kg"], rtol=0.01)
    assert quote.summary["propellant"]["margin_kg"] == pytest.approx(margin.sum(), rel=1e-9)


def test_quote_usable_leaves_residual_and_contingency(quote):
    nodes = quote.nodes
    dry, load, isp = (by_class(nodes, table) for table in (DRY_KG, LOAD_KG, ISP_S))
    least = (dry + 0.02 * load) * np.exp(0.2 / (isp * G0))
    np.testing.assert_allclose(nodes["usable_kg"], dry + load - nodes["propellant_kg"] - least, rtol=1e-9)


def test_quote_life_is_what_the_tank_gives_over_the_yearly_demand(quote):
    nodes = quote.nodes
    dry, load, isp = (by_class(nodes, table) for table in (DRY_KG, LOAD_KG, ISP_S))
    mass = dry + load - nodes["propellant_kg"].to_numpy()
    usable = nodes["usable_kg"].to_numpy()
    probe = (nodes["class"] == "probe").to_numpy()
    attitude = np.where(probe, 0.05 * ISP_S["probe"] / 40.0, 0.2)
    leak = np.where(probe, isp * G0 * 1e-3 / (mass - usable / 2.0), 0.0)
    demand = nodes["holding_after_m_s_yr"].to_numpy() * 1.05 + attitude * 2.0 + leak
    years = isp * G0 * np.log(mass / (mass - usable)) / demand
    np.testing.assert_allclose(nodes["life_years"], np.minimum(years, 100.0), rtol=1e-9)
    life = quote.summary["life_after"]
    assert life["min_years"] == nodes["life_years"].min()
    assert life["median_years"] == pytest.approx(nodes["life_years"].median(), rel=1e-12)
    assert life["limiting_node"] == nodes["node"][int(np.argmin(nodes["life_years"]))]
    assert life["capped"] is False


def test_quote_net_price_adds_the_new_holding_and_spares_the_old(quote):
    holding, dv = quote.summary["holding"], quote.summary["dv"]
    net = dv["total_m_s"] + holding["new_total_m_s"] - holding["old_total_m_s"]
    assert holding["net_total_m_s"] == pytest.approx(net, rel=1e-12)
    assert holding["new_total_m_s"] > holding["old_total_m_s"] > 0.0


def test_quote_holding_reaches_from_arrival_to_the_horizon(tern):
    # rotating slots pull alike at all times: the shares of the window are exact
    short = fh.quote(tern, to="still", over_days=30.0, from_="nearby").summary["holding"]
    longer = fh.quote(tern, to="still", over_days=30.0, from_="nearby", horizon_days=395.25).summary["holding"]
    assert short["new_total_m_s"] == 0.0
    assert longer["new_total_m_s"] == pytest.approx(12 * longer["after_mean_m_s_yr"], rel=1e-12)
    assert short["old_total_m_s"] < longer["old_total_m_s"]


def test_quote_impulses_flown_again_hit_the_slots(quote, tern):
    nodes = quote.nodes
    mass = by_class(nodes, DRY_KG) + by_class(nodes, LOAD_KG)
    area = by_class(nodes, CR_AREA_M2) / mass
    reference = fh.reference("L4", epoch="2035-03-20T00:00:00", pressure_m2_kg=area.mean())
    start = nodes[["from_r_km", "from_t_km", "from_n_km"]].to_numpy() * 1e3
    # inertial slots turn by -n about N in rotating axes
    rate = 2.0 * np.pi / (365.2563431 * 86400.0)
    still = np.hstack([start, rate * np.stack([start[:, 1], -start[:, 0], 0.0 * start[:, 0]], axis=1)])
    dv = quote.impulses[["dv_r_m_s", "dv_t_m_s", "dv_n_m_s"]].to_numpy().reshape(-1, 2, 3)
    ends = reference.fly(still, [30.0], pressure_m2_kg=area, impulses=([0.0, 30.0], dv), accuracy="fine")[:, 0]
    target = nodes[["to_r_km", "to_t_km", "to_n_km"]].to_numpy() * 1e3
    assert np.linalg.norm(ends[:, :3] - target, axis=1).max() < 0.1
    # after the arrival impulse it moves with its slot
    slot = rate * np.stack([target[:, 1], -target[:, 0], 0.0 * target[:, 0]], axis=1)
    assert np.abs(ends[:, 3:] - slot).max() < 1e-6
    assert 0.0 < quote.summary["targeting"]["max_miss_m"] < 0.1


def test_quote_fills_priorities_first_and_keeps_pins(make_case, tmp_path):
    rows = "".join(f"A{k},probe,{k * 10},0,0,{1 if k < 5 else 2},{'P03' if k == 7 else ''}\n" for k in range(12))
    (tmp_path / "ten.csv").write_text("slot,class,x_km,y_km,z_km,priority,node\n" + rows)
    more = '\n[formation.ten]\nrule = "rotating"\n[[formation.ten.slots]]\nfile = "ten.csv"\n'
    nodes = fh.quote(make_case(more=more), to="ten", over_days=20.0).nodes.set_index("node")
    filled = nodes.loc[nodes["formation"] == "ten", "slot"]
    assert filled["P03"] == "A7"
    assert {"A0", "A1", "A2", "A3", "A4"} <= set(filled)
    assert len(filled) == 9


def test_quote_icrf_impulses_are_the_same_vectors_in_the_sky(quote):
    frame = quote.impulses
    rtn = frame[["dv_r_m_s", "dv_t_m_s", "dv_n_m_s"]].to_numpy()
    xyz = frame[["dv_x_m_s", "dv_y_m_s", "dv_z_m_s"]].to_numpy()
    np.testing.assert_allclose(np.linalg.norm(xyz, axis=1), np.linalg.norm(rtn, axis=1), rtol=1e-12)
    # the orbit normal is the pole of the ecliptic: obliquity 84381.406 arcsec (IAU 2006)
    tilt = np.radians(84381.406 / 3600.0)
    np.testing.assert_allclose(xyz @ [0.0, -np.sin(tilt), np.cos(tilt)], rtn[:, 2], atol=1e-9)
    # at the equinox, 2035-03-20T22:02, the Earth stands at 180 degrees of the ecliptic of date, which has moved
    # 0.49 degrees since J2000 (50.3 arcsec a year); L4 is 60 degrees ahead; the model turns evenly from there
    first = 240.0 - 0.49 - 0.9856 * 22.03 / 24.0
    longitude = np.radians(first + np.tile([0.0, 30.0 * 360.0 / 365.2563], 12))
    along = xyz[:, 0] * np.cos(longitude)
    along += (xyz[:, 1] * np.cos(tilt) + xyz[:, 2] * np.sin(tilt)) * np.sin(longitude)
    np.testing.assert_allclose(along, rtn[:, 0], atol=0.005 * np.abs(rtn).max())


def test_quote_burn_times_are_mass_flow_times(quote):
    frame = quote.impulses.merge(quote.nodes[["node", "class"]], on="node")
    flow = by_class(frame, THRUST_N) / (by_class(frame, ISP_S) * G0)
    np.testing.assert_allclose(frame["burn_s"], frame["propellant_kg"] / flow, rtol=1e-9)


def test_quote_impulses_stand_at_departure_and_arrival(quote):
    times = quote.impulses["epoch_tdb"].to_numpy().reshape(-1, 2)
    assert (times[:, 0] == np.datetime64("2035-03-20T00:00:00")).all()
    assert (times[:, 1] == np.datetime64("2035-04-19T00:00:00")).all()
    assert quote.impulses["epoch_tdb"].dtype == "datetime64[ns]"


@pytest.mark.parametrize("objective", OBJECTIVES)
def test_quote_is_proven_and_its_bound_below_its_value(tern, objective):
    quote = fh.quote(tern, to="far", over_days=30.0, objective=objective)
    pairing = quote.summary["assignment"]
    assert pairing["proven"] is True
    assert pairing["lower_bound"] <= pairing["value"]
    assert pairing["gap_relative"] < 1e-9
    flown = {
        "least-total": quote.summary["dv"]["total_m_s"],
        "least-worst": quote.summary["dv"]["max_m_s"],
        "least-propellant": quote.summary["propellant"]["total_kg"],
    }[objective]
    assert pairing["value"] == pytest.approx(flown, rel=1e-5)
    assert pairing["unit"] == ("kg" if objective == "least-propellant" else "m/s")


def test_quote_objectives_are_each_best_at_their_own(tern):
    runs = {name: fh.quote(tern, to="far", over_days=30.0, objective=name).summary for name in OBJECTIVES}
    totals = {name: run["dv"]["total_m_s"] for name, run in runs.items()}
    worsts = {name: run["dv"]["max_m_s"] for name, run in runs.items()}
    burnt = {name: run["propellant"]["total_kg"] for name, run in runs.items()}
    assert min(totals.values()) == pytest.approx(totals["least-total"], rel=1e-6)
    assert min(worsts.values()) == pytest.approx(worsts["least-worst"], rel=1e-6)
    assert min(burnt.values()) == pytest.approx(burnt["least-propellant"], rel=1e-6)


@pytest.mark.parametrize("to", ["far", "still", "free"])
def test_quote_goes_to_every_rule_and_each_slot_is_filled_once(tern, to):
    nodes = fh.quote(tern, to=to, over_days=45.0).nodes
    slots = tern.formation(to).slots
    assert sorted(nodes["slot"]) == sorted(slots.slot)
    classes = dict(zip(slots.slot, slots.class_name, strict=True))
    assert nodes["class"].tolist() == [classes[name] for name in nodes["slot"]]
    assert set(nodes["formation"]) == {to}


def test_quote_back_to_where_the_swarm_is_costs_nothing(tern):
    quote = fh.quote(tern, to="nearby", over_days=30.0, horizon_days=100.0)
    assert quote.summary["dv"]["total_m_s"] == 0.0
    assert quote.summary["moved"] == 0
    assert len(quote.impulses) == 0
    assert quote.summary["holding"]["net_total_m_s"] == 0.0


def test_quote_leaves_extra_nodes_in_their_slot_under_its_whole_name(tern):
    # the old formation's name is longer than the new one's
    quote = fh.quote(tern, to="six", over_days=30.0)
    nodes = quote.nodes
    assert (nodes["formation"] == "six").sum() == 6
    assert set(nodes["formation"]) == {"six", "nearby"}
    stays = nodes[nodes["formation"] == "nearby"]
    assert (stays["class"] == "hub").sum() == 3
    assert not stays[["dv_total_m_s", "propellant_kg", "margin_kg", "impulses"]].to_numpy().any()
    assert quote.notes[0] == "6 of 12 nodes keep the slot they hold and pay nothing"
    assert len(quote.impulses) == 12


def test_quote_lets_nodes_that_stay_hold_their_slot_all_the_while(tern):
    # to a horizon at the arrival only those that stay hold anything new: what they hold of the old
    quote = fh.quote(tern, from_="still", to="six", over_days=30.0)
    stays = quote.nodes[quote.nodes["impulses"] == 0]
    held = stays["holding_after_m_s_yr"].sum() * 30.0 / 365.25
    assert set(stays["formation"]) == {"still"}
    assert held > 0.1
    assert quote.summary["holding"]["new_total_m_s"] == pytest.approx(held, rel=1e-9)
    assert quote.summary["holding"]["old_total_m_s"] > held


@pytest.mark.parametrize("old", ["nearby", "far", "still", "free"])
@pytest.mark.parametrize("new", ["nearby", "far", "still", "free", "six"])
def test_quote_from_every_rule_to_every_rule_is_proven_and_hits(tern, old, new):
    summary = fh.quote(tern, from_=old, to=new, over_days=45.0).summary
    assert summary["assignment"]["proven"] is True
    assert abs(summary["assignment"]["map_error_m_s"]) <= summary["floor"]["remainder_m_s"]
    assert summary["targeting"]["max_miss_m"] < 0.1
    assert (summary["dv"]["total_m_s"] == 0.0) == (old == new)


def test_quote_brings_a_scattered_swarm_together(tern, tmp_path):
    ledger = fh.Ledger.create(tmp_path / "book", tern)
    ledger.post(fh.quote(tern, to="six", over_days=20.0, ledger=ledger.path))
    away = set(ledger.roster().query("formation == 'six'")["node"])
    back = fh.quote(tern, to="nearby", over_days=20.0, ledger=ledger.path).nodes
    assert len(away) == 6
    assert set(back["node"][back["impulses"] == 2]) == away
    assert set(back["formation"]) == {"nearby"}
    assert back["slot"].is_unique


def test_quote_of_a_hurry_beyond_every_tank_is_priced_and_affordable_to_nobody(tern):
    summary = fh.quote(tern, to="far", over_days=1e-4).summary
    assert summary["affordable"] is False
    assert summary["cannot_afford"] == tern.nodes.node.tolist()
    assert (summary["life_after"]["min_years"], summary["life_after"]["capped"]) == (0.0, False)
    json.dumps(summary, allow_nan=False)


def tank(make_case, kilograms):
    return make_case({'propellant = "0.30 kg"': f'propellant = "{kilograms!r} kg"'})


def test_quote_is_affordable_exactly_down_to_its_bound(make_case):
    # dry mass, residual, contingency, both impulses with their margins: the least tank of the dearest probe
    def short_of(kilograms):
        quote = fh.quote(tank(make_case, kilograms), to="far", over_days=30.0)
        nodes = quote.nodes[quote.nodes["class"] == "probe"]
        spare = nodes["usable_kg"] - nodes["margin_kg"]
        return float(-spare.min()), quote

    kilograms = 0.30
    for _ in range(9):
        kilograms += short_of(kilograms)[0]
    assert abs(short_of(kilograms)[0]) < 1e-9
    assert short_of(kilograms + 1e-8)[1].summary["affordable"] is True
    poor = short_of(kilograms - 1e-8)[1]
    assert poor.summary["affordable"] is False
    assert poor.affordable is False
    assert poor.summary["cannot_afford"] == [poor.summary["dv"]["max_node"]]


def test_quote_contingency_is_kept_back(make_case):
    rich = fh.quote(make_case(), to="far", over_days=30.0)
    swaps = {'contingency = { dv = "0.2 m/s"': 'contingency = { dv = "12 m/s"'}
    poor = fh.quote(make_case(swaps, name="poor.toml"), to="far", over_days=30.0)
    assert rich.summary["dv"]["total_m_s"] == poor.summary["dv"]["total_m_s"]
    dry, load, isp = 9.4, 0.3, ISP_S["probe"]
    held = (dry + 0.02 * load) * (math.exp(12.0 / (isp * G0)) - math.exp(0.2 / (isp * G0)))
    probes = (rich.nodes["class"] == "probe").to_numpy()
    np.testing.assert_allclose((rich.nodes["usable_kg"] - poor.nodes["usable_kg"])[probes], held, rtol=1e-9)
    assert rich.summary["affordable"] is True
