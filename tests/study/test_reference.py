"""References from Python: they give what the floors below give, and refuse what is not lawful."""

import numpy as np
import pytest

import farhold as fh
from farhold.study.reference import ReferenceTrajectory


@pytest.fixture(scope="module")
def ref():
    return fh.reference("L4", epoch="2035-03-20", pressure_m2_kg=0.026)


def test_free_drift_from_rest_goes_the_accepted_way(ref):
    # design section 4, R 1000 km from rest, within 1 %
    states = np.array([[1e6, 0, 0, 0, 0, 0]])
    flown = ref.fly(states, [7, 30, 90, 365.25])
    away = np.linalg.norm((flown - states[:, None])[0, :, :3], axis=1) / 1e3
    np.testing.assert_allclose(away, [21.8, 413.6, 4407.0, 37697.0], rtol=0.01)


def test_reference_itself_stays_where_it_is(ref):
    assert not ref.fly(np.zeros((1, 6)), [100.0]).any()


def test_transitions_follow_one_another(ref):
    whole = ref.transition(0.0, 90.0)
    np.testing.assert_allclose(ref.transition(30.0, 90.0) @ ref.transition(0.0, 30.0), whole, rtol=1e-9, atol=1e-9)
    assert np.linalg.det(whole) == pytest.approx(1.0, rel=1e-9)


def test_impulses_of_a_plan_flown_by_the_user_hit_the_target(ref):
    rng = np.random.default_rng(2)
    start, end = (np.hstack([rng.normal(size=(4, 3)) * 5e5, np.zeros((4, 3))]) for _ in range(2))
    plan = ref.two_point(start, end, 40.0, depart_days=3.0, pressure_m2_kg=[0.026, 0.03, 0.02, 0.0])
    ends = ref.fly(
        start,
        [43.0],
        start_days=3.0,
        pressure_m2_kg=[0.026, 0.03, 0.02, 0.0],
        impulses=([3.0, 43.0], np.stack([plan.dv_depart_m_s, plan.dv_arrive_m_s], axis=1)),
    )[:, 0]
    assert np.linalg.norm((ends - end)[:, :3], axis=1).max() < 0.1
    assert np.abs((ends - end)[:, 3:]).max() < 1e-6


def test_pressure_of_the_reference_is_the_default(ref):
    states = np.array([[1e5, 0, 0, 0, 0, 0.0]])
    np.testing.assert_array_equal(ref.fly(states, [20.0]), ref.fly(states, [20.0], pressure_m2_kg=0.026))


def test_pairing_reaches_every_target_once(ref):
    rng = np.random.default_rng(3)
    start, end = (np.hstack([rng.normal(size=(k, 3)) * 5e5, np.zeros((k, 3))]) for k in (9, 7))
    found = fh.assign(ref, start, end, 30.0)
    assert sorted(found.slot_of[found.slot_of >= 0]) == list(range(7))
    assert found.lower_bound <= found.value
    assert found.prices.shape == (7,)


def test_pairing_with_no_target_leaves_all_where_they_are(ref):
    assert fh.assign(ref, np.zeros((2, 6)), np.zeros((0, 6)), 30.0).slot_of.tolist() == [-1, -1]


WRONG = {
    "point": (lambda ref: fh.reference("L9"), "reference.point: got 'L9' (allowed: L1 L2 L3 L4 L5)"),
    "model": (lambda ref: fh.reference("L4", model="ephemeris"), "model: got 'ephemeris' (allowed: circular)"),
    "option": (
        lambda ref: fh.reference("L4", az="1 km"),
        "reference: the kind 'equilibrium' takes no az (allowed: no further options)",
    ),
    "pressure": (
        lambda ref: fh.reference("L4", pressure_m2_kg=-1.0),
        "reference.pressure_area: got -1.0 m2/kg (allowed: 0 m2/kg or above)",
    ),
    "time": (
        lambda ref: ref.two_point(np.zeros((1, 6)), np.zeros((1, 6)), 0.0),
        "over_days: got 0.0 (allowed: above 0)",
    ),
    "rows": (
        lambda ref: ref.two_point(np.zeros((1, 6)), np.zeros((2, 6)), 9.0),
        "targets: 2 rows (allowed: 1 rows, as many as states)",
    ),
    "shape": (
        lambda ref: ref.two_point(np.zeros((1, 5)), np.zeros((1, 6)), 9.0),
        "states: shape (1, 5) (allowed: shape (n, 6), finite)",
    ),
    "surface": (
        lambda ref: ref.fly(np.zeros((2, 6)), [1.0], pressure_m2_kg=[0.1, 0.1, 0.1]),
        "pressure_m2_kg: shape (3,) (allowed: one or 2 numbers, 0 or above)",
    ),
    "objective": (
        lambda ref: fh.assign(ref, np.zeros((1, 6)), np.zeros((1, 6)), 9.0, objective="best"),
        "objective: got 'best' (allowed: least-total least-propellant least-worst)",
    ),
}


@pytest.mark.parametrize(("call", "text"), WRONG.values(), ids=WRONG)
def test_reference_refuses_what_is_not_lawful(ref, call, text):
    with pytest.raises(fh.FarholdError) as caught:
        call(ref)
    assert str(caught.value) == text
    assert caught.value.exit_code == 2


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_targets_must_be_finite(ref, bad):
    with pytest.raises(fh.FarholdError, match="targets: shape"):
        ref.two_point(np.zeros((1, 6)), np.full((1, 6), bad), 9.0)


def test_more_targets_than_nodes_are_refused(ref):
    with pytest.raises(fh.CaseError, match="3 slots for class node but 2 nodes"):
        fh.assign(ref, np.zeros((2, 6)), np.zeros((3, 6)), 9.0)


def test_reference_knows_its_pressure(ref):
    assert isinstance(ref, ReferenceTrajectory)
    assert ref.pressure_m2_kg == 0.026
