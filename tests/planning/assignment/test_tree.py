"""Pairing without a matrix, against the dense solver, all permutations, closed forms, and its own proof."""

from itertools import permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linear_sum_assignment

from farhold.errors import DomainError, NoSolutionError
from farhold.planning.assignment.proof import certify_tree, check_rows
from farhold.planning.assignment.solver import dense
from farhold.planning.assignment.solver.bottleneck import solve_bottleneck
from farhold.planning.assignment.solver.multiscale import solve_sum
from farhold.planning.assignment.solver.problem import make_problem


def ball(rng, n, radius):
    away = rng.normal(size=(n, 3))
    away *= (radius * rng.random(n) ** (1 / 3) / np.linalg.norm(away, axis=1))[:, None]
    return away


def slots_of(kind, rng, m, nodes):
    turn = rng.random(m)
    if kind == "ball":
        return ball(rng, m, 1.3)
    if kind == "shell":
        places = ball(rng, m, 1.0)
        return places / np.linalg.norm(places, axis=1)[:, None]
    if kind == "disk":
        radius, angle = np.sqrt(rng.random(m)), 2 * np.pi * turn
        return np.c_[radius * np.cos(angle) + 3.0, radius * np.sin(angle) + 1.0, 0.02 * rng.normal(size=m)]
    if kind == "spiral":
        return np.c_[turn * np.cos(19 * turn), turn * np.sin(19 * turn), 0.02 * rng.normal(size=m)]
    if kind == "clusters":
        return ball(rng, 5, 1.3)[np.arange(m) % 5] + 0.02 * rng.normal(size=(m, 3))
    if kind == "lattice":
        return np.stack(np.unravel_index(np.arange(m) % 216, (6, 6, 6)), axis=1) / 3.0
    return 1.5 * nodes[rng.permutation(m)]


def images(kind, n, m=None, seed=0):
    """Images u, w, a, b of a random matrix with neither P nor Q a rotation."""
    rng = np.random.default_rng(seed)
    nodes = slots_of("lattice", rng, n, None) if kind == "lattice" else ball(rng, n, 1.0)
    slots = slots_of(kind, rng, m or n, nodes)
    p, q, r, s = np.eye(3) + 0.3 * rng.normal(size=(4, 3, 3))
    noise = 0.0 if kind == "lattice" else 1e-3
    return nodes @ (p @ r).T + noise * rng.normal(size=(n, 3)), nodes @ (q @ s).T, slots @ p.T, slots @ q.T


def square_of(problem):
    """The whole matrix with rows that leave slots empty and columns that leave nodes aside."""
    n, m = len(problem.node), len(problem.slot)
    square = np.zeros((max(n, m), max(n, m)))
    square[:n, :m] = problem.prices(np.arange(n))
    square[n:, :m] = problem.leave_slot
    square[:n, m:] = problem.leave_node[:, None]
    return square


def least_by_dense(problem):
    square = square_of(problem)
    return square[linear_sum_assignment(square)].sum()


def proven(problem, solution):
    """The certificate, after a look at all rows without the tree."""
    proof = certify_tree(problem, solution.column, solution.column_price, solution.aside_price)
    exceeds = check_rows(problem, proof, np.arange(len(problem.node)), solution.aside_price)
    assert exceeds <= 1e-12 * abs(proof.row_price).max(initial=1.0)
    return proof


@pytest.mark.parametrize("kind", ["ball", "disk", "shell", "scaled", "clusters", "spiral", "lattice"])
def test_least_sum_is_that_of_the_dense_solver_and_proven(kind):
    problem = make_problem(*images(kind, 400))
    solution = solve_sum(problem)
    proof = proven(problem, solution)
    assert solution.finished
    assert proof.value == pytest.approx(least_by_dense(problem), rel=1e-12)
    assert proof.value - proof.bound <= 1e-11 * proof.value


def test_least_sum_from_coarse_prices_is_that_of_the_dense_solver():
    problem = make_problem(*images("ball", 1800))
    proof = proven(problem, solve_sum(problem))
    assert proof.value == pytest.approx(least_by_dense(problem), rel=1e-12)


def random_prices(rng, size):
    return np.where(rng.random(size) < 0.5, np.inf, rng.choice([0.0, 0.1, 0.4], size))


@pytest.mark.parametrize("kind", ["ball", "disk"])
@pytest.mark.parametrize(("n", "m"), [(300, 350), (350, 300), (1, 200), (200, 1)])
@pytest.mark.parametrize("priced", [False, True])
def test_unequal_numbers_give_the_dense_optimum(kind, n, m, priced):
    rng = np.random.default_rng(4)
    more = {}
    if priced and min(n, m) > 1:
        more = {"leave_slot": random_prices(rng, m), "leave_node": random_prices(rng, n)}
    problem = make_problem(*images(kind, n, m), **more)
    proof = proven(problem, solve_sum(problem))
    assert proof.value == pytest.approx(least_by_dense(problem), rel=1e-12)
    assert proof.value - proof.bound <= 1e-11 * abs(proof.value)


