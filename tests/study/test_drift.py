"""The drift study: accepted distances, distributions in closed form, the linear map, bits and refusals."""

import json
import math

import numpy as np
import pytest
from scipy import stats

from farhold.domain.epoch import DAY_S
from farhold.dynamics.circular import lightness
from farhold.dynamics.dispersion import carried_covariance
from farhold.errors import CaseError
from farhold.study.drift import drift
from farhold.study.setting import reference_of

# design section 8, the document "drift", written out by hand
FIELDS = {
    "kind": None,
    "schema": None,
    "case": None,
    "formation": None,
    "for_days": None,
    "nodes": None,
    "samples": None,
    "seed": None,
    "lane": None,
    "model": None,
    "displacement_km": {"day", "p50", "p95", "p99", "max"},
    "by_axis_km": {"day", "r_p95", "t_p95", "n_p95"},
    "distortion": {"rms_relative", "worst_relative"},
    "leaves_tolerance_days": {"p05", "p50"},
    "closest": {"distance_m", "pair", "day"},
    "link_breaks": {"nodes", "first_day"},
    "seconds": None,
    "provenance": {"farhold", "case_sha256", "ledger_head", "seed", "numpy", "numba", "cpu"},
}
# hubs with the same pressure per mass as probes: 1.3 x 0.09 / 9.7 = 1.25 x 0.46317526 / 48
ALIKE = {'solar_area = "0.5 m2"': 'solar_area = "0.46317526 m2"'}
AREA_M2_KG = 1.3 * 0.09 / 9.7
OUT = """
[formation.out]
rule = "{rule}"
[[formation.out.slots]]
file = "out.csv"
"""


@pytest.fixture
def at_place(make_case, tmp_path):
    """Loads a case of 12 nodes in file along T, 300 m apart, from a place on: at_place(place_km, ...)."""

    def make(place_km, errors="", rule="rotating"):
        x, y, z = place_km
        rows = [f"s{k},{'hub' if k < 3 else 'probe'},{x},{y + 0.3 * k},{z}" for k in range(12)]
        (tmp_path / "out.csv").write_text("slot,class,x_km,y_km,z_km\n" + "\n".join(rows) + "\n")
        section = f"[errors]\n{errors}\n" if errors else ""
        return make_case(ALIKE, more=OUT.format(rule=rule) + section)

    return make


def by_day(summary, day):
    return next(row for row in summary["displacement_km"] if row["day"] == day)


@pytest.fixture
def let_go(at_place):
    """Drifts the twelve from a place: let_go(place_km, errors, **options of drift)."""

    def run(place_km, errors="", **options):
        options = {"for_days": 1.0, "samples": 1, "pair_samples": 0, **options}
        return drift(at_place(place_km, errors), "out", **options)

    return run


@pytest.mark.parametrize(("day", "km"), [(7.0, 21.8), (30.0, 413.6), (90.0, 4407.0), (365.25, 37697.0)])
def test_a_thousand_kilometres_out_nodes_fall_away_as_accepted(let_go, day, km):
    # design section 4 and W4, 1 %; bins are 1 % wide, the largest is exact
    found = let_go((1000.0, 0.0, 0.0), for_days=day)
    assert by_day(found.summary, day)["max"] == pytest.approx(km, rel=0.01)
    assert by_day(found.summary, day)["p50"] == pytest.approx(km, rel=0.02)


def test_spread_of_pressure_carries_nodes_apart_as_accepted(let_go):
    # design section 4: 10 % of A/m 0.02, C_R 1.3 is 2.16 km in 7 d; here less area by AREA / 0.026. Nearly all
    # along R, so that the size is half-normal
    found = let_go((0.0, 0.0, 0.0), 'area_spread = "10 %"', for_days=7.0, samples=300)
    sigma_km = 2.16 * AREA_M2_KG / 0.026
    rms = np.sqrt(np.mean(found.tables["nodes"]["rms_km"] ** 2))
    # 3600 draws: 1.2 %
    assert rms == pytest.approx(sigma_km, rel=0.04)
    assert by_day(found.summary, 7.0)["p50"] == pytest.approx(stats.halfnorm.ppf(0.5) * sigma_km, rel=0.06)
    assert by_day(found.summary, 7.0)["p95"] == pytest.approx(stats.halfnorm.ppf(0.95) * sigma_km, rel=0.06)


@pytest.mark.parametrize(("name", "p"), [("p50", 0.5), ("p95", 0.95), ("p99", 0.99)])
def test_quantiles_of_release_speeds_are_maxwells(let_go, name, p):
    # isotropic rates over a time much shorter than 1/n: distances are Maxwell's, axes half-normal
    found = let_go((0.0, 0.0, 0.0), 'release_speed = "1 cm/s"', samples=400)
    sigma_km = 0.01 * DAY_S / 1e3
    law = stats.maxwell(scale=sigma_km)
    # 4800 draws: standard error of a quantile, four of them, and half a bin of 1 %
    value = law.ppf(p)
    slack = 4.0 * math.sqrt(p * (1.0 - p) / 4800) / law.pdf(value) + 0.005 * value
    assert by_day(found.summary, 1.0)[name] == pytest.approx(value, abs=slack)
    axes = next(row for row in found.summary["by_axis_km"] if row["day"] == 1.0)
    half = stats.halfnorm(scale=sigma_km)
    edge = half.ppf(0.95)
    slack = 4.0 * math.sqrt(0.95 * 0.05 / 4800) / half.pdf(edge) + 0.005 * edge
    assert [axes[key] for key in ("r_p95", "t_p95", "n_p95")] == pytest.approx([edge] * 3, abs=slack)


