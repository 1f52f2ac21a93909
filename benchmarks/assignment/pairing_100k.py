"""Pair nodes and slots of invented formations and report seconds, memory and gap, beside SciPy's dense solver.

    python benchmarks/assignment/pairing_100k.py 10000 ball far-disk --dense
    python benchmarks/assignment/pairing_100k.py 100000 ball scaled clusters far-disk --worst

Images are those of a 30-day transfer at Sun-Earth L2 in the linear circular model, balls of 2000 km radius.
Seconds are of this process on one core; compilation is kept apart by a small warm-up.
"""

import argparse
import resource
import time

import numpy as np
from scipy.linalg import expm
from scipy.optimize import linear_sum_assignment

from farhold.planning.assignment.proof import certify_tree
from farhold.planning.assignment.solver.bottleneck import solve_bottleneck
from farhold.planning.assignment.solver.multiscale import solve_sum
from farhold.planning.assignment.solver.problem import Problem, make_problem

RADIUS_M = 2.0e6
DAYS = 30.0
TIME_UNIT_S = 58.13 * 86400.0
C2 = 3.9405  # curvature of the potential at Sun-Earth L2, Richardson 1980, Celest. Mech. 22, 241
KINDS = ("ball", "scaled", "clusters", "shell", "spiral", "far-disk", "far-ball")


def ball(rng, n):
    """Return n places (n, 3) [m], even in a ball."""
    away = rng.normal(size=(n, 3))
    return away * (RADIUS_M * rng.random(n) ** (1 / 3) / np.linalg.norm(away, axis=1))[:, None]


def slots_of(kind, rng, n, nodes):
    """Return the slots (n, 3) [m] of a kind."""
    turn, flat = 2 * np.pi * rng.random(n), 0.02 * RADIUS_M
    if kind == "scaled":
        return 1.5 * nodes[rng.permutation(n)]
    if kind == "clusters":
        middles = 1.3 * ball(rng, max(1, n // 100))
        return middles[np.arange(n) % len(middles)] + flat * rng.normal(size=(n, 3))
    if kind == "shell":
        places = ball(rng, n)
        return RADIUS_M * places / np.linalg.norm(places, axis=1)[:, None]
    if kind == "spiral":
        out = turn / (2 * np.pi) * RADIUS_M
        return np.c_[out * np.cos(3 * turn), out * np.sin(3 * turn), 0 * out] + flat * rng.normal(size=(n, 3))
    if kind == "far-disk":
        out = RADIUS_M * np.sqrt(rng.random(n))
        place = np.c_[out * np.cos(turn), out * np.sin(turn), flat * rng.normal(size=n)]
        return place + RADIUS_M * np.array([3.0, 1.0, 0.0])
    if kind == "far-ball":
        return ball(rng, n) + RADIUS_M * np.array([3.0, 1.0, 0.0])
    return 1.3 * ball(rng, n)


def images(kind, n, seed=0):
    """Return u, w, a, b (n, 3) [m/s] of a kind."""
    rng = np.random.default_rng(seed)
    nodes = ball(rng, n)
    slots = slots_of(kind, rng, n, nodes)
    rates = np.zeros((6, 6))
    rates[:3, 3:] = np.eye(3)
    rates[3:, :3] = np.diag([1 + 2 * C2, 1 - C2, -C2])
    rates[3, 4], rates[4, 3] = 2.0, -2.0
    phi = expm(rates * DAYS * 86400.0 / TIME_UNIT_S)
    p = np.linalg.inv(phi[:3, 3:] * TIME_UNIT_S)
    q = phi[3:, 3:] @ p
    u = nodes @ (p @ phi[:3, :3]).T + 1e-3 * rng.normal(size=(n, 3))
    w = nodes @ (q @ phi[:3, :3] - phi[3:, :3] / TIME_UNIT_S).T
    return u, w, slots @ p.T, slots @ q.T


def report(kind: str, problem: Problem, dense: bool, worst: bool) -> None:
    """Print one line for each thing measured."""
    begun = time.process_time()
    solution = solve_sum(problem)
    took = time.process_time() - begun
    begun = time.process_time()
    proof = certify_tree(problem, solution.column, solution.column_price)
    proved = time.process_time() - begun
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20
    n = len(problem.node)
    print(
        f"{kind:9s} {n:7d}  sum {proof.value:.9g} m/s  {took:.1f} s  certificate {proved:.1f} s  "
        f"gap {(proof.value - proof.bound) / proof.value:.1e}  peak {peak:.2f} GiB  "
        f"bids {solution.stats['bids']:.1f}  phases {solution.stats['phases']:.0f}",
        flush=True,
    )
    if worst:
        begun = time.process_time()
        found = solve_bottleneck(problem)
        print(f"  least worst {found.worst:.9g} m/s  {time.process_time() - begun:.1f} s", flush=True)
    if dense:
        matrix = problem.prices(np.arange(n))
        begun = time.process_time()
        value = matrix[linear_sum_assignment(matrix)].sum()
        other = time.process_time() - begun
        apart = proof.value / value - 1
        print(f"  SciPy dense {other:.1f} s ({other / took:.1f} times)  differs {apart:.1e}", flush=True)


def main() -> None:
    """Run what the command line asks for."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("n", type=int)
    parser.add_argument("kinds", nargs="+", choices=KINDS)
    parser.add_argument("--dense", action="store_true", help="also SciPy's dense solver: n^2 numbers of memory")
    parser.add_argument("--worst", action="store_true", help="also the least worst price")
    given = parser.parse_args()
    warm = make_problem(*images("ball", 100))
    certify_tree(warm, (solution := solve_sum(warm)).column, solution.column_price)
    solve_bottleneck(warm)
    for kind in given.kinds:
        report(kind, make_problem(*images(kind, given.n)), given.dense, given.worst)


if __name__ == "__main__":
    main()
