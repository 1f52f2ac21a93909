"""Nodes that leave where tables and fixed steps hold, and the agreement of the three ways to fly."""

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.lanes.follow import follow_nodes
from farhold.dynamics.lanes.request import checked
from farhold.dynamics.lanes.shared import scheme_for
from farhold.dynamics.propagate import fly
from farhold.kernels.status import HIT_PRIMARY, OK


def swarm(n, radius_m, seed=7):
    rng = np.random.default_rng(seed)
    return np.hstack([rng.normal(0.0, radius_m / 2.0, (n, 3)), rng.normal(0.0, radius_m * 1e-7, (n, 3))])


def followed(reference, states, output_s, excess_beta=None, start_s=0.0, impulse_s=None, dv_m_s=None):
    """States and status of all nodes, one by one with adaptive steps."""
    asked = checked(states, output_s, start_s, excess_beta, impulse_s, dv_m_s)
    out = np.empty((len(states), len(output_s), 6))
    status = np.full(len(states), -1)
    follow_nodes(reference, asked, np.arange(len(states)), out, status)
    return out, status


@pytest.fixture
def rescued(monkeypatch):
    """Nodes that were followed one by one in the flights of the test."""
    rows = []

    def spy(reference, asked, lost, out, status):
        rows.extend(lost.tolist())
        follow_nodes(reference, asked, lost, out, status)

    monkeypatch.setattr("farhold.dynamics.propagate.follow_nodes", spy)
    return rows


JOBS = [
    ("L4", 1e6, 365.25, 1e-3),
    ("L5", 1e6, -200.0, 1e-3),
    ("L3", 1e6, 200.0, 1e-3),
    ("L4", 2e7, 365.25, 0.03),
    ("L1", 1e5, 60.0, 1e-3),
    ("L2", 1e5, -60.0, 1e-3),
]


@pytest.mark.parametrize(("point", "radius_m", "days", "allowed_m"), JOBS)
def test_three_ways_to_fly_agree(equilibrium, rescued, point, radius_m, days, allowed_m):
    # collocation about the linear flow, fixed steps of order 8, and adaptive steps, with impulses and pressure
    reference, n = equilibrium(point, pressure_area_m2_kg=0.026), 6
    rng = np.random.default_rng(11)
    job = {"excess_beta": rng.normal(0.0, 1e-6, n), "dv_m_s": rng.normal(0.0, radius_m * 1e-8, (n, 3, 3))}
    when = np.array([0.0, 0.3, 0.8]) * days * DAY_S
    output_s = np.array([0.0, 0.3, 0.5, 1.0]) * days * DAY_S
    states = swarm(n, radius_m)
    shared = fly(reference, states, output_s, impulse_s=when, **job).state
    own = fly(reference, states, output_s, impulse_s=np.tile(when, (n, 1)), **job).state
    assert rescued == []
    alone, status = followed(reference, states, output_s, impulse_s=when, **job)
    assert (status == OK).all()
    for other in (own, alone):
        assert shared[..., :3] == pytest.approx(other[..., :3], abs=allowed_m)
        assert shared[..., 3:] == pytest.approx(other[..., 3:], abs=allowed_m * 1e-6)


@pytest.mark.parametrize("lane", ["shared", "own"])
@pytest.mark.parametrize(("point", "days"), [("L4", 365.25), ("L1", 60.0)])
def test_node_far_beyond_what_the_arcs_are_set_up_for_is_right(equilibrium, rescued, point, days, lane):
    # arcs for 1 km, nodes at 1 km and at 20,000 km; fixed steps of order 8, of which linear motion is not free,
    # keep the same relative error at any distance, and so have no node to rescue
    reference = equilibrium(point)
    states = swarm(4, 1e3)
    states[2] *= 2e4
    own = {} if lane == "shared" else {"impulse_s": np.zeros((4, 1)), "dv_m_s": np.zeros((4, 1, 3))}
    flight = fly(reference, states, [days * DAY_S], radius_m=1e3, **own)
    fine = fly(reference, states, [days * DAY_S], accuracy="fine")
    assert (flight.status == OK).all()
    off = np.linalg.norm((flight.state - fine.state)[:, 0, :3], axis=1)
    assert (off < np.maximum(1e-3, 5e-9 * np.linalg.norm(fine.state[:, 0, :3], axis=1))).all()
    assert rescued == ([2] if lane == "shared" else [])


def test_wide_swarm_takes_the_closed_form(ref_l4, rescued, truth):
    # 20,000 km grow to 40 times that in a year, 0.5 % of the distance of the Sun, where series end
    assert scheme_for(ref_l4, 2e7, 0.0, YEAR_S, YEAR_S, "default").closed
    assert not scheme_for(ref_l4, 1e6, 0.0, YEAR_S, YEAR_S, "default").closed
    start = np.array([1.4e7, -1e7, 1e7, 0.5, -0.5, 1.0])
    ours = fly(ref_l4, [start], [YEAR_S]).state[0, :, :3]
    assert ours == pytest.approx(truth(ref_l4).fly(start, [YEAR_S])[:, :3], abs=0.02)
    assert rescued == []


def test_node_beyond_the_series_is_rescued_from_them(ref_l4, rescued, truth):
    # arcs set up for 1000 km take series; one node of the swarm is at 20,000 km
    states = swarm(3, 1e6)
    states[1] = [1.4e7, -1e7, 1e7, 0.5, -0.5, 1.0]
    flight = fly(ref_l4, states, [YEAR_S], radius_m=1e6)
    assert rescued == [1]
    assert flight.state[1, :, :3] == pytest.approx(truth(ref_l4).fly(states[1], [YEAR_S])[:, :3], abs=1e-3)


