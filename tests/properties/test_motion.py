"""What holds for any motion about a libration point: reversal, composition, integrals, symplectic flow."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farhold.domain.epoch import DAY_S
from farhold.dynamics.dispersion import carried_covariance
from farhold.dynamics.fast import fly_fast
from farhold.dynamics.maps import map_between
from farhold.dynamics.propagate import fly

SEEDS = st.integers(0, 10_000)
POINTS = st.sampled_from(["L1", "L2", "L3", "L4", "L5"])
LANES = st.sampled_from(["shared", "own"])
# a factor that motion at L1 and L2 grows by, and their distance from the Earth, ask for less there
MOST_DAYS = {"L1": 50.0, "L2": 50.0, "L3": 300.0, "L4": 300.0, "L5": 300.0}
RADIUS_M = {"L1": 1e5, "L2": 1e5, "L3": 1e6, "L4": 1e6, "L5": 1e6}


def states_of(point, seed, n=4):
    rng = np.random.default_rng(seed)
    return RADIUS_M[point] * np.hstack([rng.normal(size=(n, 3)), 1e-7 * rng.normal(size=(n, 3))])


def flown(lane, reference, states, output_s, **job):
    """States at the times, by the lane of shared arcs or that of arcs of one's own."""
    if lane == "own":
        n = len(states)
        job.setdefault("impulse_s", np.full((n, 1), job.get("start_s", 0.0)))
        job.setdefault("dv_m_s", np.zeros((n, 1, 3)))
    return fly(reference, states, output_s, **job).state


@given(point=POINTS, lane=LANES, seed=SEEDS, share=st.floats(0.02, 1.0), sign=st.sampled_from([1.0, -1.0]))
@settings(max_examples=20)
def test_flight_there_and_back_returns(equilibrium, point, lane, seed, share, sign):
    reference, end_s = equilibrium(point), sign * share * MOST_DAYS[point] * DAY_S
    states = states_of(point, seed)
    beta = np.random.default_rng(seed).normal(0.0, 1e-7, 4)
    there = flown(lane, reference, states, [end_s], excess_beta=beta)[:, 0]
    back = flown(lane, reference, there, [0.0], start_s=end_s, excess_beta=beta)[:, 0]
    # a millimetre each way, grown by e^(50/23) = 9 at the near points
    assert back[:, :3] == pytest.approx(states[:, :3], abs=2e-2)
    assert back[:, 3:] == pytest.approx(states[:, 3:], abs=1e-8)


@given(point=POINTS, lane=LANES, seed=SEEDS, share=st.floats(0.02, 0.98))
@settings(max_examples=20)
def test_arcs_compose(equilibrium, point, lane, seed, share):
    reference, end_s = equilibrium(point), MOST_DAYS[point] * DAY_S
    states = states_of(point, seed)
    whole = flown(lane, reference, states, [end_s])[:, 0]
    first = flown(lane, reference, states, [share * end_s])[:, 0]
    second = flown(lane, reference, first, [end_s], start_s=share * end_s)[:, 0]
    assert second[:, :3] == pytest.approx(whole[:, :3], abs=2e-2)


def jacobi_excess(reference, states):
    """2 times the energy integral of deviations (n, 6) about a point at rest, without cancellation, (n,)."""
    n, gm = reference.rate_rad_s, reference.gm_m3_s2
    d, v = states[:, :3], states[:, 3:]
    total = n * n * (d[:, 0] ** 2 + d[:, 1] ** 2) - (v**2).sum(axis=1)
    for strength, rho in zip((gm[0], gm[2]), reference.primaries_m(), strict=True):
        r = np.linalg.norm(rho)
        # 1/|rho + d| - 1/r + rho d / r3, whose linear part cancels that of the centrifugal term
        q = (2.0 * d @ rho + (d**2).sum(axis=1)) / r**2
        root = np.sqrt(1.0 + q)
        total += (
            2.0 * strength / r * ((d**2).sum(axis=1) / r**2 * -0.5 + 0.5 * q * (1.0 - 2.0 / (root * (1.0 + root))))
        )
    return total


@given(point=POINTS, lane=LANES, seed=SEEDS)
@settings(max_examples=20)
def test_jacobi_constant_is_kept(equilibrium, point, lane, seed):
    reference = equilibrium(point)
    states = states_of(point, seed)
    path = flown(lane, reference, states, np.linspace(0.0, MOST_DAYS[point], 5) * DAY_S)
    excess = np.array([jacobi_excess(reference, path[:, k]) for k in range(path.shape[1])])
    size = (reference.rate_rad_s * np.linalg.norm(path[..., :3], axis=2).max()) ** 2
    assert np.abs(excess - excess[0]).max() < 1e-8 * size