WEIGHTS = {
    "weighted": lambda rng, n: {"scale": rng.uniform(0.5, 1.5, n)},
    "nodes that fly for nothing": lambda rng, n: {"scale": rng.integers(0, 2, n).astype(float)},
    "propellant": lambda rng, n: {"scale": rng.uniform(5, 20, n), "rate": 1 / rng.uniform(600, 2000, n)},
    "most of the mass": lambda rng, n: {"scale": rng.uniform(5, 20, n), "rate": 1 / rng.uniform(1, 5, n)},
    "own prices": lambda rng, n: {
        "special": (np.arange(n), rng.permutation(n), rng.choice([0.0, 0.3, np.inf], n)),
    },
}


@pytest.mark.parametrize("weight", WEIGHTS)
@pytest.mark.parametrize("kind", ["ball", "disk"])
def test_bent_prices_give_the_dense_optimum(kind, weight):
    problem = make_problem(*images(kind, 300), **WEIGHTS[weight](np.random.default_rng(5), 300))
    proof = proven(problem, solve_sum(problem))
    assert proof.value == pytest.approx(least_by_dense(problem), rel=1e-12)
    assert proof.value - proof.bound <= 1e-11 * proof.value


@pytest.mark.parametrize("kind", ["ball", "disk", "clusters", "lattice"])
def test_least_worst_and_the_sum_under_it_are_those_of_the_dense_solver(kind):
    problem = make_problem(*images(kind, 300))
    worst = solve_bottleneck(problem)
    matrix = problem.prices(np.arange(300))
    assert worst.worst == pytest.approx(dense.bottleneck(matrix), rel=1e-13)
    assert worst.bound == worst.worst
    assert problem.paid(worst.column).max() == pytest.approx(worst.worst, rel=1e-13)
    cap = worst.worst * (1 + 1e-12)
    capped = make_problem(*images(kind, 300), cap=cap)
    proof = proven(capped, solve_sum(capped))
    matrix[matrix > cap] = 1e9
    assert proof.value == pytest.approx(matrix[linear_sum_assignment(matrix)].sum(), rel=1e-12)


def test_least_worst_is_the_same_from_the_pairing_of_least_sum():
    problem = make_problem(*images("disk", 300))
    assert solve_bottleneck(problem, start=solve_sum(problem).column).worst == solve_bottleneck(problem).worst


@settings(max_examples=40)
@given(seed=st.integers(0, 10_000), n=st.integers(1, 5), m=st.integers(1, 5), whole=st.booleans())
def test_small_problems_are_those_of_all_permutations(seed, n, m, whole):
    rng = np.random.default_rng(seed)
    u, w, a, b = rng.normal(size=(2, n, 3)).tolist() + rng.normal(size=(2, m, 3)).tolist()
    if whole:
        u, w, a, b = (np.round(x) for x in (u, w, a, b))
    problem = make_problem(u, w, a, b, leave_slot=rng.choice([0.0, 1.0], m), leave_node=rng.choice([0.0, 1.0], n))
    square = square_of(problem)
    rows = np.arange(len(square))
    least = min(square[rows, list(columns)].sum() for columns in permutations(rows))
    proof = proven(problem, solve_sum(problem))
    assert proof.value == pytest.approx(least, rel=1e-12, abs=1e-12)
    assert proof.bound == pytest.approx(least, rel=1e-12, abs=1e-12)
    if n <= m:
        worst = min(square[rows[:n], list(columns)[:n]].max() for columns in permutations(rows))
        assert solve_bottleneck(problem).worst == pytest.approx(worst, rel=1e-12, abs=1e-12)


def test_slots_on_a_line_are_filled_in_order():
    # on a line the sum of distances to the same number of points right of all nodes is fixed
    x = np.zeros((200, 3))
    x[:, 0] = np.random.default_rng(0).permutation(200)
    problem = make_problem(x, 0 * x, x + np.array([500.0, 0.0, 0.0]), 0 * x)
    assert proven(problem, solve_sum(problem)).value == pytest.approx(200 * 500.0, rel=1e-12)


@pytest.mark.parametrize("n", [1, 2, 100])
def test_coincident_nodes_and_slots_cost_nothing(n):
    zero = np.zeros((n, 3))
    problem = make_problem(zero, zero, zero, zero)
    solution = solve_sum(problem)
    assert sorted(solution.column) == list(range(n))
    assert problem.value(solution.column) == 0.0
    assert solve_bottleneck(problem).worst == 0.0


