"""The holding study: documents, tables, what its errors change, bits, statistics and refusals."""

import json

import numpy as np
import pytest

from farhold.errors import CaseError, DomainError, FarholdError
from farhold.planning.holding.price import holding_m_s
from farhold.study.hold import hold
from farhold.study.setting import setting_of

G0 = 9.80665
# design section 8, the document "hold", written out by hand
FIELDS = {
    "kind": None,
    "schema": None,
    "case": None,
    "formation": None,
    "policy": None,
    "for_days": None,
    "nodes": None,
    "samples": None,
    "seed": None,
    "lane": None,
    "model": None,
    "dv_per_year": {
        "mean_m_s",
        "p50_m_s",
        "p95_m_s",
        "p99_m_s",
        "max_m_s",
        "max_node",
        "continuous_m_s",
        "ratio",
    },
    "startup": {"mean_m_s", "max_m_s"},
    "impulses_per_year": None,
    "violations": {"share", "worst_m", "nodes"},
    "propellant": {"total_kg", "max_kg"},
    "interval_95": {"mean_m_s", "p99_m_s"},
    "seconds": None,
    "provenance": {"farhold", "case_sha256", "ledger_head", "seed", "numpy", "numba", "cpu"},
}
ERRORS = """
[errors]
navigation_position = "1 m"
navigation_velocity = "0.1 mm/s"
execution_magnitude = "1 %"
execution_pointing = "1 deg"
area_spread = "3 %"
"""
SHORT = {"for_days": 91.0, "samples": 4}


@pytest.fixture(scope="module")
def found(tern):
    return hold(tern, "nearby", for_days=379.25, samples=3, policy="revisit")


@pytest.fixture
def noisy(make_case):
    return make_case(more=ERRORS)


def test_document_has_exactly_the_fields_of_the_design(found):
    summary = found.summary
    assert set(summary) == set(FIELDS)
    nested = {name: set(value) for name, value in summary.items() if isinstance(value, dict)}
    assert nested == {name: keys for name, keys in FIELDS.items() if keys is not None}
    assert (summary["kind"], summary["schema"], summary["lane"], summary["model"]) == (
        "hold",
        1,
        "fast",
        "circular",
    )
    json.dumps(summary, allow_nan=False)


def test_table_has_a_row_for_each_node(found):
    nodes = found.tables["nodes"]
    assert list(nodes["node"]) == [f"H{k:02}" for k in range(1, 4)] + [f"P{k:02}" for k in range(1, 10)]
    assert np.isfinite(nodes.select_dtypes("number")).all().all()
    assert (nodes["dv_mean_m_s_yr"] <= nodes["dv_max_m_s_yr"] * (1.0 + 1e-12)).all()


def test_summary_is_that_of_the_table(found):
    nodes, summary = found.tables["nodes"], found.summary
    assert summary["dv_per_year"]["mean_m_s"] == pytest.approx(nodes["dv_mean_m_s_yr"].mean(), rel=1e-12)
    assert summary["dv_per_year"]["max_m_s"] == nodes["dv_max_m_s_yr"].max()
    assert summary["dv_per_year"]["max_node"] == nodes["node"][nodes["dv_max_m_s_yr"].argmax()]
    assert summary["propellant"]["total_kg"] == pytest.approx(nodes["propellant_mean_kg"].sum(), rel=1e-12)
    assert summary["violations"]["worst_m"] == nodes["worst_m"].max()


def test_nodes_without_errors_pay_near_the_continuous_price_of_their_slots(tern, found):
    setting = setting_of(tern, "nearby")
    place = np.stack([slot_place(tern, "nearby", slot) for slot in found.tables["nodes"]["slot"]])
    span_s = 379.25 * 86400.0
    price = holding_m_s(setting.reference, np.full(12, "inertial"), place, 0.0, 0.0, span_s, setting.excess_beta)
    continuous = price * 365.25 / 379.25
    np.testing.assert_allclose(found.tables["nodes"]["continuous_m_s_yr"], continuous, rtol=1e-9)
    # nodes far out in the plane pay less by weekly visits: 1.915 for 1.929
    np.testing.assert_allclose(found.tables["nodes"]["dv_mean_m_s_yr"], continuous, rtol=0.05)
    assert found.summary["dv_per_year"]["ratio"] == pytest.approx(1.0, abs=0.02)