@pytest.mark.parametrize("day", [30.0, 180.0])
def test_spread_on_each_axis_is_that_of_the_linear_map(let_go, at_place, day):
    errors = 'navigation_position = "50 m"\nnavigation_velocity = "2 mm/s"\nrelease_speed = "3 mm/s"\n'
    errors += 'area_spread = "2 %"'
    found = let_go((0.0, 0.0, 0.0), errors, for_days=day, samples=200)
    reference = reference_of(at_place((0.0, 0.0, 0.0), errors))
    start = np.diag([50.0**2] * 3 + [(2e-3) ** 2 + (3e-3) ** 2] * 3)
    sigma = 0.02 * lightness(AREA_M2_KG)
    covariance = carried_covariance(reference, start, 0.0, day * DAY_S, pressure_sigma=sigma)[0]
    expected = stats.norm.ppf(0.975) * np.sqrt(np.diag(covariance)[:3]) / 1e3
    axes = next(row for row in found.summary["by_axis_km"] if row["day"] == day)
    # 2400 draws: the 95 % of |x| has a standard error of 2 %
    assert [axes[key] for key in ("r_p95", "t_p95", "n_p95")] == pytest.approx(expected, rel=0.08)


def test_velocity_known_to_a_tenth_of_a_millimetre_a_second(let_go):
    # design section 4: 280/251/248 m R/T/N in 30 d, 1 sigma
    found = let_go((0.0, 0.0, 0.0), 'navigation_velocity = "0.1 mm/s"', for_days=30.0, samples=300)
    axes = found.summary["by_axis_km"][-1]
    sigma_m = [axes[key] * 1e3 / stats.norm.ppf(0.975) for key in ("r_p95", "t_p95", "n_p95")]
    assert sigma_m == pytest.approx([280.0, 251.0, 248.0], rel=0.06)


def test_swarm_without_errors_at_the_reference_stays(let_go):
    found = let_go((0.0, 0.0, 0.0), for_days=30.0)
    # slots a few metres along T: pulled by less than 1e-5 n2 of that
    assert by_day(found.summary, 30.0)["max"] < 1e-4
    assert found.summary["leaves_tolerance_days"] == {"p05": None, "p50": None}
    assert found.summary["distortion"]["worst_relative"] < 1e-3


def test_day_on_which_nodes_leave_their_boxes(let_go):
    # at 1 cm/s per axis a node is 2 km away after t = 2 km / v; Maxwell's 95 % and 50 % speeds
    found = let_go((0.0, 0.0, 0.0), 'release_speed = "1 cm/s"', for_days=30.0, samples=300)
    leaves = found.summary["leaves_tolerance_days"]
    law = stats.maxwell(scale=0.01)
    expected = [2e3 / law.ppf(p) / DAY_S for p in (0.95, 0.5)]
    # the days looked at are apart: read between them, by a power of time
    assert [leaves["p05"], leaves["p50"]] == pytest.approx(expected, rel=0.06)


def test_links_break_when_members_pass_the_range_of_their_hubs(at_place):
    # 9 probes and 3 hubs fall along the same path; a release at 10 m/s parts them by 500 km in about a day
    calm = drift(at_place((0.0, 0.0, 0.0)), "out", for_days=10.0, samples=1, pair_samples=1)
    assert calm.summary["link_breaks"] == {"nodes": 0, "first_day": None}
    wild = drift(
        at_place((0.0, 0.0, 0.0), 'release_speed = "10 m/s"'), "out", for_days=10.0, samples=1, pair_samples=1
    )
    assert wild.summary["link_breaks"]["nodes"] == 9
    assert wild.summary["link_breaks"]["first_day"] in (0.25, 0.5, 1.0)


def test_closest_pair_is_that_of_the_single_file(let_go):
    found = let_go((0.0, 0.0, 0.0), for_days=1.0)
    closest = found.summary["closest"]
    assert closest["distance_m"] == pytest.approx(300.0, rel=1e-4)
    assert len(set(closest["pair"])) == 2


# ---- documents and tables -------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def found(tern):
    return drift(tern, "nearby", for_days=45.0, samples=3)