@pytest.mark.parametrize(("n", "m"), [(0, 0), (0, 3), (3, 0)])
def test_nobody_to_pair_is_an_empty_pairing(n, m):
    problem = make_problem(*np.zeros((2, n, 3)), *np.zeros((2, m, 3)))
    solution = solve_sum(problem)
    assert solution.column.tolist() == [-1] * n
    assert certify_tree(problem, solution.column, solution.column_price).value == 0.0


def test_pairing_is_the_same_twice():
    problem = make_problem(*images("lattice", 300))
    first, second = solve_sum(problem), solve_sum(problem)
    np.testing.assert_array_equal(first.column, second.column)
    np.testing.assert_array_equal(first.column_price, second.column_price)


def test_certificate_shows_a_gap_when_two_slots_are_swapped():
    problem = make_problem(*images("ball", 300))
    solution = solve_sum(problem)
    column = solution.column.copy()
    column[[0, 1]] = column[[1, 0]]
    proof = certify_tree(problem, column, solution.column_price)
    assert proof.value - proof.bound > 1e-6 * proof.value


@pytest.mark.parametrize("by", [0.05, -0.05])
def test_certificate_shows_a_gap_when_a_price_is_falsified(by):
    problem = make_problem(*images("ball", 300))
    solution = solve_sum(problem)
    prices = solution.column_price.copy()
    prices[7] += by
    proof = certify_tree(problem, solution.column, prices)
    assert proof.value - proof.bound > 1e-6 * proof.value


def test_check_of_rows_finds_a_row_price_that_is_too_high():
    problem = make_problem(*images("ball", 300))
    solution = solve_sum(problem)
    proof = certify_tree(problem, solution.column, solution.column_price)
    proof.row_price[3] += 0.01
    assert check_rows(problem, proof, np.arange(10)) == pytest.approx(0.01, rel=1e-9)


def test_certificate_gives_no_value_to_a_slot_given_twice():
    problem = make_problem(*images("ball", 50))
    solution = solve_sum(problem)
    solution.column[0] = solution.column[1]
    assert certify_tree(problem, solution.column, solution.column_price).value == np.inf


class Impatient:
    """A watch that stops the work at its k-th word."""

    def __init__(self, words):
        self.words = words

    def note(self, text):
        pass

    def stage(self, name, total=None):
        self.advance()

    def advance(self, steps=1):
        self.words -= 1
        if self.words < 0:
            raise KeyboardInterrupt


@pytest.mark.parametrize("words", [0, 1, 3, 5])
def test_interrupt_gives_a_whole_pairing_with_a_bound(words):
    problem = make_problem(*images("ball", 400))
    solution = solve_sum(problem, watch=Impatient(words))
    proof = proven(problem, solution)
    assert not solution.finished
    assert sorted(solution.column) == list(range(400))
    assert proof.bound <= least_by_dense(problem) * (1 + 1e-12)
    assert proof.value >= least_by_dense(problem) * (1 - 1e-12)


@pytest.mark.parametrize(("n", "m"), [(1700, 1700), (300, 400), (400, 300)])
def test_deadline_gives_a_whole_pairing_with_a_bound(n, m):
    problem = make_problem(*images("ball", n, m))
    solution = solve_sum(problem, deadline_s=0.0)
    proof = certify_tree(problem, solution.column, solution.column_price, solution.aside_price)
    assert not solution.finished
    assert np.isfinite(proof.value)
    assert proof.bound <= proof.value


def test_cap_below_the_least_worst_is_refused():
    problem = make_problem(*images("ball", 100))
    cap = solve_bottleneck(problem).worst * 0.999
    with pytest.raises(
        NoSolutionError, match=r"nodes find no slot within the cap and the forbidden pairs \(raise"
    ):
        solve_sum(make_problem(*images("ball", 100), cap=cap))


def test_node_that_may_go_nowhere_is_refused():
    nowhere = (np.zeros(20, dtype=int), np.arange(20), np.full(20, np.inf))
    problem = make_problem(*images("ball", 20), special=nowhere)
    with pytest.raises(NoSolutionError, match="pairing: 1 nodes find no slot"):
        solve_sum(problem)
    with pytest.raises(NoSolutionError, match="some nodes find no slot"):
        solve_bottleneck(problem)


def test_least_worst_refuses_more_nodes_than_slots():
    with pytest.raises(DomainError, match="3 nodes for 2 slots"):
        solve_bottleneck(make_problem(*np.zeros((2, 3, 3)), *np.zeros((2, 2, 3))))


@pytest.mark.parametrize(
    ("more", "text"),
    [
        ({"scale": np.ones(4)}, "scale: 4 entries"),
        ({"scale": -1.0}, "a negative entry"),
        ({"cap": np.nan}, "cap: not a number"),
        ({"rate": np.inf}, "rate: an infinite entry"),
    ],
)
def test_problem_refuses_what_it_cannot_hold(more, text):
    with pytest.raises(DomainError, match=text):
        make_problem(*np.zeros((4, 3, 3)), **more)