def symplectic_form(rate):
    """The matrix of R, T, N and rates in turning axes that the flow keeps, times in units of 1/n."""
    turn = 2.0 * np.array([[0.0, 1.0, 0.0], [-1.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
    form = np.block([[-turn, np.eye(3)], [-np.eye(3), np.zeros((3, 3))]])
    unit = np.repeat([1.0, 1.0 / rate], 3)
    return form * np.outer(unit, unit)


@given(point=POINTS, share=st.floats(-1.0, 1.0), area=st.sampled_from([0.0, 0.026]))
@settings(max_examples=20)
def test_transition_matrix_is_symplectic(equilibrium, point, share, area):
    reference = equilibrium(point, pressure_area_m2_kg=area)
    span_s = share * MOST_DAYS[point] * DAY_S
    form = symplectic_form(reference.rate_rad_s)
    unit = np.repeat([1.0, reference.rate_rad_s], 3)
    scale = np.outer(unit, unit)
    for matrix in (reference.transition(0.0, span_s), map_between(reference, 0.0, span_s).linear):
        size = np.abs(matrix / unit[:, None] * unit).max() ** 2
        assert matrix.T @ form @ matrix * scale == pytest.approx(form * scale, abs=1e-11 * size)


@given(point=POINTS, seed=SEEDS, share=st.floats(0.1, 1.0))
@settings(max_examples=12)
def test_flow_of_small_differences_is_symplectic(equilibrium, point, seed, share):
    # two pairs of neighbours of one far node: their form is kept along the full nonlinear flight
    reference, end_s = equilibrium(point), share * MOST_DAYS[point] * DAY_S
    rate = reference.rate_rad_s
    rng = np.random.default_rng(seed)
    step = 1e-3 * RADIUS_M[point] * rng.normal(size=(2, 6)) * np.repeat([1.0, rate], 3)
    base = 10.0 * states_of(point, seed, 1)
    ends = fly(reference, np.vstack([base + step, base - step]), [end_s], accuracy="fine").state[:, 0]
    after = 0.5 * (ends[:2] - ends[2:])
    form = symplectic_form(rate)
    before_form, after_form = (pair[0] @ form @ pair[1] for pair in (step, after))
    size = np.prod([np.linalg.norm(v / np.repeat([1.0, rate], 3)) for v in after])
    assert after_form == pytest.approx(before_form, abs=1e-5 * size)


@given(seed=SEEDS, order=st.permutations(range(6)), lane=LANES)
@settings(max_examples=15)
def test_bits_do_not_depend_on_the_order_of_nodes(ref_l4, seed, order, lane):
    rng = np.random.default_rng(seed)
    states, beta = states_of("L4", seed, 6), rng.normal(0.0, 1e-7, 6)
    when, dv = np.sort(rng.uniform(0.0, 20.0, (6, 2)), axis=1) * DAY_S, rng.normal(0.0, 0.01, (6, 2, 3))
    output_s = [10.0 * DAY_S, 20.0 * DAY_S]

    def states_in(turn):
        times = when[turn] if lane == "own" else when[0]
        job = {"excess_beta": beta[turn], "impulse_s": times, "dv_m_s": dv[turn]}
        return fly(ref_l4, states[turn], output_s, **job).state

    assert (states_in(np.array(order)) == states_in(np.arange(6))[list(order)]).all()


@given(point=POINTS, seed=SEEDS)
@settings(max_examples=12)
def test_north_and_south_are_alike_to_the_bit(equilibrium, point, seed):
    reference, mirror = equilibrium(point), np.array([1.0, 1.0, -1.0, 1.0, 1.0, -1.0])
    states = states_of(point, seed)
    plain, turned = (fly(reference, each, [20.0 * DAY_S]).state for each in (states, states * mirror))
    assert (turned == plain * mirror).all()


@given(seed=SEEDS, share=st.floats(0.05, 0.95))
@settings(max_examples=12)
def test_covariances_compose(ref_l4, seed, share):
    root = np.random.default_rng(seed).normal(size=(6, 6)) * np.repeat([1.0, 1e-7], 3)[:, None]
    given_, end_s = root @ root.T, 100.0 * DAY_S
    whole = carried_covariance(ref_l4, given_, 0.0, end_s)
    half = carried_covariance(ref_l4, given_, 0.0, share * end_s)
    unit = np.outer(*[np.repeat([1.0, ref_l4.rate_rad_s], 3)] * 2)
    both = carried_covariance(ref_l4, half, share * end_s, end_s)
    assert both / unit == pytest.approx(whole / unit, abs=1e-9 * np.abs(whole / unit).max())


@given(seed=SEEDS, point=POINTS)
@settings(max_examples=12)
def test_third_order_map_and_full_lane_agree(equilibrium, seed, point):
    reference = equilibrium(point)
    states, output_s = 0.1 * states_of(point, seed), [0.3 * MOST_DAYS[point] * DAY_S]
    mapped = fly_fast(reference, states, output_s, order=3).state
    assert mapped[..., :3] == pytest.approx(fly(reference, states, output_s).state[..., :3], abs=2e-3)
