"""Motion about L4 in the limit of no planet, and the costs that follow from it (check values W1 to W4)."""

import math

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S
from farhold.dynamics.circular import SUN_EARTH, ThreeBody
from farhold.dynamics.propagate import fly
from farhold.planning.slots import slot_states
from farhold.planning.transfer.linear import LinearTransfer
from farhold.study.reference import reference


def clohessy_wiltshire(n, t):
    """Transition matrix of Clohessy and Wiltshire 1960, x out, y along the motion, z normal."""
    s, c = math.sin(n * t), math.cos(n * t)
    return np.array(
        [
            [4.0 - 3.0 * c, 0.0, 0.0, s / n, 2.0 * (1.0 - c) / n, 0.0],
            [6.0 * (s - n * t), 1.0, 0.0, -2.0 * (1.0 - c) / n, (4.0 * s - 3.0 * n * t) / n, 0.0],
            [0.0, 0.0, c, 0.0, 0.0, s / n],
            [3.0 * n * s, 0.0, 0.0, c, 2.0 * s, 0.0],
            [-6.0 * n * (1.0 - c), 0.0, 0.0, -2.0 * s, 4.0 * c - 3.0, 0.0],
            [0.0, 0.0, -n * s, 0.0, 0.0, c],
        ]
    )


@pytest.fixture
def without_planet(equilibrium):
    """Makes the reference at L4 of a problem of rate n whose secondary has next to no mass."""

    def make(n_rad_s):
        length_m = (3.986e14 / n_rad_s**2) ** (1.0 / 3.0)
        return equilibrium("L4", system=ThreeBody(3.986e14, 3.986e14 * 1e-14, length_m))

    return make


def test_two_impulse_rendezvous_is_that_of_curtis(without_planet):
    # W1: H. D. Curtis, Orbital Mechanics for Engineering Students, 3rd ed., example 7.4 (from memory): five
    # digits printed
    n, t = 0.00115691, 8.0 * 3600.0
    start = np.array([[20e3, 20e3, 20e3, 20.0, -20.0, 5.0]])
    linear = LinearTransfer.between(without_planet(n), 0.0, t)
    depart, arrive = linear.impulses(start, np.zeros((1, 6)), np.zeros(1))
    assert depart[0] + start[0, 3:] == pytest.approx([9.3059, -46.747, 7.9845], rel=2e-5)
    assert -arrive[0] == pytest.approx([-25.798, -0.47091, -24.477], rel=2e-5)
    total = np.linalg.norm(depart) + np.linalg.norm(arrive)
    assert total == pytest.approx(64.5257, abs=1e-3)


@pytest.mark.parametrize("turns", [0.1, 0.5, 1.0, 3.0])
def test_transition_is_that_of_clohessy_and_wiltshire_without_a_planet(without_planet, turns):
    n = 0.00115691
    t = turns * 2.0 * math.pi / n
    matrix = without_planet(n).transition(0.0, t)
    scale = np.diag([1.0, 1.0, 1.0, 1.0 / n, 1.0 / n, 1.0 / n])
    ours, theirs = scale @ matrix / np.diag(scale), scale @ clohessy_wiltshire(n, t) / np.diag(scale)
    # mu = 1e-14 changes an entry by up to (mu times 7 t2) 3 t; the entries reach 6 n t = 113
    assert ours == pytest.approx(theirs, abs=3e-9)


@pytest.mark.parametrize(
    ("state", "component", "closed_form"),
    [
        ((1.0, 0.0, 0.0, 0.0, 0.0, 0.0), 1, -12.0 * math.pi),  # from rest at x0: -12 pi x0 a turn
        ((0.0, 0.0, 0.0, 0.0, 1.0, 0.0), 1, -6.0 * math.pi),  # pushed along: -6 pi v / n a turn
        ((1.0, 0.0, 0.0, 0.0, -2.0, 0.0), 1, 0.0),  # vy = -2 n x0 does not drift
        ((0.0, 0.0, 1.0, 0.0, 0.0, 0.0), 2, 1.0),  # out of the plane: back after a turn
    ],
)
def test_drift_in_a_turn_is_the_closed_form(without_planet, state, component, closed_form):
    # W2
    n = 0.00115691
    si = np.array(state) * np.repeat([1.0, n], 3)
    end = without_planet(n).transition(0.0, 2.0 * math.pi / n) @ si
    assert end[component] == pytest.approx(closed_form, abs=1e-9)


