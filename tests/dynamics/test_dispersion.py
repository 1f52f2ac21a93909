"""Covariances carried, factored and drawn from, against flights, closed forms and sampling step by step."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import ks_1samp, ks_2samp, norm

from farhold.domain.epoch import DAY_S
from farhold.dynamics.dispersion import carried_covariance, draw, factor_of
from farhold.dynamics.propagate import fly
from farhold.errors import DomainError

SIGMAS = np.array([3.0, 1.0, 2.0, 1e-4, 2e-4, 0.5e-4])
FIX = np.diag(SIGMAS**2)


def whitened(sample, covariance):
    """Samples (s, 6) in the units and axes in which `covariance` is one."""
    return np.linalg.solve(np.linalg.cholesky(covariance), sample.T).T


def assert_unit_normal(white):
    """Mean 0 and covariance 1 within five standard errors: 1/sqrt(s), and sqrt(2/s) on the diagonal."""
    count = len(white)
    assert np.abs(white.mean(axis=0)).max() < 5.0 / np.sqrt(count)
    assert np.abs(white.T @ white / count - np.eye(white.shape[1])).max() < 5.0 * np.sqrt(2.0 / count)


@pytest.mark.parametrize(("point", "days"), [("L4", 200.0), ("L1", 40.0), ("L4", -90.0)])
def test_carried_covariance_is_that_of_flights(equilibrium, point, days):
    # state, two impulses and pressure at once, small enough for the motion to be linear
    reference, n = equilibrium(point), 6000
    rng = np.random.default_rng(3)
    when = np.array([0.2, 0.7]) * days * DAY_S
    kick = np.diag([1e-4, 2e-4, 1e-4]) ** 2
    sigma = 1e-10
    carried = carried_covariance(
        reference,
        FIX,
        0.0,
        days * DAY_S,
        impulse_s=when,
        impulse_covariance=np.stack([kick, 4.0 * kick]),
        pressure_sigma=sigma,
    )
    assert carried.shape == (1, 6, 6)
    ends = fly(
        reference,
        rng.normal(size=(n, 6)) * SIGMAS,
        [days * DAY_S],
        excess_beta=sigma * rng.normal(size=n),
        impulse_s=when,
        dv_m_s=rng.normal(size=(n, 2, 3)) * np.sqrt(np.diag(kick)) * [[1.0], [2.0]],
    ).state[:, 0]
    assert_unit_normal(whitened(ends, carried[0]))


def test_drawing_at_the_end_is_drawing_impulse_by_impulse(ref_l4):
    # two independent ways to the same distribution: moments, and Kolmogorov-Smirnov on axes and between them
    days, n, samples = 60.0, 3, 4000
    rng = np.random.default_rng(21)
    when = np.arange(1, 9) * 7.0 * DAY_S
    roots = rng.normal(size=(n, 8, 3, 3)) * 1e-4
    errors = roots @ roots.transpose(0, 1, 3, 2)
    total = carried_covariance(ref_l4, FIX, 0.0, days * DAY_S, impulse_s=when, impulse_covariance=errors)
    mean = rng.normal(size=(n, 6)) * SIGMAS
    at_end = np.concatenate([batch.copy() for batch in draw(rng, mean, total, samples, most=5000)])

    state = SIGMAS * rng.normal(size=(samples, n, 6))
    times = [0.0, *when, days * DAY_S]
    for k in range(len(times) - 1):
        if k > 0:
            state[..., 3:] += np.einsum("ncd,snd->snc", roots[:, k - 1], rng.normal(size=(samples, n, 3)))
        state = state @ ref_l4.transition(times[k], times[k + 1]).T
    for node in range(n):
        assert_unit_normal(whitened(state[:, node], total[node]))
        assert_unit_normal(whitened(at_end[:, node] - mean[node], total[node]))
    axes = np.vstack([np.eye(6), rng.normal(size=(6, 6))]) / SIGMAS
    chances = [
        ks_2samp((at_end - mean)[:, k] @ axis, state[:, k] @ axis).pvalue for k in range(n) for axis in axes
    ]
    # 36 tests: the smallest of 36 chances is below 1e-4 once in 300 seeds
    assert min(chances) > 1e-4


def test_errors_of_each_node_stay_its_own(ref_l4):
    start = np.stack([FIX, 4.0 * FIX, np.zeros((6, 6))])
    carried = carried_covariance(ref_l4, start, 0.0, 30.0 * DAY_S, pressure_sigma=[0.0, 0.0, 1e-7])
    phi, response = ref_l4.transition(0.0, 30.0 * DAY_S), ref_l4.pressure_response(0.0, 30.0 * DAY_S)
    assert carried[0] == pytest.approx(phi @ FIX @ phi.T)
    assert carried[1] == pytest.approx(4.0 * carried[0])
    assert carried[2] == pytest.approx(1e-14 * np.outer(response, response))


def test_one_state_and_errors_of_many_nodes_give_many(ref_l4):
    kicks = np.tile(np.diag([1e-8, 0.0, 0.0]), (5, 2, 1, 1))
    several = carried_covariance(ref_l4, FIX, 0.0, 9.0 * DAY_S, impulse_s=[0.0, 1.0], impulse_covariance=kicks)
    assert several.shape == (5, 6, 6)
    assert carried_covariance(ref_l4, FIX, 0.0, 9.0 * DAY_S, pressure_sigma=np.ones(4)).shape == (4, 6, 6)


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize("point", ["L1", "L4"])
def test_acceleration_soon_is_that_of_free_fall(equilibrium, point, sign):
    # a t2/2 and a t, but for (n t)2 = 3e-6 times some units of gradient and for turning, n t = 1.7e-3
    a, t = 1e-9, sign * 0.1 * DAY_S
    carried = carried_covariance(equilibrium(point), np.zeros((6, 6)), 0.0, t, acceleration_sigma_m_s2=a)[0]
    free = np.block(
        [[0.25 * t**4 * np.eye(3), 0.5 * t**3 * np.eye(3)], [0.5 * t**3 * np.eye(3), t**2 * np.eye(3)]]
    )
    scale = np.repeat([1.0, abs(t)], 3)
    assert carried * np.outer(scale, scale) == pytest.approx(
        a**2 * free * np.outer(scale, scale), abs=5e-3 * a**2 * t**4
    )


@pytest.mark.parametrize(("point", "days"), [("L4", 5.0), ("L4", 250.0), ("L1", 60.0), ("L4", -80.0)])
def test_acceleration_along_the_rays_acts_as_pressure(equilibrium, point, days):
    # s = L p, where L is the response to the three axes, and so s (L L')^-1 s = p p
    reference, end_s = equilibrium(point), days * DAY_S
    push = reference.pressure_field(np.zeros((1, 3)))[0]
    unit = np.repeat([1.0, 1.0 / reference.rate_rad_s], 3)
    lever = carried_covariance(reference, np.zeros((6, 6)), 0.0, end_s, acceleration_sigma_m_s2=1.0)[0]
    response = reference.pressure_response(0.0, end_s) * unit
    back = np.linalg.pinv(lever * np.outer(unit, unit), rcond=1e-11)
    assert response @ back @ response == pytest.approx(push @ push, rel=1e-5)
    # and the rank is that of three axes
    values = np.linalg.eigvalsh(lever * np.outer(unit, unit))
    assert (values > 1e-11 * values[-1]).sum() == 3


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"initial": np.eye(5)}, "initial: shape (5, 5) (allowed: (6, 6) or (n, 6, 6))"),
        ({"impulse_s": [0.5]}, "impulse_covariance: none given (allowed: (1, 3, 3))"),
        (
            {"impulse_s": [0.5], "impulse_covariance": np.eye(3)},
            "impulse_covariance: shape (3, 3) (allowed: (..., 1, 3, 3))",
        ),
        (
            {"impulse_s": [0.5, 2.0], "impulse_covariance": np.zeros((2, 3, 3))},
            "impulse_s: 0.5 to 2 s (allowed: times within the span)",
        ),
        (
            {"impulse_s": [np.nan], "impulse_covariance": np.zeros((1, 3, 3))},
            "impulse_s: nan to nan s (allowed: times within the span)",
        ),
        (
            {"initial": np.zeros((4, 6, 6)), "pressure_sigma": np.ones(3)},
            "pressure_sigma: shape (3,) (allowed: for all, or for each of 4 nodes)",
        ),
        (
            {
                "initial": np.zeros((4, 6, 6)),
                "impulse_s": [0.5],
                "impulse_covariance": np.zeros((3, 1, 3, 3)),
            },
            "impulse_covariance: shape (3, 1, 3, 3) (allowed: for all, or for each of 4 nodes)",
        ),
    ],
)
def test_unlawful_errors_are_refused_by_name(ref_l4, change, text):
    with pytest.raises(DomainError) as refused:
        carried_covariance(ref_l4, **{"initial": FIX, "from_s": 0.0, "to_s": 1.0, **change})
    assert str(refused.value) == text


@given(seed=st.integers(0, 10_000), rank=st.integers(0, 6))
@settings(max_examples=30)
def test_factor_times_itself_is_the_covariance_of_any_rank(seed, rank):
    root = np.random.default_rng(seed).normal(size=(2, 6, rank)) * SIGMAS[:, None]
    covariance = root @ root.transpose(0, 2, 1)
    factor = factor_of(covariance)
    unit = np.outer(SIGMAS, SIGMAS)
    assert (np.triu(factor, 1) == 0.0).all()
    assert factor @ factor.transpose(0, 2, 1) / unit == pytest.approx(covariance / unit, abs=1e-7)


@pytest.mark.parametrize("axis", range(6))
def test_factor_of_one_direction_is_that_direction(axis):
    covariance = np.zeros((6, 6))
    covariance[axis, axis] = 1e-8
    factor = factor_of(covariance)
    assert factor.shape == (1, 6, 6)
    assert factor[0] @ factor[0].T == pytest.approx(covariance, abs=1e-22)


def test_factor_of_nothing_is_nothing():
    assert (factor_of(np.zeros((3, 6, 6))) == 0.0).all()
    assert factor_of(np.zeros((0, 6, 6))).shape == (0, 6, 6)


def with_entry(i, j, value):
    covariance = np.diag([1.0, 1.0, 0.0, 1.0, 1.0, 1.0])
    covariance[i, j] = covariance[j, i] = value
    return covariance


@pytest.mark.parametrize(
    ("covariance", "text"),
    [
        (with_entry(3, 3, -1e-9), "covariance: a variance of -1e-09 (allowed: no negative variance)"),
        (with_entry(0, 1, 2.0), "covariance: an eigenvalue of -1 (allowed: no negative variance)"),
        (with_entry(0, 2, 0.5), "covariance: a variance of 0 that covaries (allowed: no negative variance)"),
        (with_entry(4, 5, np.nan), "covariance: a number that is not finite (allowed: finite numbers)"),
        (np.eye(3), "covariance: shape (1, 3, 3) (allowed: (n, 6, 6))"),
    ],
)
def test_what_is_no_covariance_is_refused(covariance, text):
    with pytest.raises(DomainError) as refused:
        factor_of(covariance)
    assert str(refused.value) == text


@pytest.mark.parametrize(("samples", "most"), [(10, 6), (7, 100), (12, 6), (1, 1), (0, 5)])
def test_draw_gives_the_samples_asked_in_batches(samples, most):
    # three nodes: most // 3 samples a batch, one at least
    batches = [
        len(batch) for batch in draw(np.random.default_rng(1), np.zeros((3, 6)), FIX[None], samples, most=most)
    ]
    assert sum(batches) == samples
    assert max(batches, default=0) <= max(1, most // 3)


@pytest.mark.parametrize("most", [1, 10, 1 << 20])
def test_draw_is_repeated_by_its_generator_whatever_the_batches(most):
    mean = np.arange(12.0).reshape(2, 6)
    drawn = [
        np.concatenate([batch.copy() for batch in draw(np.random.default_rng(5), mean, FIX[None], 9, most=size)])
        for size in (most, 6)
    ]
    assert (drawn[0] == drawn[1]).all()
    assert np.unique(drawn[0][:, 0, 0]).size == 9


def test_draw_has_the_mean_and_covariance_of_each_node():
    rng = np.random.default_rng(17)
    root = rng.normal(size=(2, 6, 6)) * SIGMAS[:, None]
    covariance, mean = root @ root.transpose(0, 2, 1), 5.0 * rng.normal(size=(2, 6)) * SIGMAS
    sample = np.concatenate([batch.copy() for batch in draw(rng, mean, covariance, 5000)])
    white = [whitened(sample[:, node] - mean[node], covariance[node]) for node in range(2)]
    assert_unit_normal(np.hstack(white))
    assert min(ks_1samp(column, norm.cdf).pvalue for column in np.hstack(white).T) > 1e-3


def test_draw_from_no_error_is_the_mean():
    mean = np.arange(12.0).reshape(2, 6)
    batch = next(draw(np.random.default_rng(1), mean, np.zeros((1, 6, 6)), 4))
    assert (batch == mean).all()
