"""The search of the tree and the bottleneck matching, against a look at all pairs."""

import numpy as np
import pytest
from scipy.sparse import csr_array
from scipy.sparse.csgraph import maximum_bipartite_matching

from farhold.kernels.pairing.bottleneck import dearest_least, match_under
from farhold.kernels.pairing.layout import LEAF, fit_planes, lift, settle
from farhold.kernels.pairing.tree import cheapest, price, row_bound
from farhold.planning.assignment.solver.problem import make_problem
from farhold.planning.assignment.solver.tree import grow

N, M = 90, 400


def build(seed=0, far=0.0, bend=0.0, **bent):
    """A problem with affine images (bent by `bend`), and how it is laid out."""
    rng = np.random.default_rng(seed)
    matrix = rng.normal(size=(3, 3))
    a = rng.normal(size=(M, 3))
    b = a @ matrix.T + 0.3 + bend * a**2
    u, w = rng.normal(size=(2, N, 3)) + far
    problem = make_problem(u, w, a, b, **{k: f(rng) if callable(f) else f for k, f in bent.items()})
    grown = grow(problem)
    # prices that slope, as they do in far transports, with some noise
    grown.slots.v[:] = (a @ rng.normal(size=3) + 0.1 * rng.normal(size=M))[grown.slot_order]
    lift(grown.slots)
    fit_planes(grown.slots, grown.moments)
    return problem, grown


KINDS = {
    "near": {},
    "far": {"far": 8.0},
    "images not affine": {"far": 3.0, "bend": 0.3},
    "weighted": {"far": 3.0, "scale": lambda rng: rng.uniform(0.0, 2.0, N)},
    "propellant": {"far": 3.0, "scale": 9.0, "rate": lambda rng: rng.uniform(0.01, 0.5, N)},
    "capped": {"cap": 2.0},
    "own prices": {
        "special": lambda rng: (
            np.repeat(np.arange(N), 3),
            np.concatenate([rng.choice(M, 3, replace=False) for _ in range(N)]),
            rng.choice([0.0, 0.5, np.inf], 3 * N),
        )
    },
}


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("most", [1, 2, 12])
def test_cheapest_slots_are_those_of_a_look_at_all(kind, most):
    problem, grown = build(**KINDS[kind])
    matrix = problem.prices(grown.node_order)[:, grown.slot_order] - grown.slots.v
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    found, worth = np.empty(most, np.int64), np.empty(most)
    got = np.full((N, most), np.inf)
    for i in range(N):
        m = cheapest(i, most, grown.rows, grown.slots, stack, stack_bound, found, worth)
        assert matrix[i, found[:m]] == pytest.approx(worth[:m], rel=1e-12, abs=1e-12)
        got[i, :m] = np.sort(worth[:m])
    np.testing.assert_allclose(got, np.sort(matrix, axis=1)[:, :most], rtol=1e-12, atol=1e-12)


def test_cheapest_looks_at_new_prices_once_they_are_settled():
    problem, grown = build(far=5.0)
    rng = np.random.default_rng(3)
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    found, worth = np.empty(2, np.int64), np.empty(2)
    for j in rng.integers(0, M, 300):
        grown.slots.v[j] -= rng.exponential()
        settle(j, grown.slots)
    matrix = problem.prices(grown.node_order)[:, grown.slot_order] - grown.slots.v
    for i in range(N):
        cheapest(i, 2, grown.rows, grown.slots, stack, stack_bound, found, worth)
        assert worth.min() == pytest.approx(matrix[i].min(), rel=1e-12)


def test_row_that_leaves_a_slot_empty_takes_the_one_whose_price_gains_most():
    leave = np.where(np.arange(M) % 3 == 0, np.inf, 0.2)
    problem, grown = build(leave_slot=leave)
    stack, stack_bound = np.empty(128, np.int64), np.empty(128 + LEAF)
    found, worth = np.empty(1, np.int64), np.empty(1)
    cheapest(N, 1, grown.rows, grown.slots, stack, stack_bound, found, worth)
    assert worth[0] == (problem.leave_slot[grown.slot_order] - grown.slots.v).min()


@pytest.mark.parametrize("kind", KINDS)
def test_price_is_that_of_the_problem(kind):
    problem, grown = build(**KINDS[kind])
    matrix = problem.prices(grown.node_order)[:, grown.slot_order]
    pairs = np.random.default_rng(1).integers(0, (N, M), (300, 2))
    got = [price(i, j, grown.rows, grown.slots) for i, j in pairs]
    np.testing.assert_allclose(got, matrix[pairs[:, 0], pairs[:, 1]], rtol=1e-13)


def test_bound_of_a_tree_node_is_never_above_a_price_below_it():
    problem, grown = build(far=2.0)
    matrix = problem.prices(grown.node_order)[:, grown.slot_order]
    slots = grown.slots
    for k in range(1, 2 * slots.leaves):
        low = np.array([row_bound(i, k, grown.rows, slots) for i in range(N)])
        assert (low <= matrix[:, slots.start[k] : slots.end[k]].min(axis=1) * (1 + 1e-14)).all()


@pytest.mark.parametrize("quantile", [0.002, 0.01, 0.05, 0.3])
@pytest.mark.parametrize("kind", ["near", "own prices", "far"])
def test_matching_under_a_limit_is_a_largest_one(kind, quantile):
    problem, grown = build(**KINDS[kind])
    matrix = problem.prices(grown.node_order)[:, grown.slot_order]
    limit = float(np.quantile(matrix, quantile))
    taken, holder = np.full(N, -1, np.int64), np.full(M, -1, np.int64)
    free, further, _ = match_under(limit, False, grown.rows, grown.slots, taken, holder)
    held = np.flatnonzero(taken >= 0)
    assert (matrix[held, taken[held]] <= limit).all()
    assert (holder[taken[held]] == held).all()
    most = (maximum_bipartite_matching(csr_array(matrix <= limit), perm_type="column") >= 0).sum()
    assert held.size == N - free == most
    if free:
        # no limit below the next one lets more nodes in
        below = csr_array(matrix < further)
        assert further > limit
        assert (maximum_bipartite_matching(below, perm_type="column") >= 0).sum() == most


def test_hasty_matching_stops_with_a_limit_that_is_too_low_for_all():
    problem, grown = build()
    matrix = problem.prices(grown.node_order)[:, grown.slot_order]
    limit = float(np.quantile(matrix, 0.002))
    taken, holder = np.full(N, -1, np.int64), np.full(M, -1, np.int64)
    free, further, _ = match_under(limit, True, grown.rows, grown.slots, taken, holder)
    assert free > 0
    assert (maximum_bipartite_matching(csr_array(matrix < further), perm_type="column") >= 0).sum() < N


def test_dearest_least_price_is_the_largest_of_the_rows():
    problem, grown = build()
    least = problem.prices(np.arange(N)).min(axis=1).max()
    assert dearest_least(grown.rows, grown.slots) == pytest.approx(least, rel=1e-13)
