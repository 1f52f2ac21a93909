"""Compiled control: the filter against dense matrices and chi-square, burns against the published moments."""

import numpy as np
import pytest
from scipy import stats

from farhold.kernels.control.filter import grow, measure, replace
from farhold.kernels.control.holding import advance, burn, decide_box, decide_linear

DAY = 86400.0
ROWS = [(0, 0), (0, 1), (1, 1), (0, 2), (1, 2), (2, 2)]


def packed(matrix):
    """Rows (6,) of one axis from its covariance (3, 3)."""
    return np.array([matrix[i, j] for i, j in ROWS])


def full(column):
    matrix = np.zeros((3, 3))
    for value, (i, j) in zip(column, ROWS, strict=True):
        matrix[i, j] = matrix[j, i] = value
    return matrix


def moving(dt):
    """Map of place, rate and constant acceleration over dt."""
    return np.array([[1.0, dt, 0.5 * dt * dt], [0.0, 1.0, dt], [0.0, 0.0, 1.0]])


def some_covariance(seed):
    root = np.random.default_rng(seed).normal(size=(3, 3))
    scale = np.array([1.0, 1e-3, 1e-9])
    return (root @ root.T + np.eye(3)) * np.outer(scale, scale)


@pytest.mark.parametrize("seed", range(5))
def test_covariance_moves_as_the_matrices_say(seed):
    start, dt, q = some_covariance(seed), 0.7 * DAY, 1e-26
    C = np.repeat(packed(start)[:, None], 3, axis=1).T.reshape(18, 1).copy()
    grow(C, dt, q)
    F = moving(dt)
    expected = F @ start @ F.T
    expected[2, 2] += q * dt
    got = full(C[6:12, 0])
    assert got / np.sqrt(np.outer(np.diag(expected), np.diag(expected))) == pytest.approx(
        expected / np.sqrt(np.outer(np.diag(expected), np.diag(expected))), rel=1e-10
    )


@pytest.mark.parametrize("seed", range(5))
def test_fix_conditions_as_the_matrices_say(seed):
    # Kalman's update of place and rate at once, in the numbers of one axis
    rng = np.random.default_rng(100 + seed)
    start, r, v = some_covariance(seed), 2.0, 5e-4
    prior = np.array([3.0, 2e-3, 4e-9])
    truth, noise = prior + rng.normal(size=3) * [1.0, 1e-3, 1e-9], rng.normal(size=2) * [r, v]
    H = np.eye(3)[:2]
    S = H @ start @ H.T + np.diag([r * r, v * v])
    K = start @ H.T @ np.linalg.inv(S)
    after = prior + K @ (truth[:2] + noise - prior[:2])
    shrunk = start - K @ H @ start
    C = np.tile(packed(start), 3)[:, None].copy()
    X, E = np.zeros((6, 1)), np.zeros((6, 1))
    b, errors = np.zeros((3, 1)), np.zeros((6, 1))
    X[[2, 5], 0], E[[2, 5], 0], b[2, 0], errors[[2, 5], 0] = truth[:2], prior[:2], prior[2], noise
    measure(X, E, b, C, np.array([True]), errors, r * r, v * v)
    assert [E[2, 0], E[5, 0], b[2, 0]] == pytest.approx(after, rel=1e-11)
    scale = np.sqrt(np.outer(np.diag(start), np.diag(start)))
    assert full(C[12:, 0]) / scale == pytest.approx(shrunk / scale, rel=1e-9, abs=1e-12)


def test_lane_that_is_not_seen_stays_as_it_is():
    rng = np.random.default_rng(3)
    X, E, b, noise = (rng.normal(size=(k, 2)) for k in (6, 6, 3, 6))
    C = np.repeat(np.tile(packed(some_covariance(1)), 3)[:, None], 2, axis=1).copy()
    before = E[:, 0].copy(), b[:, 0].copy(), C[:, 0].copy(), E[:, 1].copy()
    measure(X, E, b, C, np.array([False, True]), noise, 1.0, 1e-6)
    assert [(E[:, 0] == before[0]).all(), (b[:, 0] == before[1]).all(), (C[:, 0] == before[2]).all()] == [True] * 3
    assert (E[:, 1] != before[3]).all()


def test_fix_without_a_filter_is_the_estimate():
    X, noise, E = np.arange(12.0).reshape(6, 2), np.full((6, 2), 0.5), np.zeros((6, 2))
    replace(X, E, np.array([True, False]), noise)
    assert E[:, 0].tolist() == (X[:, 0] + 0.5).tolist()
    assert not E[:, 1].any()


def test_perfect_fix_of_a_perfect_estimate_changes_nothing():
    X = E = np.zeros((6, 1))
    b, C = np.zeros((3, 1)), np.zeros((18, 1))
    measure(X, E, b, C, np.array([True]), np.zeros((6, 1)), 0.0, 0.0)
    assert not C.any()
    assert np.isfinite(E).all()


