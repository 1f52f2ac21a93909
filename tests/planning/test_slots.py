"""Slots under the three rules, by closed forms and by the heliocentric two-body energy."""

import numpy as np
import pytest

from farhold.constants import AU
from farhold.domain.epoch import DAY_S
from farhold.dynamics.propagate import fly
from farhold.errors import CaseError
from farhold.planning.slots import closest_pair, natural_velocity, slot_states

PLACES = [[1e6, 0.0, 0.0], [0.0, -7e5, 2e5], [3e5, 4e5, -6e5]]
POINTS = ["L1", "L2", "L3", "L4", "L5"]
CALM = ["L3", "L4", "L5"]


@pytest.mark.parametrize("t_s", [-1e7, 0.0, 3e7])
def test_rotating_slot_stands_still_at_all_times(ref_l4, formation, t_s):
    states = slot_states(ref_l4, formation("rotating", PLACES), t_s)
    assert states[:, :3].tolist() == PLACES
    assert not states[:, 3:].any()


@pytest.mark.parametrize("point", POINTS)
@pytest.mark.parametrize("t_s", [-4e6, 1e6, 5e7])
def test_inertial_slot_keeps_its_direction_among_the_stars(equilibrium, formation, point, t_s):
    reference = equilibrium(point)
    slots = formation("inertial", PLACES, start_s=1e6)
    now = slot_states(reference, slots, t_s)[:, :3] @ reference.axes_to_icrf(t_s).T
    at_start = np.array(PLACES) @ reference.axes_to_icrf(1e6).T
    np.testing.assert_allclose(now, at_start, atol=1e-6)


def test_inertial_slot_is_frozen_at_its_start_and_not_at_the_case_epoch(ref_l5, formation):
    slots = formation("inertial", PLACES, start_s=4e6)
    np.testing.assert_allclose(slot_states(ref_l5, slots, 4e6)[:, :3], PLACES, atol=1e-9)
    moved = slot_states(ref_l5, slots, 0.0)[0, :3] - PLACES[0]
    # chord of the angle n t at 1000 km
    assert np.linalg.norm(moved) == pytest.approx(2e6 * np.sin(0.5 * ref_l5.rate_rad_s * 4e6), rel=1e-12)


@pytest.mark.parametrize("t_s", [0.0, 2e6, 4e7])
def test_icrf_slot_has_its_coordinates_in_the_icrf_at_all_times(ref_l4, formation, t_s):
    slots = formation("inertial", PLACES, axes="icrf", start_s=2e6)
    back = slot_states(ref_l4, slots, t_s)[:, :3] @ ref_l4.axes_to_icrf(t_s).T
    np.testing.assert_allclose(back, PLACES, atol=1e-6)


def test_rotating_slot_given_in_the_icrf_is_placed_by_the_axes_at_its_start(ref_l4, formation):
    slots = formation("rotating", PLACES, axes="icrf", start_s=2e6)
    back = slot_states(ref_l4, slots, 9e6)[:, :3] @ ref_l4.axes_to_icrf(2e6).T
    np.testing.assert_allclose(back, PLACES, atol=1e-6)


@pytest.mark.parametrize("rule", ["inertial", "natural"])
def test_slot_velocity_is_the_rate_of_its_position(ref_l4, formation, rule):
    slots = formation(rule, PLACES, vn_m_s=0.05)
    t_s, h = 3e6, 2000.0
    late, early = slot_states(ref_l4, slots, t_s + h), slot_states(ref_l4, slots, t_s - h)
    rate = (late - early)[:, :3] / (2.0 * h)
    np.testing.assert_allclose(slot_states(ref_l4, slots, t_s)[:, 3:], rate, atol=1e-7)


def ellipse(angle_rad):
    """Place on the 2:1 ellipse of 1000 km greatest distance."""
    r, t = 5e5 * np.cos(angle_rad), -1e6 * np.sin(angle_rad)
    return np.array([r, t, 0.0])


@pytest.mark.parametrize("point", CALM)
@pytest.mark.parametrize("angle_rad", [0.0, 0.7, 1.6, 4.0])
def test_natural_ellipse_walks_less_than_0_7_km_in_a_year(equilibrium, formation, point, angle_rad):
    # design section 4; a free ellipse closes after one turn of the axes
    reference = equilibrium(point)
    turn_s = 2.0 * np.pi / reference.rate_rad_s
    slots = formation("natural", ellipse(angle_rad))
    walk = slot_states(reference, slots, turn_s) - slot_states(reference, slots, 0.0)
    assert np.linalg.norm(walk[0, :3]) < 700.0