def doomed_at(reference, point):
    """A node that falls on the Earth within a day."""
    gap_m = float(np.linalg.norm(reference.primaries_m()[1]))
    side = 1.0 if point == "L1" else -1.0
    return np.array([0.95 * gap_m * side, 0.0, 0.0, 1000.0 * side, 0.0, 0.0])


def at_rest_in_space(reference):
    """A node beside the reference that does not turn with the axes: it falls on the Sun in 64.6 days."""
    across = reference.primaries_m()[0]
    rate = reference.rate_rad_s
    return np.array([1e6, 0.0, 0.0, rate * across[1], -rate * (across[0] + 1e6), 0.0])


@pytest.mark.parametrize("lane", ["shared", "own"])
@pytest.mark.parametrize("point", ["L1", "L2"])
def test_node_that_meets_the_earth_keeps_what_came_before_and_spoils_no_other(equilibrium, point, lane):
    reference = equilibrium(point)
    others = swarm(4, 1e5)
    states = np.insert(others, 2, doomed_at(reference, point), axis=0)
    rng = np.random.default_rng(6)
    dv = rng.normal(0.0, 0.01, (5, 2, 3))
    when = np.array([0.05, 5.0]) * DAY_S
    output_s = np.array([0.0, 0.05, 0.1, 10.0]) * DAY_S

    def flown(rows):
        times = when if lane == "shared" else np.tile(when, (len(rows), 1))
        job = {"impulse_s": times, "dv_m_s": dv[rows], "radius_m": 1e6}
        return fly(reference, states[rows], output_s, **job)

    flight, rest = flown(np.arange(5)), np.array([0, 1, 3, 4])
    assert flight.status.tolist() == [OK, OK, HIT_PRIMARY, OK, OK]
    assert (flight.state[rest] == flown(rest).state).all()
    assert np.isfinite(flight.state[2, :3]).all()
    assert np.isnan(flight.state[2, 3]).all()
    assert (flight.state[2, 0] == states[2]).all()


@pytest.mark.parametrize("radius", [{}, {"radius_m": 1e6}])
@pytest.mark.parametrize("lane", ["shared", "own"])
def test_node_that_falls_on_the_sun_comes_down_when_kepler_says(ref_l4, lane, radius):
    # free fall from r takes pi/2 sqrt(r^3 / 2 GM): 64.57 days, which the Earth shifts by less than 1 %
    sun = np.linalg.norm(ref_l4.primaries_m()[0])
    fall_s = 0.5 * np.pi * np.sqrt(sun**3 / (2.0 * ref_l4.gm_m3_s2[1]))
    states = np.array([at_rest_in_space(ref_l4), [1e6, 0.0, 0.0, 0.0, 0.0, 0.0]])
    output_s = np.array([0.5, 0.98, 1.02]) * fall_s
    own = {} if lane == "shared" else {"impulse_s": np.zeros((2, 1)), "dv_m_s": np.zeros((2, 1, 3))}
    flight = fly(ref_l4, states, output_s, **own, **radius)
    assert flight.status.tolist() == [HIT_PRIMARY, OK]
    assert np.isfinite(flight.state[0, :2]).all()
    assert np.isnan(flight.state[0, 2]).all()
    alone = fly(ref_l4, states[1:], output_s).state
    assert flight.state[1, :, :3] == pytest.approx(alone[0, :, :3], abs=1e-3)


@pytest.mark.parametrize("lane", ["shared", "own"])
@pytest.mark.parametrize("point", ["L1", "L4"])
def test_node_that_starts_within_the_earth_has_met_it(equilibrium, point, lane):
    reference = equilibrium(point)
    inside = np.append(-reference.primaries_m()[1] + [1e6, 0.0, 0.0], [0.0, 1.0, 0.0])
    own = {} if lane == "shared" else {"impulse_s": np.zeros((1, 1)), "dv_m_s": np.zeros((1, 1, 3))}
    assert fly(reference, [inside], [DAY_S], **own).status.tolist() == [HIT_PRIMARY]


@pytest.mark.parametrize("lane", ["shared", "own"])
@pytest.mark.parametrize("radius", [{}, {"radius_m": 1e6}])
def test_node_that_passes_the_earth_is_followed_and_right(equilibrium, truth, rescued, lane, radius):
    # past the Earth at some 25,000 km after 3.75 d, and on; errors of the approach grow by a thousand there
    reference = equilibrium("L1")
    start = np.array([1.2e9, 2e8, 5e7, 500.0, 200.0, 0.0])
    own = {} if lane == "shared" else {"impulse_s": np.zeros((1, 1)), "dv_m_s": np.zeros((1, 1, 3))}
    output_s = np.array([3.0, 8.0]) * DAY_S
    flight = fly(reference, [start], output_s, **own, **radius)
    assert flight.status.tolist() == [OK]
    assert rescued == [0]
    assert flight.state[0, :, :3] == pytest.approx(truth(reference).fly(start, output_s)[:, :3], abs=0.1)


def test_followed_flight_backwards_retraces_itself(ref_l1):
    start = np.array([[1.2e9, 2e8, 5e7, 500.0, -50.0, 0.0]])
    dv = np.array([[[1.0, -2.0, 3.0]]])
    end_s, when = 2.0 * DAY_S, [0.5 * DAY_S]
    there, _ = followed(ref_l1, start, [end_s], impulse_s=when, dv_m_s=dv)
    back, _ = followed(ref_l1, there[:, 0], [0.0], start_s=end_s, impulse_s=when, dv_m_s=-dv)
    assert back[0, 0, :3] == pytest.approx(start[0, :3], abs=1e-2)