def filtered(width, fixes, seed, r=1.0, v=1e-3, a=1e-9):
    """Filter `width` lanes that drift under an unknown constant pull; errors (9, w) and covariances (18, w)."""
    rng = np.random.default_rng(seed)
    X, E, b = np.zeros((6, width)), np.zeros((6, width)), np.zeros((3, width))
    pull = a * rng.standard_normal((3, width))
    E[:3], E[3:] = r * rng.standard_normal((3, width)), v * rng.standard_normal((3, width))
    C = np.tile(np.array([r * r, 0.0, v * v, 0.0, 0.0, a * a]), 3)[:, None].repeat(width, axis=1).copy()
    for _ in range(fixes):
        noise = rng.standard_normal((6, width))
        noise[:3] *= r
        noise[3:] *= v
        measure(X, E, b, C, np.ones(width, dtype=bool), noise, r * r, v * v)
        for Y, push in ((X, pull), (E, b)):
            Y[:3] += DAY * Y[3:] + 0.5 * DAY**2 * push
            Y[3:] += DAY * push
        grow(C, DAY, 0.0)
    return np.vstack([E - X, b - pull]), C


@pytest.mark.parametrize("fixes", [1, 5, 30])
def test_squared_errors_over_their_covariance_are_chi_square(fixes):
    errors, C = filtered(2000, fixes, seed=fixes)
    axes = [errors[[c, c + 3, c + 6]] for c in range(3)]
    inverse = [np.linalg.inv(full(C[6 * c : 6 * c + 6, 0])) for c in range(3)]
    size = sum(np.einsum("iw,ij,jw->w", e, m, e) for e, m in zip(axes, inverse, strict=True))
    assert stats.kstest(size, stats.chi2(9).cdf).pvalue > 1e-3
    # the mean of 2000 draws of chi-square 9 has a deviation of 0.095
    assert size.mean() == pytest.approx(9.0, abs=4.0 * np.sqrt(18.0 / 2000))


def test_many_fixes_know_the_rate_much_better_than_one():
    # a line through k daily fixes of 1 m has a rate known to r sqrt(12 / k^3) / day, far below 1 mm/s
    fixes = 60
    errors, _ = filtered(500, fixes, seed=4, a=1e-14)
    expected = np.sqrt(12.0 / fixes**3) / DAY
    assert errors[3:6].std() == pytest.approx(expected, rel=0.15)


def burnt(dv, *, least=0.0, ready=True, s1=0.0, s2=0.0, s3=0.0, width=1, seed=0, counted=True):
    wanted = np.repeat(np.asarray(dv, dtype=float)[:, None], width, axis=1)
    X, E, C = np.zeros((6, width)), np.zeros((6, width)), np.zeros((18, width))
    spent, counts = np.full(width, np.nan), np.zeros(width, dtype=np.int64)
    g = np.random.default_rng(seed).standard_normal((4, width))
    burn(wanted, np.full(width, least), np.full(width, ready), g, s1, s2, s3, X, E, C, spent, counts, counted)
    return X[3:], E[3:], C, spent, counts


def test_burn_without_errors_is_made_as_asked():
    made, believed, C, spent, counts = burnt([0.3, -0.4, 1.2])
    assert made[:, 0] == pytest.approx([0.3, -0.4, 1.2], rel=1e-15)
    assert believed[:, 0] == pytest.approx([0.3, -0.4, 1.2], rel=1e-15)
    assert (spent[0], counts[0], C.any()) == (pytest.approx(1.3), 1, False)


@pytest.mark.parametrize(
    ("s1", "s3"),
    # G2, Gates 1963: the root mean square error is V sqrt(s1^2 + 2 s3^2)
    [(0.01, 0.005), (0.01, 0.0), (0.0, 0.02)],
)
def test_errors_of_a_burn_have_the_published_size(s1, s3):
    asked = np.array([0.02, -0.05, 0.03])
    made, *_ = burnt(asked, s1=s1, s3=s3, width=20_000, seed=5)
    size = np.linalg.norm(asked)
    error = np.sqrt(np.mean(np.sum((made - asked[:, None]) ** 2, axis=0)))
    assert error == pytest.approx(size * np.sqrt(s1**2 + 2.0 * s3**2), rel=0.02)


def test_errors_of_a_burn_lie_along_and_across_as_asked():
    asked = np.array([0.0, 0.0, 0.1])
    made, _, C, _, _ = burnt(asked, s1=0.01, s2=2e-3, s3=0.05, width=20_000, seed=6)
    # G1: along, the shares and the fixed part add in squares; across, each axis has V s3
    along, across = np.hypot(0.01 * 0.1, 2e-3), 0.05 * 0.1
    assert (made - asked[:, None]).std(axis=1) == pytest.approx([across, across, along], rel=0.02)
    assert np.corrcoef(made) == pytest.approx(np.eye(3), abs=0.03)
    # and the filter is told so
    assert C[[2, 8, 14], 0] == pytest.approx([across**2, across**2, along**2])