@pytest.mark.parametrize("point", ["L4", "L5"])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_general_circular_orbit_keeps_its_distance(equilibrium, formation, point, side):
    # Hill (1878), general circular orbit: N = sqrt(3) R, so the distance is twice the radial amplitude
    reference = equilibrium(point)
    amplitude, n = 5e5, reference.rate_rad_s
    slots = formation("natural", [amplitude, 0.0, side * np.sqrt(3.0) * amplitude])
    times = np.arange(0.0, 361.0, 30.0) * DAY_S
    size = [np.linalg.norm(slot_states(reference, slots, t)[0, :3]) for t in times]
    np.testing.assert_allclose(size, 1e6, atol=700.0)
    tilted = formation("natural", [0.0, 2.0 * amplitude, 0.0], vn_m_s=side * np.sqrt(3.0) * amplitude * n)
    size = [np.linalg.norm(slot_states(reference, tilted, t)[0, :3]) for t in times]
    np.testing.assert_allclose(size, 1e6, atol=700.0)


def semi_major_axis_m(reference, place_m, velocity_m_s):
    """By vis-viva about the Sun alone, from rotating axes."""
    gm = reference.gm_m3_s2[0]
    out = reference.primaries_m()[0] + place_m
    speed = velocity_m_s + np.cross([0.0, 0.0, reference.rate_rad_s], out)
    return 1.0 / (2.0 / np.linalg.norm(out, axis=-1) - np.sum(speed**2, axis=-1) / gm)


@pytest.mark.parametrize("point", CALM)
@pytest.mark.parametrize("area", [0.0, 0.026])
def test_natural_velocity_matches_the_heliocentric_energy(equilibrium, point, area):
    reference = equilibrium(point, pressure_area_m2_kg=area)
    place = np.array([[1e6, 0.0, 0.0], [4e5, -8e5, 3e5], [0.0, 0.0, 1e6]])
    n = reference.rate_rad_s
    raw = np.stack([0.5 * n * place[:, 1], -2.0 * n * place[:, 0], np.full(3, 0.01)], axis=1)
    home = semi_major_axis_m(reference, np.zeros(3), np.zeros(3))
    matched = semi_major_axis_m(reference, place, natural_velocity(reference, place, np.full(3, 0.01)))
    assert np.abs(matched - home).max() < 0.01
    assert np.abs(semi_major_axis_m(reference, place, raw) - home).max() > 1.0


def test_natural_velocity_stays_close_to_the_clohessy_wiltshire_one(ref_l4):
    place = np.array([[1e6, -3e5, 0.0]])
    n = ref_l4.rate_rad_s
    v = natural_velocity(ref_l4, place, np.array([0.02]))
    assert v[0, 0] == pytest.approx(0.5 * n * -3e5, rel=1e-14)
    assert v[0, 2] == 0.02
    # the trim is of second order: the offset's square over the distance from the Sun, times n
    assert abs(v[0, 1] + 2.0 * n * 1e6) < 5.0 * n * 1.09e12 / AU.value


def test_natural_slot_before_its_start_is_where_free_flight_comes_from(ref_l4, formation):
    slots = formation("natural", PLACES, start_s=5e6)
    early = slot_states(ref_l4, slots, -1e6)
    again = fly(ref_l4, early, [5e6], start_s=-1e6).state[:, 0]
    np.testing.assert_allclose(again, slot_states(ref_l4, slots, 5e6), atol=1e-2)


@pytest.mark.parametrize("point", ["L1", "L2"])
def test_natural_slot_is_refused_at_unstable_points(equilibrium, formation, point):
    with pytest.raises(CaseError) as caught:
        slot_states(equilibrium(point), formation("natural", PLACES), 0.0)
    assert str(caught.value) == (
        f"formation.ring.rule: natural slots cannot be placed at {point} in this version "
        "(allowed: rotating or inertial at L1 and L2; natural at L3, L4, L5)"
    )


def test_change_of_rule_at_the_same_place_differs_by_the_turning_rate(ref_l4, formation):
    # the velocity that a change of rule must not drop: n r in-plane, nothing along N
    place = [[1e6, 0.0, 0.0], [0.0, 1e6, 0.0], [0.0, 0.0, 1e6]]
    still = slot_states(ref_l4, formation("rotating", place), 0.0)
    turning = slot_states(ref_l4, formation("inertial", place), 0.0)
    step = np.linalg.norm((turning - still)[:, 3:], axis=1)
    # 365.2563431 d: the model's own year (check value C15)
    np.testing.assert_allclose(step, [2e6 * np.pi / (365.2563431 * DAY_S)] * 2 + [0.0], rtol=1e-9)


@pytest.mark.parametrize("n", [2, 3, 40])
def test_closest_pair_is_the_least_of_all_pairs(n):
    place = np.random.default_rng(n).normal(size=(n, 3))
    gap = np.linalg.norm(place[:, None] - place[None], axis=2) + np.diag(np.full(n, np.inf))
    distance, a, b = closest_pair(place)
    assert distance == pytest.approx(gap.min(), rel=1e-12)
    assert gap[a, b] == pytest.approx(distance, rel=1e-12)


@pytest.mark.parametrize("n", [0, 1])
def test_closest_pair_of_fewer_than_two_is_infinite(n):
    assert closest_pair(np.zeros((n, 3))) == (np.inf, -1, -1)