def test_hop_along_the_orbit_in_a_turn_costs_the_closed_form(without_planet):
    # W2: two impulses of n D / (6 pi) each
    n, hop_m = 0.00115691, 500.0
    linear = LinearTransfer.between(without_planet(n), 0.0, 2.0 * math.pi / n * (1.0 - 1e-6))
    target = np.array([[0.0, hop_m, 0.0, 0.0, 0.0, 0.0]])
    depart, arrive = linear.impulses(np.zeros((1, 6)), target, np.zeros(1))
    total = np.linalg.norm(depart) + np.linalg.norm(arrive)
    # a whole turn is singular out of the orbit, so the flight is 1e-6 short of it
    assert total == pytest.approx(n * hop_m / (3.0 * math.pi), rel=1e-5)


@pytest.mark.parametrize(
    ("mu", "difference"),
    [(1e-9, 7.6e-9), (3.0404234e-6, 2.3e-5)],  # W3: by the variational equations, two digits
)
def test_difference_from_clohessy_and_wiltshire_is_linear_in_the_mass_ratio(
    equilibrium, unit_system, mu, difference
):
    ours = equilibrium("L4", system=unit_system(mu)).transition(0.0, 1.7)
    assert np.abs(ours - clohessy_wiltshire(1.0, 1.7)).max() == pytest.approx(difference, rel=0.02)


def test_release_from_rest_drifts_as_the_three_body_problem_says(ref_l4):
    # W4: -37697.3 km along, 993.68 km out after 365.25 d from 1000 km (nonlinear, another integrator); the
    # last digits printed
    start = [[1e6, 0.0, 0.0, 0.0, 0.0, 0.0]]
    end_km = fly(ref_l4, start, [365.25 * DAY_S]).state[0, 0] / 1e3
    assert end_km[1] == pytest.approx(-37697.3, abs=0.05)
    assert end_km[0] == pytest.approx(993.68, abs=0.005)


@pytest.mark.parametrize(("days", "km"), [(7.0, 21.8), (30.0, 413.6), (90.0, 4407.0), (365.25, 37697.0)])
def test_free_drift_from_rest_is_the_accepted_figure(days, km):
    # acceptance value, 1 %: distance from the slot at R 1000 km
    start = np.array([[1e6, 0.0, 0.0, 0.0, 0.0, 0.0]])
    end = reference("L4").fly(start, [days])[0, 0]
    assert np.linalg.norm(end[:3] - start[0, :3]) / 1e3 == pytest.approx(km, rel=0.01)


@pytest.mark.parametrize(
    ("days", "axis", "dv_m_s"),
    [
        (10.0, 0, 2.343),
        (30.0, 0, 0.854),
        (30.0, 1, 0.800),
        (30.0, 2, 0.754),
        (120.0, 0, 0.492),
        (120.0, 1, 0.193),
    ],
)
@pytest.mark.parametrize("point", ["L4", "L5"])
def test_two_impulses_from_rest_to_rest_cost_the_accepted_figure(point, days, axis, dv_m_s):
    # acceptance value, 1 %: 1000 km from the reference slot, flown on the full lane
    target = np.zeros((1, 6))
    target[0, axis] = 1e6
    plan = reference(point).two_point(np.zeros((1, 6)), target, days)
    assert plan.total_m_s[0] == pytest.approx(dv_m_s, rel=0.01)
    assert plan.miss_m[0] < 0.1


@pytest.mark.parametrize("direction", [(1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.6, -0.8, 0.0)])
def test_change_of_rule_costs_the_velocity_mismatch(ref_l4, slots_under, direction):
    # acceptance value 0.199 m/s once, 1 %; closed form n d for an offset in the plane
    rotating, inertial = (
        slot_states(ref_l4, slots_under(rule, 1e6 * np.array([direction])), 0.0)
        for rule in ("rotating", "inertial")
    )
    jump_m_s = np.linalg.norm(rotating[0, 3:] - inertial[0, 3:])
    assert jump_m_s == pytest.approx(0.199, rel=0.01)
    assert jump_m_s == pytest.approx(SUN_EARTH.rate_rad_s * 1e6, rel=1e-12)


def test_inertial_slots_keep_their_place_among_the_stars(ref_l4, slots_under):
    formation = slots_under("inertial", np.array([[3e5, -4e5, 5e5]]))
    places = [
        ref_l4.axes_to_icrf(t) @ slot_states(ref_l4, formation, t)[0, :3]
        for t in (0.0, 20.0 * DAY_S, 300.0 * DAY_S)
    ]
    # rounding of the longitude, 4e-16 of 1e6 m
    assert places[1] == pytest.approx(places[0], abs=1e-8)
    assert places[2] == pytest.approx(places[0], abs=1e-8)