def slot_place(case, formation, slot):
    slots = case.formation(formation).slots
    return slots.position_m[list(slots.slot).index(slot)]


def test_propellant_follows_from_all_burns_by_the_rocket_equation(tern):
    found = hold(tern, "still", for_days=91.0, samples=1, policy="revisit")
    nodes = found.tables["nodes"]
    mass = np.where(nodes["class"] == "hub", 48.0, 9.7)
    isp = np.where(nodes["class"] == "hub", 210.0, 65.0 * 0.9)
    # twelve decisions and the first: eleven whole cadences are steady
    total = nodes["startup_mean_m_s"] + nodes["dv_mean_m_s_yr"] * 11 * 7.0 / 365.25
    np.testing.assert_allclose(nodes["propellant_mean_kg"], mass * -np.expm1(-total / (isp * G0)), rtol=1e-9)


def test_start_up_is_told_apart(make_case):
    # nodes go from rest: the first burn throws by half a cadence's pull, the second by a whole one's
    found = hold(make_case(), "nearby", for_days=91.0, samples=1, policy="revisit")
    week = 7.0 / 365.25
    pull = found.summary["dv_per_year"]["continuous_m_s"]
    assert found.summary["startup"]["mean_m_s"] == pytest.approx(1.5 * week * pull, rel=0.2)


@pytest.mark.parametrize("policy", ["box", "revisit", "target-point", "unstable-mode"])
def test_policy_by_name_is_run_and_named(tern, policy):
    assert hold(tern, "nearby", policy=policy, **SHORT).summary["policy"] == policy


def test_default_policy_is_the_cases(make_case):
    case = make_case(more='[holding]\npolicy = "revisit"\n')
    assert hold(case, "nearby", **SHORT).summary["policy"] == "revisit"


def test_box_smaller_than_the_swing_is_a_violation_and_not_a_refusal(make_case):
    # 700 km out: 2.6 m/s a year at most, a T2/8 = 3.8 km in a week
    small = make_case(more='[holding]\nbox = "100 m"\n')
    wide = make_case(more='[holding]\nbox = "6 km"\n')
    outside = [hold(case, "far", **SHORT).summary["violations"] for case in (small, wide)]
    assert outside[0]["nodes"] == 12
    assert outside[0]["share"] > 0.5
    assert outside[1] == {"share": 0.0, "worst_m": outside[1]["worst_m"], "nodes": 0}


def test_unfiltered_fixes_cost_more_and_are_said(make_case):
    case = make_case(more=ERRORS)
    with_filter, without = (hold(case, "nearby", filtered=on, **SHORT) for on in (True, False))
    assert without.summary["dv_per_year"]["mean_m_s"] > with_filter.summary["dv_per_year"]["mean_m_s"]
    assert without.notes[0].endswith("fixes filtered not at all")


# ---- rates ----------------------------------------------------------------------------------------------------


def with_rates(make_case, text):
    return make_case(more=f"{ERRORS}{text}\n")


def test_failures_are_counted_and_leave_the_price_alone(make_case):
    plain = hold(with_rates(make_case, ""), "still", for_days=364.0, samples=30, policy="revisit")
    mortal = hold(
        with_rates(make_case, '[rates]\nfailures_per_year = "50 %"'),
        "still",
        for_days=364.0,
        samples=30,
        policy="revisit",
    )
    note = next(note for note in mortal.notes if "fail before the end" in note)
    # 360 draws, half of them: 180 +- 9.5; some fail before they can be counted
    assert int(note.split()[0]) == pytest.approx(180, abs=40)
    # rotating slots have a steady pull: short lives pay at the same rate
    assert mortal.summary["dv_per_year"]["mean_m_s"] == pytest.approx(
        plain.summary["dv_per_year"]["mean_m_s"], rel=0.03
    )
    assert mortal.summary["propellant"]["total_kg"] < 0.9 * plain.summary["propellant"]["total_kg"]
    assert not any("fail" in note for note in plain.notes)


