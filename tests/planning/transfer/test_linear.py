"""The linear two-impulse map: its images, a textbook case, and where it is singular."""

import numpy as np
import pytest
from scipy.spatial.distance import cdist

from farhold.domain.epoch import DAY_S
from farhold.dynamics.circular import ThreeBody, lightness
from farhold.planning.transfer.linear import LinearTransfer, good_windows
from farhold.planning.transfer.two_point import two_point

AXES = {"R": 0, "T": 1, "N": 2}


def over(reference, days, depart_days=0.0):
    return LinearTransfer.between(reference, depart_days * DAY_S, (depart_days + days) * DAY_S)


def along(axis, size_m):
    states = np.zeros((1, 6))
    states[0, AXES[axis]] = size_m
    return states


def textbook(n):
    """A planet so light that only the central body acts: the motion of Clohessy and Wiltshire."""
    return ThreeBody(n**2 * 1e36, n**2 * 1e22, 1e12)


def test_two_impulses_are_those_of_a_textbook_rendezvous(equilibrium):
    # H. D. Curtis, Orbital Mechanics for Engineering Students, Clohessy-Wiltshire two-impulse example
    # (from memory): n = 0.00115691 rad/s, 8 h; printed to five digits
    reference = equilibrium("L4", system=textbook(0.00115691))
    linear = LinearTransfer.between(reference, 0.0, 8 * 3600.0)
    before = np.array([[20e3, 20e3, 20e3, 20.0, -20.0, 5.0]])
    first, last = linear.impulses(before, np.zeros((1, 6)), np.zeros(1))
    np.testing.assert_allclose(first[0] + before[0, 3:], [9.3059, -46.747, 7.9845], atol=6e-4)
    np.testing.assert_allclose(-last[0], [-25.798, -0.47091, -24.477], atol=6e-4)


def by_the_whole_matrix(linear, state, target, beta):
    """Impulses of one node from the 6 x 6 matrix alone."""
    phi, pushed = linear.phi, beta * linear.response
    first = np.linalg.solve(phi[:3, 3:], (target - phi @ state - pushed)[:3])
    kicked = state + np.concatenate([np.zeros(3), first])
    return first, (target - phi @ kicked - pushed)[3:]


@pytest.mark.parametrize("point", ["L1", "L2", "L4"])
def test_images_are_distances_of_the_price(equilibrium, cloud, point):
    linear = over(equilibrium(point), 25.0, depart_days=10.0)
    nodes, slots = cloud(1, 5, 2e6, 0.3), cloud(2, 4, 2e6, 0.3)
    beta = np.linspace(-2e-6, 3e-6, 5)
    (u, w), (a, b) = linear.nodes(nodes, beta), linear.slots(slots)
    price = cdist(u, a) + cdist(w, b)
    i, j = np.indices(price.shape).reshape(2, -1)
    first, last = linear.impulses(nodes[i], slots[j], beta[i])
    size = np.linalg.norm(first, axis=1) + np.linalg.norm(last, axis=1)
    np.testing.assert_allclose(price[i, j], size, rtol=1e-12)
    alone = [by_the_whole_matrix(linear, nodes[p], slots[q], beta[p]) for p, q in zip(i, j, strict=True)]
    np.testing.assert_allclose(first, [pair[0] for pair in alone], atol=1e-10)
    np.testing.assert_allclose(last, [pair[1] for pair in alone], atol=1e-10)


def test_map_of_a_node_that_flies_there_anyway_costs_nothing(ref_l4, cloud):
    linear = over(ref_l4, 40.0)
    nodes = cloud(3, 6, 1e6, 0.2)
    beta = np.full(6, 1e-6)
    first, last = linear.impulses(nodes, nodes @ linear.phi.T + beta[:, None] * linear.response, beta)
    assert max(np.abs(first).max(), np.abs(last).max()) < 1e-10


@pytest.mark.parametrize("axis", AXES)
def test_no_direction_is_singular_after_30_days(ref_l4, axis):
    linear = over(ref_l4, 30.0)
    assert not linear.singular(np.zeros((1, 6)), along(axis, 1e6), np.zeros(1)).any()


@pytest.mark.parametrize(("axis", "singular"), [("R", False), ("T", False), ("N", True)])
def test_half_a_period_is_singular_along_n_alone(ref_l4, axis, singular):
    # the motion along N is an oscillator of period one year: half of it leaves only a mirror image
    linear = over(ref_l4, 182.6)
    assert linear.singular(np.zeros((1, 6)), along(axis, 1e6), np.zeros(1)).tolist() == [singular]


