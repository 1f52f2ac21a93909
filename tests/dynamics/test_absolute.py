"""The adaptive integrator and the absolute two-point problem: exact cases and refusals."""

import math

import numpy as np
import pytest

from farhold.dynamics.absolute import jacobi_constant, propagate, two_point
from farhold.errors import ConvergenceError, DomainError

MU = 0.01215058560962404
SHORT = np.array([0.497653463566241, 0.866025403784439, 0.0, 0.006195078418070, -0.008234243375973, 0.0])


def test_circle_about_a_lone_body_is_exact():
    # closed form: at mu = 0 a circular orbit of radius 1/4 has rate 8, and rate 7 in the axes that turn at 1
    start = [0.25, 0.0, 0.0, 0.0, 7.0 * 0.25, 0.0]
    end = propagate(start, [0.0, 2.0 * math.pi / 7.0], 0.0).state[-1]
    assert end == pytest.approx(start, abs=1e-12)


def test_ellipse_about_a_lone_body_closes_in_inertial_axes():
    # Kepler: period 2 pi a^1.5; seen from the turning axes the place is turned back by the angle t
    a, e = 0.6, 0.5
    speed = math.sqrt((1.0 + e) / (a * (1.0 - e)))
    r = a * (1.0 - e)
    period = 2.0 * math.pi * a**1.5
    end = propagate([r, 0.0, 0.0, 0.0, speed - r, 0.0], [0.0, period], 0.0).state[-1]
    assert end[:3] == pytest.approx([r * math.cos(period), -r * math.sin(period), 0.0], abs=2e-12)


def test_pressure_weakens_the_primary():
    # at mu = 0 a body with beta = 0.19 circles at 0.9 of the rate without
    start = [0.25, 0.0, 0.0, 0.0, 0.25 * (0.9 * 8.0 - 1.0), 0.0]
    end = propagate(start, [0.0, 0.8], 0.0, 0.19).state[-1]
    assert np.linalg.norm(end[:3]) == pytest.approx(0.25, abs=1e-12)


@pytest.mark.parametrize("stops", [2, 5, 40])
def test_stops_on_the_way_do_not_move_the_end(stops):
    # each stop cuts a step: equal to a dozen roundings and tolerances
    whole = propagate(SHORT, [0.0, 6.0], MU).state[-1]
    assert propagate(SHORT, np.linspace(0.0, 6.0, stops), MU).state[-1] == pytest.approx(whole, abs=5e-13)


def test_first_row_is_the_start_and_repeated_times_repeat_the_state():
    states = propagate(SHORT, [1.0, 1.0, 2.0, 2.0], MU).state
    assert (states[0] == SHORT).all()
    assert (states[1] == SHORT).all()
    assert (states[2] == states[3]).all()


def test_flight_costs_few_steps():
    # a guard against silent slowness: order 8 at 1e-14 takes some tens of steps a turn
    assert propagate(SHORT, [0.0, 6.582664326977796], MU).steps < 60


def test_looser_tolerance_costs_fewer_steps():
    tight, loose = (propagate(SHORT, [0.0, 6.0], MU, tolerance=tol) for tol in (1e-14, 1e-8))
    assert loose.steps < tight.steps
    assert loose.state[-1] == pytest.approx(tight.state[-1], abs=1e-6)


def test_transition_matrix_leaves_the_flight_as_it_is():
    plain = propagate(SHORT, [0.0, 6.0], MU)
    with_matrix = propagate(SHORT, [0.0, 6.0], MU, with_transition=True)
    assert plain.transition is None
    assert with_matrix.state[-1] == pytest.approx(plain.state[-1], abs=5e-13)


@pytest.mark.parametrize("mu", [0.01, 0.2])
def test_two_point_problem_gives_back_the_path_it_was_made_from(mu):
    start = np.array([0.5, 0.7, 0.1, 0.05, -0.1, 0.02])
    path = propagate(start, [0.0, 1.5], mu).state
    v0, v1 = two_point(path[0, :3], path[1, :3], 1.5, 1.1 * start[3:], mu)
    # the miss of 1e-13 over the least singular value of the matrix, about 1
    assert v0 == pytest.approx(path[0, 3:], abs=1e-11)
    assert v1 == pytest.approx(path[1, 3:], abs=1e-11)


def test_jacobi_constant_of_many_states_keeps_their_shape():
    states = np.tile(SHORT, (2, 3, 1))
    assert jacobi_constant(states, MU).shape == (2, 3)


@pytest.mark.parametrize(
    ("state", "times", "where"),
    [
        ([0.0] * 5, [0.0, 1.0], "state: "),
        ([np.nan] + [0.0] * 5, [0.0, 1.0], "state: "),
        (SHORT, [0.0], "times: "),
        (SHORT, [0.0, 2.0, 1.0], "times: "),
        (SHORT, [0.0, np.nan], "times: "),
    ],
)
def test_unlawful_input_is_refused(state, times, where):
    with pytest.raises(DomainError) as refused:
        propagate(state, times, MU)
    assert str(refused.value).startswith(where)


def test_fall_into_a_primary_is_reported():
    with pytest.raises(ConvergenceError, match=r"^absolute trajectory: .* after \d+ steps"):
        propagate([-MU + 0.1, 0.0, 0.0, 0.0, -0.1, 0.0], [0.0, 1.0], MU)


def test_two_point_problem_without_an_answer_in_reach_is_reported():
    with pytest.raises(ConvergenceError, match=r"^two-point problem: the miss stays at .* of .* allowed"):
        two_point([0.5, 0.7, 0.0], [0.5, 0.7, 40.0], 1e-3, [0.0, 0.0, 1.0], MU, iterations=2)
