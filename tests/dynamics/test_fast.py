"""The fast lane: its estimate of the error, its check, its choice, and its likeness to the full lane."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.fast import choose_lane, fly_fast
from farhold.dynamics.propagate import fly
from farhold.errors import DomainError

ORDERS = (1, 2, 3)


def swarm(n, radius_m=1e6, seed=7):
    rng = np.random.default_rng(seed)
    return np.hstack([rng.normal(0.0, radius_m / 2.0, (n, 3)), rng.normal(0.0, radius_m * 1e-7, (n, 3))])


def crowd(n, radius_m, days, kicks=3, seed=9):
    """States and arguments of n nodes with pressure of their own and shared impulses."""
    rng = np.random.default_rng(seed)
    return swarm(n, radius_m, seed), {
        "excess_beta": rng.normal(0.0, radius_m * 1e-12, n),
        "impulse_s": np.linspace(0.0, 0.9, kicks) * days * DAY_S,
        "dv_m_s": rng.normal(0.0, radius_m * 1e-8, (n, kicks, 3)),
    }


def true_error_m(reference, flight, states, output_s, **job):
    full = fly(reference, states, output_s, accuracy="fine", **job).state
    return np.linalg.norm((flight.state - full)[..., :3], axis=2).max()


@given(
    seed=st.integers(0, 1000),
    order=st.sampled_from(ORDERS),
    log_radius=st.floats(5.0, 8.0),
    days=st.sampled_from([-90.0, 30.0, 150.0]),
)
@settings(max_examples=8)
def test_estimate_bounds_the_error_of_every_node(ref_l4, seed, order, log_radius, days):
    # 300 nodes, of which 96 were looked at; what the full lane promises comes on top
    radius_m = 10.0**log_radius
    states, job = crowd(300, radius_m, days, seed=seed)
    output_s = np.array([0.5, 1.0]) * days * DAY_S
    flight = fly_fast(ref_l4, states, output_s, order=order, **job)
    error_m = true_error_m(ref_l4, flight, states, output_s, **job)
    assert flight.sound
    assert error_m <= flight.error_m + 1e-3
    assert flight.checked_m <= error_m + 1e-3


@pytest.mark.parametrize("order", ORDERS)
@pytest.mark.parametrize(("point", "radius_m", "days"), [("L4", 2e7, 180.0), ("L1", 3e6, 30.0), ("L2", 3e6, 30.0)])
def test_estimate_and_check_are_near_the_error(equilibrium, point, radius_m, days, order):
    # not a bound that says nothing: the check finds the worst of 400, the estimate is 1.5 times it
    reference = equilibrium(point)
    states, job = crowd(400, radius_m, days)
    flight = fly_fast(reference, states, [days * DAY_S], order=order, **job)
    error_m = true_error_m(reference, flight, states, [days * DAY_S], **job)
    assert flight.checked_m == pytest.approx(error_m, rel=0.02, abs=2e-3)
    assert error_m - 2e-3 < flight.error_m < 1.7 * error_m + 2e-3


@pytest.mark.parametrize("order", ORDERS)
def test_overused_map_says_that_its_estimate_is_worthless(equilibrium, order):
    # 20,000 km at L1 for 90 d: a fifth of the way to the Earth, grown by fifty
    flight = fly_fast(equilibrium("L1"), swarm(10, 2e7), [90.0 * DAY_S], order=order)
    assert not flight.sound


@pytest.mark.parametrize("order", ORDERS)
def test_node_that_meets_a_body_makes_the_estimate_worthless(ref_l1, order):
    gap_m = float(np.linalg.norm(ref_l1.primaries_m()[1]))
    states = np.vstack([swarm(5, 1e4), [0.95 * gap_m, 0.0, 0.0, 1000.0, 0.0, 0.0]])
    assert not fly_fast(ref_l1, states, [5.0 * DAY_S], order=order).sound


@pytest.mark.parametrize("order", ORDERS)
@pytest.mark.parametrize("radius_m", [0.1, 10.0, 1e4])
def test_small_swarm_is_sound_though_roundings_hide_the_next_term(ref_l4, radius_m, order):
    flight = fly_fast(ref_l4, sphere(20, radius_m), [90.0 * DAY_S], order=order)
    assert flight.sound is True


def test_nodes_at_the_reference_are_soundly_there(ref_l4):
    flight = fly_fast(ref_l4, np.zeros((3, 6)), [YEAR_S], order=2)
    assert (flight.state == 0.0).all()
    assert (flight.error_m, flight.checked_m, flight.sound) == (0.0, 0.0, True)


def sphere(n, radius_m, seed=5):
    place = np.random.default_rng(seed).normal(size=(n, 3))
    return np.hstack([radius_m * place / np.linalg.norm(place, axis=1)[:, None], np.zeros((n, 3))])


CHOICES = [
    (1e3, 1.0, 1),
    (1e6, 1e4, 1),
    (1e6, 10.0, 2),
    (1e6, 0.02, 3),
    (1e8, 1e-3, None),
]


@pytest.mark.parametrize(("radius_m", "tolerance_m", "order"), CHOICES)
def test_lowest_order_within_the_tolerance_is_chosen(ref_l4, radius_m, tolerance_m, order):
    # a year from rest at L4: 5 km, 0.5 m, and 0.1 mm at 1000 km by first, second and third order
    states = sphere(200, radius_m)
    assert choose_lane(ref_l4, states, [YEAR_S], tolerance_m=tolerance_m) == order
    errors = [
        true_error_m(ref_l4, fly_fast(ref_l4, states, [YEAR_S], order=each), states, [YEAR_S]) for each in ORDERS
    ]
    assert order is None or errors[order - 1] <= tolerance_m
    # the orders below are refused: their errors, with half of them for safety, are beyond it
    assert min(errors[: 3 if order is None else order - 1], default=np.inf) > 0.6 * tolerance_m


@pytest.mark.parametrize(("accuracy", "order"), [("draft", 2), ("default", 3)])
def test_lane_is_chosen_by_accuracy_too(ref_l4, accuracy, order):
    # 1 m and 1 mm; second order is out by 0.25 m after a year at 800 km
    assert choose_lane(ref_l4, sphere(50, 8e5), [YEAR_S], accuracy=accuracy) == order


def test_one_node_that_goes_far_is_found_among_many(ref_l4):
    # neither far, fast, pressed nor kicked the most, and off the even spread: but it drifts the most of all
    states = sphere(1000, 1e6)
    rate = ref_l4.rate_rad_s
    states[:, 3:] = np.cross([0.0, 0.0, -2.0 * rate], states[:, :3] * [1.0, 0.0, 0.0]) * [0.0, 1.0, 0.0]
    states[501] = [0.0, -9e5, 0.0, 0.0, 0.15, 0.0]
    alone = fly_fast(ref_l4, states[[501]], [YEAR_S], order=1)
    assert fly_fast(ref_l4, states, [YEAR_S], order=1).error_m >= alone.error_m
    assert choose_lane(ref_l4, states, [YEAR_S], tolerance_m=0.9 * alone.error_m) != 1


def test_times_of_each_node_take_the_full_lane(ref_l4):
    states, job = crowd(4, 1e3, 30.0)
    job["impulse_s"] = np.tile(job["impulse_s"], (4, 1))
    assert choose_lane(ref_l4, states, [30.0 * DAY_S], tolerance_m=1e9, **job) is None
    with pytest.raises(DomainError) as refused:
        fly_fast(ref_l4, states, [30.0 * DAY_S], order=2, **job)
    assert str(refused.value) == (
        "impulse times: the fast lane takes times that all nodes share (allowed: (k,); use the full lane)"
    )


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda ref: fly_fast(ref, np.zeros((1, 6)), [1.0], order=4), "order: got 4 (allowed: 1, 2 or 3)"),
        (lambda ref: fly_fast(ref, np.zeros((1, 6)), [1.0], order=0), "order: got 0 (allowed: 1, 2 or 3)"),
        (
            lambda ref: fly_fast(ref, [[np.nan] * 6], [1.0], order=1),
            "states: nan at (0, 0) (allowed: finite numbers)",
        ),
        (
            lambda ref: choose_lane(ref, np.zeros((1, 6)), [1.0], accuracy="best"),
            "accuracy: got 'best' (allowed: draft default fine)",
        ),
    ],
)
def test_unlawful_input_is_refused_by_name(ref_l4, call, text):
    with pytest.raises(DomainError) as refused:
        call(ref_l4)
    assert str(refused.value) == text


@pytest.mark.parametrize("when", [0.0, 13.7, 40.0])
def test_shared_impulses_equal_maps_in_pieces(ref_l4, when):
    # to the bit on the linear map, whose pieces are the same matrices
    states, end_s = swarm(5), 40.0 * DAY_S
    dv = np.random.default_rng(1).normal(0.0, 0.1, (5, 2, 3))
    job = {"impulse_s": [when * DAY_S, end_s], "dv_m_s": dv}
    both = fly_fast(ref_l4, states, [end_s], order=1, **job).state[:, 0]
    middle = fly_fast(ref_l4, states, [when * DAY_S], order=1).state[:, 0]
    middle[:, 3:] += dv[:, 0]
    pieces = fly_fast(ref_l4, middle, [end_s], order=1, start_s=when * DAY_S).state[:, 0]
    pieces[:, 3:] += dv[:, 1]
    assert both == pytest.approx(pieces, rel=1e-12)


@pytest.mark.parametrize("order", ORDERS)
def test_impulses_at_one_time_add_up(ref_l4, order):
    states, time = swarm(4), 5.0 * DAY_S
    dv = np.random.default_rng(1).normal(0.0, 0.1, (4, 3, 3))
    output_s = [time, 20.0 * DAY_S]
    three = fly_fast(ref_l4, states, output_s, order=order, impulse_s=[time] * 3, dv_m_s=dv).state
    total = dv.sum(axis=1, keepdims=True)
    one = fly_fast(ref_l4, states, output_s, order=order, impulse_s=[time], dv_m_s=total).state
    assert three == pytest.approx(one, rel=1e-12, abs=1e-9)


@pytest.fixture(scope="module")
def whole(ref_l4):
    states, job = crowd(1100, 1e6, 60.0)
    return states, job, {order: fly_fast(ref_l4, states, OUTPUT_S, order=order, **job).state for order in ORDERS}


OUTPUT_S = np.array([0.0, 20.0, 60.0]) * DAY_S


@pytest.mark.parametrize("n", [1, 127, 128, 129, 513, 1025])
@pytest.mark.parametrize("order", ORDERS)
def test_result_has_the_same_bits_for_any_number_of_nodes(ref_l4, whole, order, n):
    states, job, all_of_them = whole
    part = {"excess_beta": job["excess_beta"][:n], "dv_m_s": job["dv_m_s"][:n], "impulse_s": job["impulse_s"]}
    assert (fly_fast(ref_l4, states[:n], OUTPUT_S, order=order, **part).state == all_of_them[order][:n]).all()


@pytest.mark.parametrize("threads", [1, 3])
@pytest.mark.parametrize("order", ORDERS)
def test_result_has_the_same_bits_in_any_order_on_any_threads(ref_l4, whole, set_threads, order, threads):
    set_threads(threads)
    states, job, all_of_them = whole
    turn = np.random.default_rng(3).permutation(len(states))
    mixed = {"excess_beta": job["excess_beta"][turn], "dv_m_s": job["dv_m_s"][turn], "impulse_s": job["impulse_s"]}
    assert (fly_fast(ref_l4, states[turn], OUTPUT_S, order=order, **mixed).state == all_of_them[order][turn]).all()


def test_what_is_given_is_left_as_it_was(ref_l4):
    states, job = crowd(3, 1e6, 10.0)
    before = states.copy(), {name: value.copy() for name, value in job.items()}
    fly_fast(ref_l4, states, [10.0 * DAY_S], order=3, **job)
    assert (states == before[0]).all()
    assert [(job[name] == before[1][name]).all() for name in job] == [True] * 3


@pytest.mark.parametrize("order", ORDERS)
def test_flight_of_no_length_keeps_the_state_and_takes_the_impulse(ref_l4, order):
    states, dv = swarm(2), np.full((2, 1, 3), 0.1)
    flight = fly_fast(ref_l4, states, [0.0], order=order, impulse_s=[0.0], dv_m_s=dv)
    states[:, 3:] += 0.1
    assert (flight.state[:, 0] == states).all()


def test_no_nodes_give_no_states(ref_l4):
    flight = fly_fast(ref_l4, np.empty((0, 6)), [DAY_S], order=2)
    assert flight.state.shape == (0, 1, 6)
    assert flight.error_m == 0.0
