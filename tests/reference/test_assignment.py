"""Pairing against instances whose optimum is known (check values A2, A3, A5)."""

import numpy as np
import pytest

from farhold.planning.assignment.proof import certify_sum, certify_worst
from farhold.planning.assignment.solver.dense import bottleneck, least_sum


def solve(cost):
    return certify_sum(cost, least_sum(cost))


@pytest.mark.parametrize(("n", "optimum"), [(5, 35), (10, 220), (50, 22100), (200, 1353400), (1000, 167167000)])
def test_machol_wien_instance_has_the_published_optimum(n, optimum):
    # A2: Machol and Wien 1976, Operations Research 24, 190 (from memory): c_ij = i j has n(n+1)(n+2)/6, a
    # hard case for shortest augmenting paths; all sums are whole numbers below 2^53, so exact
    rank = np.arange(1.0, n + 1.0)
    proof = solve(np.outer(rank, rank))
    assert proof.value == optimum == n * (n + 1) * (n + 2) // 6
    assert proof.bound == pytest.approx(optimum, rel=1e-12)


def test_exponential_costs_have_the_expected_optimum():
    # A3: Parisi's formula sum 1/k2 (Linusson and Wastlund 2004; Nair, Prabhakar and Sharma 2005); the
    # standard deviation of one optimum is sqrt((4 zeta(2) - 4 zeta(3)) / n) = 0.133 at n = 100 (Wastlund
    # 2010), of the mean of 100 a tenth of that, and four of those are allowed
    rng = np.random.default_rng(20350320)
    n, trials = 100, 100
    optima = [solve(rng.exponential(size=(n, n))).value for _ in range(trials)]
    expected = (1.0 / np.arange(1.0, n + 1.0) ** 2).sum()
    assert expected == pytest.approx(1.634984, abs=5e-7)
    assert np.mean(optima) == pytest.approx(expected, abs=4.0 * 0.0133)


@pytest.mark.parametrize("n", [2, 7, 60, 400])
def test_points_on_a_line_are_paired_in_order(n):
    # A5: squared distance on a line is least when the ranks agree (rearrangement inequality)
    rng = np.random.default_rng(n)
    here, there = rng.normal(size=n), rng.normal(size=n)
    column = least_sum((here[:, None] - there) ** 2)
    assert (np.argsort(np.argsort(here)) == np.argsort(np.argsort(there))[column]).all()


@pytest.mark.parametrize("n", [2, 7, 60, 400])
def test_worst_way_on_a_line_is_least_in_order(n):
    # A5 for the largest distance: the ordered pairing is a bottleneck optimum too
    rng = np.random.default_rng(n)
    here, there = rng.normal(size=n), rng.normal(size=n)
    cost = abs(here[:, None] - there)
    worst = abs(np.sort(here) - np.sort(there)).max()
    assert bottleneck(cost) == pytest.approx(worst, rel=1e-14)
    column = np.argsort(there)[np.argsort(np.argsort(here))]
    proof = certify_worst(cost, column, certify_sum(cost, column))
    assert proof.value == pytest.approx(worst, rel=1e-14)
    assert proof.bound == proof.value


@pytest.mark.parametrize("seed", range(5))
def test_bound_is_certified_to_rounding_and_never_above_the_optimum(seed):
    rng = np.random.default_rng(seed)
    proof = solve(rng.uniform(0.0, 1.0, size=(120, 120)))
    assert proof.bound <= proof.value
    assert proof.value - proof.bound <= 1e-12 * proof.value


def test_bound_shows_the_gap_of_a_pairing_that_is_not_optimal():
    rank = np.arange(1.0, 11.0)
    cost = np.outer(rank, rank)
    proof = certify_sum(cost, np.arange(10))
    assert proof.value == 385.0
    assert proof.bound <= 220.0