def test_document_has_exactly_the_fields_of_the_design(found):
    summary = found.summary
    assert set(summary) == set(FIELDS)
    nested = {
        name: set(value[0] if isinstance(value, list) else value)
        for name, value in summary.items()
        if isinstance(value, list | dict)
    }
    assert nested == {name: keys for name, keys in FIELDS.items() if keys is not None}
    assert (summary["kind"], summary["schema"], summary["lane"], summary["model"]) == (
        "drift",
        1,
        "full",
        "circular",
    )
    json.dumps(summary, allow_nan=False)


def test_days_looked_at_rise_to_the_last(found):
    days = [row["day"] for row in found.summary["displacement_km"]]
    assert days == sorted(days)
    assert days[-1] == 45.0
    assert days == [row["day"] for row in found.summary["by_axis_km"]]


def test_tables_have_a_row_for_each_node_day_and_bin(found):
    assert set(found.tables) == {"nodes", "displacement", "baselines"}
    nodes = found.tables["nodes"]
    assert list(nodes["node"]) == [f"H{k:02}" for k in range(1, 4)] + [f"P{k:02}" for k in range(1, 10)]
    assert (nodes["mean_km"] <= nodes["rms_km"] * (1.0 + 1e-12)).all()
    assert (nodes["rms_km"] <= nodes["max_km"] * (1.0 + 1e-12)).all()
    baselines = found.tables["baselines"]
    assert baselines["before"].sum() == baselines["after"].sum() > 0
    assert (baselines["from_km"].to_numpy()[1:] == baselines["to_km"].to_numpy()[:-1]).all()


def test_few_draws_are_said_to_support_no_99_percent(found):
    assert "the 99 % quantile rests on 36 draws; it needs about 1,000" in found.notes


def test_enough_draws_bring_no_warning(let_go):
    notes = let_go((0.0, 0.0, 0.0), samples=84).notes
    assert not any("rests on" in note for note in notes)


def test_unstable_motion_is_said(make_case):
    case = make_case({'point = "L4"': 'point = "L2"', 'rule = "natural"': 'rule = "rotating"'})
    notes = drift(case, "still", for_days=75.0, samples=1, pair_samples=0).notes
    assert "the motion here is unstable: over this span errors grow more than twentyfold" in notes


# ---- bits -----------------------------------------------------------------------------------------------------

SHORT = {"for_days": 10.0, "samples": 4}
ERRORS = '[errors]\nrelease_speed = "1 cm/s"\narea_spread = "3 %"\nnavigation_velocity = "1 mm/s"\n'


def test_same_seed_same_bits_for_any_thread_count_and_with_or_without_a_folder(make_case, tmp_path, set_threads):
    case = make_case(more=ERRORS)
    digests = {
        drift(case, "far", threads=threads, folder=folder, **SHORT).digest
        for threads, folder in [(1, None), (2, None), (2, tmp_path / "kept")]
    }
    assert len(digests) == 1


def test_other_seeds_draw_otherwise(make_case):
    case = make_case(more=ERRORS)
    found = [drift(case, "far", seed=seed, **SHORT) for seed in (1, 2)]
    assert found[0].digest != found[1].digest
    assert [one.summary["seed"] for one in found] == [1, 2]


# ---- refusals -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("formation", "options", "text"),
    [
        (
            "farr",
            {},
            "--formation: there is no formation 'farr' "
            "(allowed: nearby, far, still, free, six; did you mean 'far'?)",
        ),
        ("far", {"samples": 0}, "--samples: got 0 (allowed: 1 or more)"),
        ("far", {"pair_samples": -1}, "--pair-samples: got -1 (allowed: 0 or more)"),
        ("far", {"for_days": 0.0}, "--for: got 0 d (allowed: above 0 d, up to 100 years)"),
        ("far", {"for_days": math.nan}, "--for: got nan d (allowed: above 0 d, up to 100 years)"),
        ("far", {"for_days": 40000.0}, "--for: got 40000 d (allowed: above 0 d, up to 100 years)"),
    ],
)
def test_argument_out_of_range_is_refused_and_nothing_written(tern, tmp_path, formation, options, text):
    with pytest.raises(CaseError) as caught:
        drift(tern, formation, folder=tmp_path / "kept", **{**SHORT, **options})
    assert str(caught.value) == text
    assert not (tmp_path / "kept").exists()


def test_fast_lane_finds_what_the_full_lane_finds_and_says_how_far_it_is_off(at_place):
    case = at_place((1000.0, 0.0, 0.0), 'release_speed = "1 cm/s"')
    full, fast = (drift(case, "out", for_days=120.0, samples=5, lane=lane) for lane in ("full", "fast"))
    assert fast.summary["lane"] == "fast"
    # the same draws on both lanes; maps of order 2 are off by some centimetres after 120 d at 1000 km
    difference_km = np.abs(full.tables["nodes"]["max_km"] - fast.tables["nodes"]["max_km"])
    assert difference_km.max() < 1e-3
    said = next(note for note in fast.notes if note.startswith("flown by second-order maps"))
    assert "off by at most" in said


def test_unknown_lane_is_refused(tern):
    with pytest.raises(CaseError, match="--lane: there is no lane 'slow'"):
        drift(tern, "nearby", for_days=10.0, lane="slow")