@pytest.mark.parametrize("axis", AXES)
def test_whole_period_is_singular_in_all_directions(ref_l4, axis):
    linear = over(ref_l4, 365.25)
    assert linear.singular(np.zeros((1, 6)), along(axis, 1e6), np.zeros(1)).all()


@pytest.mark.parametrize(("days", "singular"), [(145.0, False), (146.0, True), (220.0, True), (221.0, False)])
def test_direction_along_n_is_singular_where_the_sine_is_below_0_6(ref_l4, days, singular):
    # an oscillator's position answers a kick by sin(n T) / n
    assert (abs(np.sin(2.0 * np.pi * days / 365.2563431)) < 0.6) == singular
    found = over(ref_l4, days).singular(np.zeros((1, 6)), along("N", 1e6), np.zeros(1))
    assert found.tolist() == [singular]


@pytest.mark.parametrize(("size_m", "singular"), [(0.9e-3, False), (1.1e-3, True)])
def test_singular_direction_matters_above_a_millimetre(ref_l4, size_m, singular):
    linear = over(ref_l4, 182.6)
    assert linear.singular(np.zeros((1, 6)), along("N", size_m), np.zeros(1)).tolist() == [singular]


def test_half_period_mirror_image_along_n_is_not_singular(ref_l4):
    # an oscillator arrives at the mirror image by itself, whatever its speed
    half_s = np.pi / ref_l4.rate_rad_s
    linear = LinearTransfer.between(ref_l4, 0.0, half_s)
    node = along("N", 1e6)
    target = node @ linear.phi.T
    assert not linear.singular(node, target, np.zeros(1)).any()
    assert target[0, 2] == pytest.approx(-1e6, rel=1e-5)


def test_node_whose_own_velocity_brings_it_there_is_not_singular(ref_l4, cloud):
    linear = over(ref_l4, 365.25)
    nodes = cloud(4, 5, 1e6, 0.2)
    assert not linear.singular(nodes, nodes @ linear.phi.T, np.zeros(5)).any()
    stopped = nodes * np.repeat([1.0, 0.0], 3)
    assert linear.singular(stopped, nodes @ linear.phi.T, np.zeros(5)).all()


def test_pressure_along_a_singular_direction_counts(ref_l4):
    # a whole period: the push along R is returned along T, which nothing can correct at this time
    linear = over(ref_l4, 365.25)
    still = np.zeros((1, 6))
    assert not linear.singular(still, still, np.zeros(1)).any()
    assert linear.singular(still, still, np.array([lightness(0.002)])).all()


@pytest.fixture(scope="module")
def windows(ref_l4):
    return good_windows(ref_l4, 0.0, longest_days=230)


@pytest.mark.parametrize("day", [1, 30, 90, 140, 150, 182, 183, 215, 225])
def test_good_windows_hold_the_days_without_a_singular_direction(ref_l4, windows, day):
    probe = np.zeros((3, 6))
    probe[:, :3] = np.random.default_rng(5).normal(size=(3, 3)) * 1e6
    free = not over(ref_l4, float(day)).singular(np.zeros((3, 6)), probe, np.zeros(3)).any()
    assert any(first <= day <= last for first, last in windows) == free


def test_good_windows_do_not_touch_each_other(windows):
    assert len(windows) == 2
    assert windows[1][0] > windows[0][1] + 1


@pytest.mark.parametrize(("point", "days"), [("L4", 30.0), ("L4", 120.0), ("L2", 30.0)])
@pytest.mark.parametrize("radius_m", [1e5, 2e6, 2e7])
def test_stated_remainder_covers_what_the_map_leaves_out(equilibrium, cloud, point, days, radius_m):
    reference = equilibrium(point)
    linear = over(reference, days)
    nodes, slots = cloud(6, 6, radius_m), cloud(7, 6, radius_m)
    first, last = linear.impulses(nodes, slots, np.zeros(6))
    on_map = np.linalg.norm(first, axis=1) + np.linalg.norm(last, axis=1)
    flown = two_point(reference, nodes, slots, 0.0, days * DAY_S, excess_beta=np.zeros(6)).total_m_s
    assert (np.abs(flown - on_map) <= linear.remainder_m_s(reference, nodes, slots)).all()