def test_missed_burns_lessen_the_burns(make_case):
    plain = hold(with_rates(make_case, ""), "nearby", for_days=364.0, samples=10, policy="revisit")
    missing = hold(
        with_rates(make_case, '[rates]\nmissed_burns = "20 %"'),
        "nearby",
        for_days=364.0,
        samples=10,
        policy="revisit",
    )
    share = missing.summary["impulses_per_year"] / plain.summary["impulses_per_year"]
    # 120 x 50 decisions: 0.8 +- 0.005
    assert share == pytest.approx(0.8, abs=0.02)
    assert missing.summary["violations"]["worst_m"] > plain.summary["violations"]["worst_m"]


@pytest.mark.parametrize(
    "blind", ['drop_outs = "60 %"', 'gaps = [["2035-04-01T00:00:00", "2035-06-10T00:00:00"]]']
)
def test_fewer_fixes_leave_nodes_farther_from_their_slots(make_case, blind):
    noise = '[errors]\nnavigation_position = "10 m"\nnavigation_velocity = "1 mm/s"\n'
    noise += 'unmodelled_acceleration = "3e-9 m/s2"\n'
    plain = hold(make_case(more=noise), "nearby", policy="revisit", for_days=91.0, samples=20)
    fewer = hold(make_case(more=noise + blind + "\n"), "nearby", policy="revisit", for_days=91.0, samples=20)
    assert fewer.tables["nodes"]["rms_m"].mean() > 1.02 * plain.tables["nodes"]["rms_m"].mean()
    assert not any("fail" in note for note in fewer.notes)


def test_impulse_bit_suppresses_burns_below_it(make_case):
    # 0.5 N s on 9.7 kg is 5 cm/s: a week of the pull here, 0.2 m/s a year, is 4 mm/s, so that burns are put off
    # for a month until they are large enough; hubs have no bit
    case = make_case(
        {'impulse_bit = "0.5 mN s"': 'impulse_bit = "500 mN s"'}, more='[holding]\npolicy = "revisit"\n'
    )
    nodes = hold(case, "nearby", for_days=42.0, samples=1).tables["nodes"].set_index("class")
    assert (nodes.loc["probe", "impulses_per_year"] < 14.0).all()
    assert (nodes.loc["hub", "impulses_per_year"] > 50.0).all()


# ---- statistics -----------------------------------------------------------------------------------------------


def test_interval_holds_the_mean_and_shrinks_with_the_samples(noisy):
    few, many = (hold(noisy, "nearby", for_days=91.0, samples=samples).summary for samples in (5, 80))
    widths = [one["interval_95"]["mean_m_s"][1] - one["interval_95"]["mean_m_s"][0] for one in (few, many)]
    assert widths[1] < 0.5 * widths[0]
    low, high = many["interval_95"]["mean_m_s"]
    assert low < many["dv_per_year"]["mean_m_s"] < high


def test_interval_covers_the_mean_of_many_draws_about_as_often_as_it_says(noisy):
    # short; benchmarks/studies/intervals.py runs hundreds. The truth: ten times as many draws
    short = {"for_days": 35.0, "policy": "revisit"}
    truth = hold(noisy, "nearby", samples=2000, seed=99, **short).summary["dv_per_year"]["mean_m_s"]
    covered = 0
    for seed in range(40):
        low, high = hold(noisy, "nearby", samples=8, seed=seed, **short).summary["interval_95"]["mean_m_s"]
        covered += low <= truth <= high
    # binomial (40, 0.95): fewer than 33 has a chance of 3e-3
    assert covered >= 33


def test_few_draws_are_said_to_support_no_99_percent(found):
    assert "the 99 % quantile rests on 36 draws; it needs about 1,000" in found.notes


def test_one_sample_has_no_interval_and_says_so(tern):
    found = hold(tern, "nearby", for_days=91.0, samples=1)
    assert found.summary["interval_95"]["mean_m_s"] == [None, None]
    assert "one sample gives no interval for the mean; ask for two or more" in found.notes


