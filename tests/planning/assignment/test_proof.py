"""The proof of a pairing: true for the best, and not to be had by a wrong pairing or wrong prices."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import linprog

from farhold.planning.assignment.proof import certify_sum, certify_worst, column_prices, lower_bound
from farhold.planning.assignment.solver.dense import bottleneck, fits_under, least_sum

SEEDS = st.integers(0, 100_000)


def matrix(seed, n):
    return np.random.default_rng(seed).uniform(0.1, 2.0, size=(n, n))


def value_of(cost, column):
    return cost[np.arange(len(cost)), column].sum()


@pytest.mark.parametrize("n", [5, 10, 50, 200])
def test_least_sum_of_the_hard_instance_is_the_published_one(n):
    # c_ij = i j: Machol and Wien 1976, Operations Research 24, 190: n (n + 1) (n + 2) / 6
    k = np.arange(1.0, n + 1.0)
    cost = np.outer(k, k)
    certificate = certify_sum(cost, least_sum(cost))
    assert certificate.value == n * (n + 1) * (n + 2) / 6
    assert certificate.bound == pytest.approx(certificate.value, rel=1e-12)


@given(seed=SEEDS, n=st.integers(1, 30))
def test_certificate_of_the_best_pairing_has_no_gap(seed, n):
    cost = matrix(seed, n)
    certificate = certify_sum(cost, least_sum(cost))
    assert certificate.bound == pytest.approx(certificate.value, rel=1e-12)
    assert certificate.bound <= certificate.value


@pytest.mark.parametrize("seed", range(3))
def test_certified_bound_is_the_dual_of_a_linear_programme(seed):
    # the relaxation over doubly stochastic matrices has the same optimum (Birkhoff)
    n = 8
    cost = matrix(seed, n)
    sums = np.vstack([np.kron(np.eye(n), np.ones(n)), np.kron(np.ones(n), np.eye(n))])
    programme = linprog(cost.ravel(), A_eq=sums, b_eq=np.ones(2 * n), method="highs")
    assert certify_sum(cost, least_sum(cost)).bound == pytest.approx(programme.fun, rel=1e-9)


@given(seed=SEEDS, n=st.integers(2, 25), by=st.floats(0.05, 5.0))
def test_falsified_price_only_lowers_the_bound(seed, n, by):
    cost = matrix(seed, n)
    column = least_sum(cost)
    price = column_prices(cost, column)
    price[seed % n] += by + 2.0
    bound, _ = lower_bound(cost, price)
    assert bound < value_of(cost, column) - 1e-9


@given(seed=SEEDS, n=st.integers(1, 25))
def test_no_prices_at_all_bound_more_than_the_best_pairing(seed, n):
    cost = matrix(seed, n)
    wild = np.random.default_rng(seed + 1).normal(size=n) * 3.0
    assert lower_bound(cost, wild)[0] <= value_of(cost, least_sum(cost)) + 1e-12


@given(seed=SEEDS, n=st.integers(2, 20))
def test_swapped_pairing_shows_a_gap(seed, n):
    cost = matrix(seed, n)
    column = least_sum(cost)
    a, b = np.random.default_rng(seed).choice(n, 2, replace=False)
    swapped = column.copy()
    swapped[[a, b]] = swapped[[b, a]]
    excess = value_of(cost, swapped) - value_of(cost, column)
    certificate = certify_sum(cost, swapped)
    assert certificate.value - certificate.bound >= excess - 1e-12
    assert excess > 0.0


@given(seed=SEEDS, n=st.integers(2, 12))
def test_forbidden_entries_do_not_break_the_proof(seed, n):
    cost = matrix(seed, n)
    cost[np.random.default_rng(seed).random((n, n)) < 0.3] = np.inf
    np.fill_diagonal(cost, 3.0)
    certificate = certify_sum(cost, least_sum(cost))
    assert np.isfinite(certificate.column_price).all()
    assert certificate.bound == pytest.approx(certificate.value, rel=1e-12)


@given(seed=SEEDS, n=st.integers(1, 25))
def test_bottleneck_is_the_least_cap_that_fits(seed, n):
    cost = matrix(seed, n)
    cap = bottleneck(cost)
    assert fits_under(cost, cap)
    assert not fits_under(cost, np.nextafter(cap, 0.0))


@given(seed=SEEDS, n=st.integers(2, 15))
def test_worst_of_a_pairing_that_is_not_the_best_is_not_certified(seed, n):
    cost = matrix(seed, n)
    column = np.random.default_rng(seed).permutation(n)
    worst = cost[np.arange(n), column].max()
    certificate = certify_worst(cost, column, certify_sum(cost, column))
    assert certificate.value == worst
    assert certificate.bound <= bottleneck(cost)
    assert (certificate.bound == certificate.value) == (worst == bottleneck(cost))