def test_estimate_moves_by_the_burn_as_asked_and_truth_by_the_burn_as_made():
    made, believed, _, spent, _ = burnt([0.1, 0.0, 0.0], s1=0.1, s3=0.1, seed=8)
    assert believed[:, 0].tolist() == [0.1, 0.0, 0.0]
    assert not np.allclose(made, believed)
    assert spent[0] == pytest.approx(np.linalg.norm(made[:, 0]), rel=1e-14)


@pytest.mark.parametrize(
    "withheld", [{"least": 1.1e-3}, {"ready": False}], ids=["below the impulse bit", "missed"]
)
def test_burn_that_is_not_made_changes_nothing(withheld):
    made, believed, C, spent, counts = burnt([1e-3, 0.0, 0.0], s1=0.1, s2=1e-3, **withheld)
    assert not made.any()
    assert not believed.any()
    assert not C.any()
    assert (spent[0], counts[0]) == (0.0, 0)


def test_burn_outside_the_steady_part_is_paid_but_not_counted():
    *_, spent, counts = burnt([1e-3, 0.0, 0.0], counted=False)
    assert (spent[0], counts[0]) == (1e-3, 0)


def lanes(seed, width=7):
    rng = np.random.default_rng(seed)
    return {name: rng.normal(size=(k, width)) for name, k in zip("EknbS", (6, 3, 3, 3, 3), strict=True)}


def test_linear_decision_is_its_matrices():
    rng, some = np.random.default_rng(2), lanes(1)
    Kx, Ka, Ks = rng.normal(size=(3, 6)), rng.normal(size=(3, 3)), rng.normal(size=(3, 3))
    dv = np.empty((3, 7))
    decide_linear(some["E"], some["k"], some["b"], some["S"], Kx, Ka, Ks, dv)
    assert dv == pytest.approx(Kx @ some["E"] + Ka @ (some["k"] + some["b"]) + Ks @ some["S"], rel=1e-12)


def test_step_is_its_matrices_for_truth_and_estimate():
    rng, some = np.random.default_rng(4), lanes(3)
    F, G, H, T = (rng.normal(size=shape) for shape in ((6, 6), (6, 3), (6, 3), (3, 3)))
    X, E, S = rng.normal(size=(6, 7)), some["E"].copy(), some["S"].copy()
    known, hidden, b = some["k"], some["n"], some["b"]
    wanted = F @ X + G @ (known + hidden) + H @ S
    guessed = F @ E + G @ (known + b) + H @ S
    turned = T @ S
    out, worst, square = np.zeros(7, dtype=np.int64), np.zeros(7), np.ones(7)
    far = np.abs(wanted[:3]).max(axis=0)
    box = float(np.median(far))
    advance(X, E, known, hidden, b, S, F, G, H, T, box, out, worst, square, np.zeros((6, 7)))
    assert pytest.approx(wanted, rel=1e-12) == X
    assert pytest.approx(guessed, rel=1e-12) == E
    assert pytest.approx(turned, rel=1e-12) == S
    assert worst == pytest.approx(far, rel=1e-12)
    assert square == pytest.approx(1.0 + (wanted[:3] ** 2).sum(axis=0), rel=1e-12)
    # the node in the middle sits on the edge of its box to rounding
    assert out.sum() in (3, 4)


def boxed(estimate, box=100.0):
    """Decide for one lane that moves freely, one step of 1 s to the decision and horizons of 1, 2 and 4 s."""
    spans = (1.0, 2.0, 4.0)
    times = sorted({span * k / 4 for span in spans for k in range(1, 5)})
    F = np.array([np.hstack([np.eye(3), t * np.eye(3)]) for t in times])
    G, H = np.array([0.5 * t * t * np.eye(3) for t in times]), np.zeros((len(times), 3, 3))
    Kx = np.array([np.hstack([-np.eye(3) / t, -np.eye(3)]) for t in spans])
    Ka, Ks = np.array([-0.5 * t * np.eye(3) for t in spans]), np.zeros((3, 3, 3))
    look = np.array([[times.index(span * k / 4) for k in range(1, 5)] for span in spans])
    look[0, 0] = sum(t <= 1.0 for t in times)
    E, dv = np.array(estimate, dtype=float)[:, None], np.full((3, 1), np.nan)
    none = np.zeros((3, 1))
    decide_box(E, none, none, none, box, 0.95, F, G, H, Kx, Ka, Ks, look, dv)
    return dv[:, 0]


def test_box_decides_nothing_while_the_path_stays_inside():
    assert boxed([90.0, 0, 0, 4.0, 0, 0]).tolist() == [0.0, 0.0, 0.0]


def test_box_aims_for_its_middle_at_the_longest_horizon_when_the_path_leaves():
    # at 90 m going out at 6 m/s: 96 m after a second, beyond 95; back in the middle after 4 s at -22.5 m/s
    assert boxed([90.0, 0, 0, 6.0, 0, 0]) == pytest.approx([-90.0 / 4.0 - 6.0, 0.0, 0.0])


def test_box_looks_at_every_axis():
    assert boxed([0, 0, -90.0, 0, 0, -6.0]) == pytest.approx([0.0, 0.0, 90.0 / 4.0 + 6.0])