def test_fixes_too_far_apart_for_unstable_motion_are_said(make_case):
    noise = '[errors]\nmeasurement_cadence = "42 d"\nnavigation_velocity = "1 mm/s"\n[holding]\ncadence = "42 d"\n'
    case = make_case({'point = "L4"': 'point = "L2"', 'rule = "natural"': 'rule = "rotating"'}, more=noise)
    notes = hold(case, "nearby", for_days=200.0, samples=2).notes
    assert any(note.startswith("up to 42 d pass without a fix") for note in notes)


# ---- bits -----------------------------------------------------------------------------------------------------


def test_same_seed_same_bits_for_any_thread_count_and_with_or_without_a_folder(noisy, tmp_path, set_threads):
    digests = {
        hold(noisy, "far", threads=threads, folder=folder, **SHORT).digest
        for threads, folder in [(1, None), (2, None), (3, None), (2, tmp_path / "kept")]
    }
    assert len(digests) == 1


def test_other_seeds_draw_otherwise(noisy):
    found = [hold(noisy, "far", seed=seed, **SHORT) for seed in (1, 2)]
    assert found[0].digest != found[1].digest
    assert [one.summary["seed"] for one in found] == [1, 2]


# ---- refusals -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("kind", "formation", "options", "text"),
    [
        (
            CaseError,
            "nearbye",
            {},
            "--formation: there is no formation 'nearbye' "
            "(allowed: nearby, far, still, free, six; did you mean 'nearby'?)",
        ),
        (
            CaseError,
            "far",
            {"policy": "revist"},
            "--policy: there is no policy 'revist' "
            "(allowed: box, revisit, target-point, unstable-mode; did you mean 'revisit'?)",
        ),
        (CaseError, "far", {"samples": 0}, "--samples: got 0 (allowed: 1 or more)"),
        (CaseError, "far", {"for_days": np.inf}, "--for: got inf d (allowed: above 0 d, up to 100 years)"),
        (CaseError, "far", {"for_days": np.nan}, "--for: got nan d (allowed: above 0 d, up to 100 years)"),
        (
            DomainError,
            "far",
            {"for_days": 20.0},
            "--for: 20 d hold no steady part (allowed: 21 d (three decisions) or more)",
        ),
    ],
)
def test_argument_out_of_range_is_refused_and_nothing_written(tern, tmp_path, kind, formation, options, text):
    with pytest.raises(kind) as caught:
        hold(tern, formation, folder=tmp_path / "kept", **{**SHORT, **options})
    assert str(caught.value) == text
    assert caught.value.exit_code == 2
    assert not (tmp_path / "kept").exists()


def test_span_beyond_the_reference_is_refused_and_nothing_written(make_case, tmp_path):
    tour = 'point = "L2"\nkind = "lissajous"\nay = "250000 km"\naz = "100000 km"\nspan = "300 d"'
    case = make_case({'point = "L4"': tour, 'rule = "natural"': 'rule = "rotating"'})
    with pytest.raises(DomainError, match="the span of the lissajous"):
        hold(case, "nearby", for_days=400.0, samples=1, folder=tmp_path / "kept")
    assert not (tmp_path / "kept").exists()


def test_cadences_without_a_common_step_are_refused(make_case):
    case = make_case(more='[errors]\nmeasurement_cadence = "25.1 h"\n')
    with pytest.raises(DomainError, match="have no common step"):
        hold(case, "nearby", **SHORT)


def test_formation_that_does_not_seat_every_node_is_refused(tern):
    # `six` has slots for six of the nine probes
    with pytest.raises(FarholdError) as caught:
        hold(tern, "six", **SHORT)
    assert caught.value.exit_code == 2


def test_nodes_under_two_rules_are_refused(make_case):
    hubs = '[[formation.six.slots]]\nclass = "hub"\nshape = "ring"\nradius = "60 km"\ncount = 3\n'
    head = '[formation.six]\nrule = "inertial"\n'
    case = make_case({head: head + 'spares = "still"\n' + hubs})
    with pytest.raises(CaseError) as caught:
        hold(case, "six", **SHORT)
    assert str(caught.value) == (
        "--formation: its nodes sit under more than one rule (inertial, rotating) "
        "(allowed: a formation that seats every node under one rule)"
    )
