"""The linear flow about slots, against matrix exponentials and flights on the full lane."""

import numpy as np
import pytest
from scipy.linalg import expm

from farhold.domain.epoch import DAY_S, Epoch
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.planning.holding.flow import flow, slot_turn
from farhold.planning.slots import slot_states

EPOCH = Epoch.from_iso("2035-03-20T00:00:00")
DAYS = (1.0, 7.0, 47.0, 180.0)
SCALE = np.array([1e3, 1e3, 1e3, 1e-3, 1e-3, 1e-3])


def plant_of(reference):
    """System matrix (9, 9) of state and constant acceleration, from the field at rest and Coriolis terms."""
    rate = reference.rate_rad_s
    matrix = np.zeros((9, 9))
    matrix[:3, 3:6] = np.eye(3)
    matrix[3:6, :3] = reference.field(np.eye(3), "rotating").T
    matrix[3:6, 3:6] = 2.0 * rate * np.array([[0.0, 1.0, 0.0], [-1.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
    matrix[3:6, 6:] = np.eye(3)
    return matrix


@pytest.mark.parametrize("point", ["L1", "L2", "L4", "L5"])
@pytest.mark.parametrize("which", range(len(DAYS)))
def test_flow_at_a_point_at_rest_is_the_matrix_exponential(equilibrium, point, which):
    reference = equilibrium(point)
    got = flow(reference, "rotating", 0.0, tuple(day * DAY_S for day in DAYS))
    exact = expm(plant_of(reference) * DAYS[which] * DAY_S)[:6]
    state, steady = exact[:, :6], exact[:, 6:]
    # field(eye) is the pull one metre out: linear to 1e-10 near the Earth
    assert np.abs(got.state[which] - state).max() <= 1e-7 * np.abs(state).max()
    np.testing.assert_allclose(got.steady[which], steady, rtol=1e-6, atol=1e-9 * np.abs(steady).max())


@pytest.mark.parametrize("day", DAYS[:3])
def test_flow_under_a_constant_pull_at_l4_is_the_response_to_pressure(ref_l4, day):
    # the pull of a small excess of pressure turns by less than its deviation over one astronomical unit
    span_s = day * DAY_S
    push = ref_l4.pressure_field(np.zeros((1, 3)))[0]
    response = ref_l4.pressure_response(0.0, span_s)
    got = flow(ref_l4, "rotating", 0.0, (span_s,)).steady[0] @ push
    np.testing.assert_allclose(got / response.max(), response / response.max(), atol=1e-6)


def halo():
    return make_reference("halo", point="L2", epoch=EPOCH, pressure_area_m2_kg=0.0, family="north", az_m=2e8)


@pytest.mark.parametrize("kind", ["L4", "L1", "halo"])
@pytest.mark.parametrize("rule", ["rotating", "inertial"])
@pytest.mark.parametrize("day", [3.0, 30.0])
def test_node_let_go_in_its_slot_falls_away_as_the_flow_says(equilibrium, slots_under, kind, rule, day):
    reference = halo() if kind == "halo" else equilibrium(kind)
    place = np.array([[400.0, -300.0, 500.0]])
    kept = slots_under(rule, place)
    from_s, span_s = (11.0 * DAY_S if kind == "halo" else 0.0), day * DAY_S
    now, then = (slot_states(reference, kept, t) for t in (from_s, from_s + span_s))
    flown = fly(reference, now, [from_s + span_s], start_s=from_s, accuracy="fine").state[:, 0]
    got = flow(reference, rule, from_s, (span_s,)).slot[0] @ now[0, :3]
    way = (flown - then)[0]
    # second order in half a kilometre over the distance of the Earth
    np.testing.assert_allclose(got[:3], way[:3], atol=2e-5 * np.linalg.norm(way[:3]))
    np.testing.assert_allclose(got[3:], way[3:], atol=2e-5 * np.linalg.norm(way[3:]))


def test_natural_slots_pull_at_nothing(ref_l4):
    assert not flow(ref_l4, "natural", 0.0, (30.0 * DAY_S,)).slot.any()


@pytest.mark.parametrize("rule", ["rotating", "inertial", "natural"])
def test_flow_over_two_spans_is_one_after_the_other(ref_l4, rule):
    first, second = 5.0 * DAY_S, 9.0 * DAY_S
    both = flow(ref_l4, rule, 0.0, (first, first + second))
    later = flow(ref_l4, rule, first, (second,))
    np.testing.assert_allclose(
        both.state[1] * SCALE / SCALE[:, None],
        (later.state[0] @ both.state[0]) * SCALE / SCALE[:, None],
        rtol=1e-9,
        atol=1e-12,
    )
    chained = later.state[0] @ both.slot[0] + later.slot[0] @ slot_turn(ref_l4, rule, first)
    np.testing.assert_allclose(chained, both.slot[1], rtol=1e-7, atol=1e-9 * np.abs(chained).max())


def test_inertial_slots_turn_back_once_a_turn(ref_l4):
    turn_s = 2.0 * np.pi / ref_l4.rate_rad_s
    np.testing.assert_allclose(slot_turn(ref_l4, "inertial", turn_s), np.eye(3), atol=1e-12)
    quarter = slot_turn(ref_l4, "inertial", 0.25 * turn_s)
    # a place along R is behind after a quarter turn, that is along -T
    np.testing.assert_allclose(quarter @ [1.0, 0.0, 0.0], [0.0, -1.0, 0.0], atol=1e-12)
    assert (slot_turn(ref_l4, "rotating", 1e6) == np.eye(3)).all()
