"""The full lane against an independent flight, against itself, and against what it must refuse."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.circular import libration_point, lightness
from farhold.dynamics.propagate import fly
from farhold.errors import DomainError
from farhold.kernels.status import HIT_PRIMARY, OK

RESTING = (1e6, 0.0, 0.0, 0.0, 0.0, 0.0)
MOVING = (6e5, -5e5, 4e5, -0.05, 0.08, 0.1)


def swarm(n, radius_m=1e6, seed=7):
    rng = np.random.default_rng(seed)
    return np.hstack([rng.normal(0.0, radius_m / 2.0, (n, 3)), rng.normal(0.0, radius_m * 1e-7, (n, 3))])


@pytest.mark.parametrize("start", [RESTING, MOVING])
@pytest.mark.parametrize("point", ["L4", "L5"])
def test_flight_at_the_triangular_points_is_the_independent_one(equilibrium, truth, point, start):
    # 180 d: the default accuracy is 1 mm a year
    reference = equilibrium(point)
    times = np.array([30.0, 180.0]) * DAY_S
    ours = fly(reference, [start], times).state[0]
    assert ours[:, :3] == pytest.approx(truth(reference).fly(start, times)[:, :3], abs=1e-3)


@pytest.mark.parametrize("point", ["L1", "L2"])
def test_flight_at_the_near_points_is_the_independent_one(equilibrium, truth, point):
    # 30 d at 100 km, where all grows by e^1.3
    reference = equilibrium(point)
    start = 0.1 * np.array(MOVING)
    ours = fly(reference, [start], [30.0 * DAY_S]).state[0]
    assert ours[:, :3] == pytest.approx(truth(reference).fly(start, [30.0 * DAY_S])[:, :3], abs=1e-3)


@pytest.mark.parametrize("excess", [0.0, 2e-6, -5e-6])
def test_flight_with_pressure_is_the_independent_one(equilibrium, truth, excess):
    # the reference's own pressure displaces its place; the node has more or less than that
    reference = equilibrium("L4", pressure_area_m2_kg=0.026)
    ours = fly(reference, [MOVING], [180.0 * DAY_S], excess_beta=[excess]).state[0]
    theirs = truth(reference).fly(MOVING, [180.0 * DAY_S], excess)
    assert ours[:, :3] == pytest.approx(theirs[:, :3], abs=1e-3)


def test_flight_backwards_is_the_independent_one(ref_l4, truth):
    ours = fly(ref_l4, [MOVING], [-90.0 * DAY_S]).state[0]
    assert ours[:, :3] == pytest.approx(truth(ref_l4).fly(MOVING, [-90.0 * DAY_S])[:, :3], abs=1e-3)


def test_wide_flight_is_that_of_scipy(ref_l4):
    # DOP853 of SciPy on absolute states: its roundings and tolerance, 1e-13 of 1.5e11 m, grown by 6 pi a
    # turn, are 0.3 m, so the deviation is 2 million km
    system = ref_l4.system
    mu = system.mu
    c, s = 0.5, np.sqrt(0.75)
    turn = np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])
    start = np.array([2e9, -1e9, 5e8, 50.0, -100.0, 80.0])

    def rates(t, y):
        r1, r2 = np.add(y[:3], [mu, 0.0, 0.0]), y[:3] - [1.0 - mu, 0.0, 0.0]
        pull = (1.0 - mu) * r1 / np.linalg.norm(r1) ** 3 + mu * r2 / np.linalg.norm(r2) ** 3
        return [*y[3:], 2.0 * y[4] + y[0] - pull[0], -2.0 * y[3] + y[1] - pull[1], -pull[2]]

    place = libration_point("L4", mu)
    absolute = np.append(place + turn @ start[:3] / system.length_m, turn @ start[3:] / system.speed_m_s)
    span_s = 100.0 * DAY_S
    end = solve_ivp(rates, (0.0, span_s * system.rate_rad_s), absolute, method="DOP853", rtol=1e-13, atol=1e-15).y[
        :, -1
    ]
    theirs = turn.T @ (end[:3] - place) * system.length_m
    assert fly(ref_l4, [start], [span_s]).state[0, 0, :3] == pytest.approx(theirs, abs=1.0)


@pytest.mark.parametrize("start", [RESTING, MOVING])
@pytest.mark.parametrize(
    ("point", "days", "allowed"), [("L4", 365.25, 1e-9), ("L1", 60.0, 1e-8), ("L2", 60.0, 1e-8)]
)
def test_jacobi_constant_is_kept_along_the_flight(equilibrium, truth, point, days, allowed, start):
    # an integral of the motion, relative to that of the reference; 1 mm of 1000 km is 1e-9, and the excess
    # is of second order in the deviation and of first in its errors times the deviation
    reference = equilibrium(point)
    path = fly(reference, [start], np.linspace(0.0, days, 9) * DAY_S).state[0]
    excess = truth(reference).jacobi_excess(path)
    size = (np.linalg.norm(path[:, :3], axis=1).max() / reference.system.length_m) ** 2
    assert abs(excess - excess[0]).max() < allowed * size


@pytest.mark.parametrize("lane", ["shared", "own"])
@pytest.mark.parametrize("point", ["L1", "L2", "L4"])
def test_node_at_the_reference_stays(equilibrium, lane, point):
    # exactly: the deviation form has no error to grow, nor has company that is far off
    own = {} if lane == "shared" else {"impulse_s": np.zeros((2, 1)), "dv_m_s": np.zeros((2, 1, 3))}
    states = np.array([(0.0,) * 6, (1e5, 0.0, 0.0, 0.0, 0.0, 0.0)])
    flight = fly(equilibrium(point), states, np.array([30.0, 60.0]) * DAY_S, excess_beta=[0.0, 1e-7], **own)
    assert (flight.state[0] == 0.0).all()


@pytest.mark.parametrize("point", ["L1", "L4"])
def test_flight_of_no_length_keeps_the_state(equilibrium, point):
    assert (fly(equilibrium(point), [MOVING], [0.0, 0.0]).state[0] == MOVING).all()


@pytest.mark.parametrize(("point", "days"), [("L4", 300.0), ("L1", 60.0), ("L2", 60.0)])
def test_flight_there_and_back_returns(equilibrium, point, days):
    # default accuracy both ways, grown by e^(60/23) = 13 at the near points
    reference = equilibrium(point)
    there = fly(reference, [MOVING], [days * DAY_S]).state[:, 0]
    back = fly(reference, there, [0.0], start_s=days * DAY_S).state[:, 0]
    assert back[0, :3] == pytest.approx(MOVING[:3], abs=0.03)


@given(share=st.floats(0.01, 0.99), days=st.floats(2.0, 200.0))
def test_flight_in_two_pieces_is_the_flight(ref_l4, share, days):
    end_s = days * DAY_S
    whole = fly(ref_l4, [MOVING], [end_s]).state[0, 0]
    first = fly(ref_l4, [MOVING], [share * end_s]).state[:, 0]
    second = fly(ref_l4, first, [end_s], start_s=share * end_s).state[0, 0]
    assert second[:3] == pytest.approx(whole[:3], abs=2e-3)


def test_flight_does_not_depend_on_the_epoch(ref_l4):
    # the circular model is the same at all times; same steps, so the same bits
    now = fly(ref_l4, [MOVING], [1e6]).state
    later = fly(ref_l4, [MOVING], [5e6], start_s=4e6).state
    assert (now == later).all()


def test_states_given_are_left_as_they_were(ref_l4):
    # one node and many: a transposed view of one row is contiguous, and must be copied nevertheless
    one, many = swarm(1), swarm(130)
    before = one.copy(), many.copy()
    fly(ref_l4, one, [DAY_S], impulse_s=[0.0], dv_m_s=np.ones((1, 1, 3)))
    fly(ref_l4, many, [DAY_S])
    assert (one == before[0]).all()
    assert (many == before[1]).all()


@pytest.mark.parametrize("lane", ["shared", "own", "followed"])
def test_nothing_that_is_given_is_changed(ref_l4, lane):
    when = np.array([8.0, 8.0, 3.0]) * DAY_S
    job = {
        "states": swarm(3) * (1e3 if lane == "followed" else 1.0),
        "output_s": np.array([0.0, 10.0]) * DAY_S,
        "excess_beta": np.full(3, 1e-7),
        "impulse_s": np.tile(when, (3, 1)) if lane == "own" else when,
        "dv_m_s": np.random.default_rng(3).normal(0.0, 0.1, (3, 3, 3)),
    }
    before = {name: value.copy() for name, value in job.items()}
    for value in job.values():
        value.setflags(write=False)
    fly(ref_l4, **job, radius_m=1e3 if lane == "followed" else None)
    assert all((job[name] == before[name]).all() for name in job)


@pytest.mark.parametrize("when", [0.0, 13.7, 40.0])
def test_shared_impulses_equal_flights_in_pieces(ref_l4, when):
    states, end_s = swarm(5), 40.0 * DAY_S
    dv = np.random.default_rng(1).normal(0.0, 0.1, (5, 2, 3))
    both = fly(ref_l4, states, [end_s], impulse_s=[when * DAY_S, end_s], dv_m_s=dv).state[:, 0]
    middle = fly(ref_l4, states, [when * DAY_S]).state[:, 0]
    middle[:, 3:] += dv[:, 0]
    pieces = fly(ref_l4, middle, [end_s], start_s=when * DAY_S).state[:, 0]
    pieces[:, 3:] += dv[:, 1]
    assert both[:, :3] == pytest.approx(pieces[:, :3], abs=2e-3)
    assert both[:, 3:] == pytest.approx(pieces[:, 3:], abs=1e-9)


def test_impulses_at_times_of_each_node_equal_single_flights(ref_l4):
    states, n = swarm(7), 7
    rng = np.random.default_rng(2)
    when = np.sort(rng.uniform(0.0, 30.0, (n, 3)), axis=1) * DAY_S
    dv = rng.normal(0.0, 0.1, (n, 3, 3))
    outputs = np.array([10.0, 20.0, 30.0]) * DAY_S
    together = fly(ref_l4, states, outputs, impulse_s=when, dv_m_s=dv, radius_m=1e6).state
    alone = [
        fly(ref_l4, states[[k]], outputs, impulse_s=when[[k]], dv_m_s=dv[[k]], radius_m=1e6).state[0]
        for k in range(n)
    ]
    assert (together == np.array(alone)).all()
    # by the other lane: two independent methods
    shared = [fly(ref_l4, states[[k]], outputs, impulse_s=when[k], dv_m_s=dv[[k]]).state[0] for k in range(n)]
    assert together[..., :3] == pytest.approx(np.array(shared)[..., :3], abs=1e-4)


@pytest.mark.parametrize("lane", ["shared", "own"])
@pytest.mark.parametrize("when", [0.0, 5.0, 9.0])
def test_impulses_at_one_time_add_up(ref_l4, lane, when):
    states = swarm(3)
    dv = np.random.default_rng(3).normal(0.0, 0.1, (3, 3, 3))
    outputs, times = np.array([0.0, 5.0, 9.0]) * DAY_S, np.full(3, when * DAY_S)
    rows = (lambda t: t) if lane == "shared" else (lambda t: np.tile(t, (3, 1)))
    three = fly(ref_l4, states, outputs, impulse_s=rows(times), dv_m_s=dv).state
    one = fly(ref_l4, states, outputs, impulse_s=rows(times[:1]), dv_m_s=dv.sum(axis=1, keepdims=True)).state
    assert three[..., :3] == pytest.approx(one[..., :3], abs=1e-6)
    assert three[..., 3:] == pytest.approx(one[..., 3:], abs=1e-13)


@pytest.mark.parametrize("lane", ["shared", "own"])
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_output_at_the_start_holds_the_impulse_there(ref_l4, lane, sign):
    states, dv = swarm(3), np.random.default_rng(3).normal(0.0, 0.1, (3, 1, 3))
    when = [7.0 * DAY_S] if lane == "shared" else np.full((3, 1), 7.0 * DAY_S)
    outputs = (7.0 + sign * np.array([0.0, 0.0, 3.0])) * DAY_S
    out = fly(ref_l4, states, outputs, start_s=7.0 * DAY_S, impulse_s=when, dv_m_s=dv).state
    assert (out[:, 0] == out[:, 1]).all()
    assert (out[:, 0, :3] == states[:, :3]).all()
    assert out[:, 0, 3:] == pytest.approx(states[:, 3:] + dv[:, 0], abs=1e-15)


def test_impulses_of_each_node_on_the_way_back_undo_those_on_the_way_out(ref_l4):
    states, rng, end_s = swarm(4), np.random.default_rng(5), 30.0 * DAY_S
    job = {"impulse_s": rng.uniform(0.0, end_s, (4, 3))}
    dv = rng.normal(0.0, 0.1, (4, 3, 3))
    there = fly(ref_l4, states, [end_s], dv_m_s=dv, **job).state[:, 0]
    back = fly(ref_l4, there, [0.0], start_s=end_s, dv_m_s=-dv, **job).state[:, 0]
    assert back[:, :3] == pytest.approx(states[:, :3], abs=4e-3)


def test_one_node_with_times_of_its_own_takes_the_lane_of_many(ref_l4):
    # else the last node of a batch of its own would have other bits than in a batch of two
    states, when, dv = swarm(2), np.array([[1e5, 9e5], [3e5, 4e5]]), np.full((2, 2, 3), 0.1)
    both = fly(ref_l4, states, [2e6], impulse_s=when, dv_m_s=dv, radius_m=1e6)
    alone = fly(ref_l4, states[1:], [2e6], impulse_s=when[1:], dv_m_s=dv[1:], radius_m=1e6)
    assert (alone.state[0] == both.state[1]).all()
    assert alone.step_s == both.step_s


def test_impulses_out_of_order_are_flown_in_order(ref_l4):
    dv = np.random.default_rng(3).normal(0.0, 0.1, (1, 3, 3))
    when, order = np.array([5.0, 1.0, 9.0]) * DAY_S, [1, 0, 2]
    given_, sorted_ = (
        fly(ref_l4, [MOVING], [10.0 * DAY_S], impulse_s=when[k], dv_m_s=dv[:, k]).state for k in ([0, 1, 2], order)
    )
    assert (given_ == sorted_).all()


def test_impulses_on_the_way_back_are_given_in_backward_time(ref_l4):
    # forwards with an impulse, then backwards with the opposite one, returns
    dv = np.array([[[0.1, -0.2, 0.05]]])
    end_s = 20.0 * DAY_S
    there = fly(ref_l4, [MOVING], [end_s], impulse_s=[8.0 * DAY_S], dv_m_s=dv).state[:, 0]
    back = fly(ref_l4, there, [0.0], start_s=end_s, impulse_s=[8.0 * DAY_S], dv_m_s=-dv).state[0, 0]
    assert back[:3] == pytest.approx(MOVING[:3], abs=4e-3)


def test_output_at_an_impulse_is_the_state_after_it(ref_l4):
    dv = np.array([[[0.1, -0.2, 0.05]]])
    time = 8.0 * DAY_S
    before = fly(ref_l4, [MOVING], [time]).state[0, 0]
    after = fly(ref_l4, [MOVING], [time], impulse_s=[time], dv_m_s=dv).state[0, 0]
    assert after[3:] - before[3:] == pytest.approx(dv[0, 0], abs=1e-9)
    assert after[:3] == pytest.approx(before[:3], abs=1e-3)


@pytest.mark.parametrize("n", [127, 128, 129])
def test_step_chosen_depends_on_the_reach_and_not_on_the_company(ref_l4, n):
    states = swarm(n)
    alone = fly(ref_l4, states, [30.0 * DAY_S])
    mirrored = fly(ref_l4, np.vstack([states, -states]), [30.0 * DAY_S])
    assert mirrored.step_s == alone.step_s
    assert (mirrored.state[:n] == alone.state).all()


@pytest.mark.parametrize(("point", "to_earth"), [("L1", 1.0), ("L2", -1.0)])
def test_node_that_meets_the_earth_is_reported_and_spoils_no_other(equilibrium, point, to_earth):
    reference = equilibrium(point)
    gap_m = float(np.linalg.norm(reference.primaries_m()[1]))
    doomed = np.array([0.95 * gap_m * to_earth, 0.0, 0.0, 1000.0 * to_earth, 0.0, 0.0])
    others = swarm(4, 1e5)
    outputs = np.array([0.0, 10.0]) * DAY_S
    # the arcs of the others, whoever flies along
    job = {"radius_m": 1e6}
    flight = fly(reference, np.vstack([others[:2], doomed, others[2:]]), outputs, **job)
    assert flight.status.tolist() == [OK, OK, HIT_PRIMARY, OK, OK]
    assert (flight.state[2, 0] == doomed).all()
    assert np.isnan(flight.state[2, 1]).all()
    assert (flight.state[[0, 1, 3, 4]] == fly(reference, others, outputs, **job).state).all()


@pytest.mark.parametrize("radius", [{}, {"radius_m": 1e6}])
def test_node_that_meets_the_sun_is_reported(ref_l4, radius):
    sun = -ref_l4.primaries_m()[0]
    doomed = np.array([sun[0] + 2e9, sun[1], sun[2], -3e5, 0.0, 0.0])
    flight = fly(ref_l4, [doomed, RESTING], [1.0 * DAY_S], **radius)
    assert flight.status.tolist() == [HIT_PRIMARY, OK]
    assert np.isnan(flight.state[0]).all()
    assert np.isfinite(flight.state[1]).all()


def test_no_nodes_give_no_states(ref_l4):
    assert fly(ref_l4, np.empty((0, 6)), [DAY_S]).state.shape == (0, 1, 6)


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"states": [(np.nan, 0, 0, 0, 0, 0)]}, "states: nan at (0, 0) (allowed: finite numbers)"),
        ({"states": [(0, 0, 0, 0, 0, np.inf)]}, "states: inf at (0, 5) (allowed: finite numbers)"),
        ({"states": [(0, 0, 0)]}, "states: shape (1, 3) (allowed: shape (n, 6))"),
        ({"output_s": [np.nan]}, "output times: nan at (0,) (allowed: finite numbers)"),
        ({"output_s": []}, "output times: shape (0,) (allowed: one or more times)"),
        (
            {"output_s": [2.0, 1.0]},
            "output times: they go back and forth (allowed: times in order, away from the start)",
        ),
        (
            {"output_s": [-1.0, 1.0]},
            "output times: they go back and forth (allowed: times in order, away from the start)",
        ),
        ({"excess_beta": [np.nan]}, "pressure: nan at (0,) (allowed: finite numbers)"),
        ({"impulse_s": [0.5]}, "impulses: times without dv, or dv without times (allowed: both or neither)"),
        (
            {"impulse_s": [0.5], "dv_m_s": np.ones((1, 2, 3))},
            "impulses: times (1, 1) and dv (1, 2, 3) (allowed: (k,) or (1, k), and (1, k, 3))",
        ),
        (
            {"impulse_s": [1.5], "dv_m_s": np.ones((1, 1, 3))},
            "impulse times: 1.5 to 1.5 s (allowed: 0 to 1 s)",
        ),
        (
            {"impulse_s": [0.5], "dv_m_s": np.full((1, 1, 3), np.nan)},
            "impulses: nan at (0, 0, 0) (allowed: finite numbers)",
        ),
        ({"accuracy": "best"}, "accuracy: got 'best' (allowed: draft default fine)"),
        ({"accuracy": "best", "output_s": [0.0]}, "accuracy: got 'best' (allowed: draft default fine)"),
        ({"radius_m": -1.0}, "radius: got -1.0 m (allowed: 0 m or more, finite)"),
        ({"radius_m": np.nan}, "radius: got nan m (allowed: 0 m or more, finite)"),
        (
            {"states": [(1e200, 0, 0, 0, 0, 0)]},
            "states: with their speeds, impulses and pressure they reach inf m (allowed: up to 1e+14 m)",
        ),
        (
            {"states": [(1e15, 0, 0, 0, 0, 0)]},
            "states: with their speeds, impulses and pressure they reach 1e+15 m (allowed: up to 1e+14 m)",
        ),
        ({"impulse_s": [np.nan], "dv_m_s": np.ones((1, 1, 3))}, "impulse times: nan at (0, 0) (allowed: finite"),
    ],
)
def test_unlawful_input_is_refused_by_name(ref_l4, change, text):
    job = {"states": np.zeros((1, 6)), "output_s": [1.0], **change}
    with pytest.raises(DomainError) as refused:
        fly(ref_l4, **job)
    assert text in str(refused.value)


def test_small_excess_of_pressure_is_the_linear_response(equilibrium):
    # s dbeta, whose square is 1e-9 (0.1 km of 1e11 m)
    reference = equilibrium("L4", pressure_area_m2_kg=0.026)
    excess = lightness(1e-5)
    flown = fly(reference, np.zeros((1, 6)), [60.0 * DAY_S], excess_beta=[excess], accuracy="fine").state[0, 0]
    linear = reference.pressure_response(0.0, 60.0 * DAY_S) * excess
    assert flown == pytest.approx(linear, rel=1e-6, abs=1e-6 * np.linalg.norm(linear[3:]))


@pytest.mark.parametrize("point", ["L1", "L2", "L3", "L4", "L5"])
def test_small_deviations_follow_the_transition_matrix(equilibrium, point):
    # central differences of 100 m: third order 1e-12 and less; mm of accuracy over 100 m
    reference = equilibrium(point)
    rate = reference.rate_rad_s
    size = 100.0 * np.diag([1.0, 1.0, 1.0, rate, rate, rate])
    days = 40.0
    ends = fly(reference, np.vstack([size, -size]), [days * DAY_S], accuracy="fine").state[:, 0]
    units = np.repeat([1.0, rate], 3)
    ours = ((ends[:6] - ends[6:]) / 200.0).T / units[:, None]
    matrix = reference.transition(0.0, days * DAY_S) * units / units[:, None]
    assert ours == pytest.approx(matrix, abs=1e-6)


def test_year_long_flight_ends_where_its_parts_do(ref_l4):
    yearly = fly(ref_l4, [RESTING], [YEAR_S]).state[0, 0]
    with_stops = fly(ref_l4, [RESTING], np.linspace(0.1, 1.0, 30) * YEAR_S).state[0, -1]
    assert with_stops[:3] == pytest.approx(yearly[:3], abs=1e-3)
