"""Least sum over all pairs: prices from a coarse copy of the problem, auction, exact finish."""

from __future__ import annotations

import time
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import linear_sum_assignment
from scipy.spatial import cKDTree

from farhold.errors import Fault, NoSolutionError
from farhold.kernels.pairing.auction import auction, best_of_all, level_asides, level_empties
from farhold.kernels.pairing.augment import augment
from farhold.kernels.pairing.tree import paid
from farhold.planning.assignment.solver.problem import Problem
from farhold.planning.assignment.solver.tree import Grown, grow, halve
from farhold.watch import SILENT, Watch

__all__ = ["SumSolution", "solve_sum"]

_WIDTH = 12
_COARSE_FROM = 1500
_GROUP = 12
_NEIGHBOURS, _RIDGE = 8, 0.02
_STEP = 5.0
_FIRST_EPS, _COLD_EPS, _LAST_EPS, _COARSE_EPS = 0.01, 0.25, 1.5e-3, 3e-3
_MOST_BIDS_PER_ROW = 30
_LEAVE = 400
_CHUNK = 50_000
_TIGHT = 1e-13


@dataclass(frozen=True, slots=True, eq=False)
class SumSolution:
    """A pairing and the prices that bound it.

    Attributes
    ----------
    column : (n,) slot of each node, -1 for nodes left aside
    column_price : (m,) dual prices of the slots
    aside_price : dual price of standing aside (0 unless n > m)
    finished : whether the search ended by itself, the pairing then being the best
    stats : what the search took: bids, phases and lists per row, seconds of each part
    """

    column: NDArray[np.int64]
    column_price: NDArray[np.float64]
    aside_price: float
    finished: bool
    stats: dict[str, float] = field(default_factory=dict)


@dataclass(slots=True, eq=False)
class _Lists:
    """The cheapest slots of each row and the value beyond which all others lie."""

    count: NDArray[np.int64]
    beyond: NDArray[np.float64]
    slot: NDArray[np.int32]
    cost: NDArray[np.float64]

    @classmethod
    def empty(cls, n: int) -> _Lists:
        """Make lists for n rows that hold nothing yet."""
        return cls(
            np.zeros(n, np.int64), np.full(n, -np.inf), np.zeros(n * _WIDTH, np.int32), np.zeros(n * _WIDTH)
        )


def solve_sum(problem: Problem, *, watch: Watch = SILENT, deadline_s: float | None = None) -> SumSolution:
    """Find the pairing of least total price over all pairs.

    Parameters
    ----------
    problem : n nodes and m slots; with n < m slots stay empty, with n > m nodes stand aside, at their prices
    watch : may raise KeyboardInterrupt, which ends the search like the deadline
    deadline_s : seconds from now after which the best pairing so far is returned, unfinished; its prices
        still prove a bound

    Raises
    ------
    NoSolutionError
        No pairing respects caps and forbidden pairs.
    """
    n, m = len(problem.node), len(problem.slot)
    if n == 0 or m == 0:
        return SumSolution(np.full(n, -1, dtype=np.int64), np.zeros(m), 0.0, True)
    begun = time.perf_counter()
    search = _Search(problem, watch, np.inf if deadline_s is None else begun + deadline_s)
    try:
        search.start_prices()
        search.bid(_LAST_EPS)
        search.finish()
    except KeyboardInterrupt:
        search.finished = False
    if not search.finished:
        search.complete()
    search.stats["seconds"] = time.perf_counter() - begun
    return search.answer()


class _Search:
    """One search: prices and pairs in the order of the tree."""

    def __init__(self, problem: Problem, watch: Watch, until: float) -> None:
        self.problem, self.watch, self.until = problem, watch, until
        self.grown: Grown = grow(problem)
        n, m = len(problem.node), len(problem.slot)
        self.n, self.m, self.count = n, m, self.grown.count
        self.aside_v = np.zeros(max(0, n - m))
        self.taken = np.full(self.count, -1, dtype=np.int64)
        self.holder = np.full(self.count, -1, dtype=np.int64)
        self.lists = _Lists.empty(self.count)
        self.spread = _spread(problem)
        self.first_eps = _COLD_EPS
        self.finished = False
        self.stats: dict[str, float] = {"bids": 0.0, "phases": 0.0, "asked": 0.0}

    def start_prices(self) -> None:
        """Solve a coarse copy, groups of neighbours for single ones, and take over its prices."""
        if max(self.n, self.m) <= _COARSE_FROM:
            return
        begun = time.perf_counter()
        coarse = _coarse(self.problem)
        inner = _Search(coarse, SILENT, self.until)
        inner.start_prices()
        inner.bid(_COARSE_EPS)
        prices = inner.answer().column_price
        self.grown.slots.v[:] = _between(coarse.slot, prices, self.problem.slot[self.grown.slot_order])
        if inner.aside_v.size:
            self.aside_v[:] = inner.aside_v.mean()
        self.first_eps = _FIRST_EPS
        self.stats["coarse_s"] = time.perf_counter() - begun

    def bid(self, last_eps: float) -> None:
        """Run the auction with falling epsilon, down to `last_eps` of the spread of the prices."""
        begun = time.perf_counter()
        lists, grown = self.lists, self.grown
        only_one = 20.0 * self.spread
        eps = self.first_eps
        self.watch.stage("auction of the slots", None)
        while self.spread > 0.0:
            allowed = _MOST_BIDS_PER_ROW * self.count
            # who is left over costs long paths in the exact finish
            left, enough = self.count, self.count // _LEAVE if eps > last_eps else 0
            while left > enough and allowed > 0 and time.perf_counter() < self.until:
                bids, left = auction(
                    eps * self.spread, only_one, grown.rows, grown.slots, _WIDTH, lists.count, lists.beyond,
                    lists.slot, lists.cost, self.taken, self.holder, self.aside_v, max(64, self.count // 2),
                    grown.moments, min(_CHUNK, allowed), enough,
                )  # fmt: skip
                allowed -= bids
                self.stats["bids"] += bids / self.count
                self.watch.advance(0)
            if eps <= last_eps:
                break
            eps = max(eps / _STEP, last_eps)
        self.stats["auction_s"] = time.perf_counter() - begun

    def finish(self) -> None:
        """Make the prices feasible, keep the pairs tight on them, and pair the rest along shortest paths."""
        begun = time.perf_counter()
        lists, grown = self.lists, self.grown
        level_empties(grown.rows, grown.slots, self.taken)
        level_asides(self.aside_v)
        u, best = np.empty(self.count), np.empty(self.count, dtype=np.int64)
        best_of_all(
            grown.rows, grown.slots, _WIDTH, lists.count, lists.beyond, lists.slot, lists.cost, self.aside_v, u,
            best, grown.moments,
        )  # fmt: skip
        if np.isinf(u).any():
            raise _no_pairing(int(np.isinf(u).sum()))
        self._keep_tight(u, best)
        self.stats["free"] = float((self.taken < 0).mean())
        self.stats["ready_s"] = time.perf_counter() - begun
        place, room = np.arange(self.count) * _WIDTH, np.full(self.count, _WIDTH)
        left = int((self.taken < 0).sum())
        self.watch.stage("exact finish", left)
        while left and time.perf_counter() < self.until:
            before = left
            left, phases, asked, lists.slot, lists.cost = augment(
                grown.rows, grown.slots, place, lists.count, room, lists.beyond, lists.slot, lists.cost, u,
                self.taken, self.holder, self.aside_v, grown.moments, 0.5, 3, 20,
            )  # fmt: skip
            self.stats["phases"] += phases
            self.stats["asked"] += asked / self.count
            if left < 0:
                raise _no_pairing(-left)
            self.watch.advance(before - left)
        self.finished = left == 0
        self.stats["finish_s"] = time.perf_counter() - begun

    def _keep_tight(self, u: NDArray[np.float64], best: NDArray[np.int64]) -> None:
        """Keep the pairs that are tight on the prices and give free rows their best slot where it is free."""
        net = paid(self.taken, self.grown.rows, self.grown.slots, self.aside_v)[1]
        loose = np.flatnonzero((self.taken >= 0) & (net > u + _TIGHT * self.spread))
        self.holder[self.taken[loose]] = -1
        self.taken[loose] = -1
        for i in np.flatnonzero(self.taken < 0):
            if best[i] < self.m and self.holder[best[i]] < 0:
                self.taken[i], self.holder[best[i]] = best[i], i

    def complete(self) -> None:
        """Pair what an unfinished search has left: exactly where that is small, else in the order of the tree."""
        free = np.flatnonzero(self.taken < 0)
        open_ = np.flatnonzero(self.holder < 0)
        if 0 < free.size <= _COARSE_FROM:
            real = free[free < self.n]
            price = np.zeros((free.size, free.size))
            price[: real.size] = np.inf
            slot = open_[open_ < self.m]
            nodes, slots = self.grown.node_order[real], self.grown.slot_order[slot]
            price[: real.size, : slot.size] = self.problem.prices(nodes)[:, slots]
            price[: real.size, slot.size :] = self.problem.leave_node[nodes][:, None]
            price[real.size :, : slot.size] = self.problem.leave_slot[slots]
            try:
                open_ = open_[linear_sum_assignment(price)[1]]
            except ValueError:
                return
        self.taken[free], self.holder[open_] = open_, free

    def answer(self) -> SumSolution:
        """Return pairs and prices in the order of the problem."""
        grown = self.grown
        column = np.full(self.n, -1, dtype=np.int64)
        held = self.taken[: self.n]
        placed = np.flatnonzero((held >= 0) & (held < self.m))
        column[grown.node_order[placed]] = grown.slot_order[held[placed]]
        prices = np.empty(self.m)
        prices[grown.slot_order] = grown.slots.v
        aside = float(self.aside_v.min()) if self.aside_v.size else 0.0
        return SumSolution(column, prices, aside, self.finished, self.stats)


def _no_pairing(left: int) -> NoSolutionError:
    return NoSolutionError(
        Fault("pairing", f"{left} nodes find no slot within the cap and the forbidden pairs", hint="raise the cap")
    )


def _between(
    known: NDArray[np.float64], prices: NDArray[np.float64], asked: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Interpolate prices at the images `known` (k, 6) to `asked` (m, 6): a plane through the nearest ones."""
    if len(known) < 2 * _NEIGHBOURS:
        return np.full(len(asked), prices.mean())
    near = cKDTree(known).query(asked, k=_NEIGHBOURS)[1]
    away = known[near][:, :, :3]
    middle, level = away.mean(axis=1), prices[near].mean(axis=1)
    away = away - middle[:, None]
    square = np.einsum("kni,knj->kij", away, away)
    ridge = _RIDGE * np.trace(square, axis1=1, axis2=2) + 1e-300
    square += ridge[:, None, None] * np.eye(3)
    slope = np.linalg.solve(square, np.einsum("kni,kn->ki", away, prices[near] - level[:, None])[:, :, None])
    smooth: NDArray[np.float64] = level + np.einsum("ki,ki->k", slope[:, :, 0], asked[:, :3] - middle)
    return smooth


def _spread(problem: Problem) -> float:
    """Return the scale of epsilon, from a sample: between the price and what exchanging two slots changes."""
    rng = np.random.default_rng(1)
    n, m = len(problem.node), len(problem.slot)
    i, k = rng.integers(0, n, (2, 2000))
    j, s = rng.integers(0, m, (2, 2000))

    def cost(rows: NDArray[np.int64], columns: NDArray[np.int64]) -> NDArray[np.float64]:
        gap = problem.slot[columns] - problem.node[rows]
        c = np.linalg.norm(gap[:, :3], axis=1) + np.linalg.norm(gap[:, 3:], axis=1)
        rate = problem.rate[rows]
        bent: NDArray[np.float64] = problem.scale[rows] * np.where(rate > 0, -np.expm1(-rate * c), c)
        return bent

    change = np.abs(cost(i, j) - cost(i, s) + cost(k, s) - cost(k, j))
    whole = np.abs(cost(i, j))
    size = float(np.sqrt(np.median(change) * np.median(whole)))
    return size if size > 0.0 else float(whole.max(initial=0.0))


def _coarse(problem: Problem) -> Problem:
    """Return a copy with groups of neighbouring nodes and slots for single ones."""
    n, m = len(problem.node), len(problem.slot)
    order_n, order_m = halve(problem.node, 16)[0], halve(problem.slot, 16)[0]
    size = max(n, m) / max(1, round(max(n, m) / _GROUP))
    edge_n = np.linspace(0, n, max(1, round(n / size)) + 1).astype(np.int64)[:-1]
    edge_m = np.linspace(0, m, max(1, round(m / size)) + 1).astype(np.int64)[:-1]

    def mean(
        values: NDArray[np.float64], order: NDArray[np.int64], edge: NDArray[np.int64]
    ) -> NDArray[np.float64]:
        sums = np.add.reduceat(values[order], edge, axis=0)
        parts = np.diff(np.append(edge, len(values)))
        out: NDArray[np.float64] = sums / (parts if values.ndim == 1 else parts[:, None])
        return out

    nobody = np.zeros(0, dtype=np.int64)
    return Problem(
        mean(problem.node, order_n, edge_n),
        mean(problem.slot, order_m, edge_m),
        mean(problem.scale, order_n, edge_n),
        mean(problem.rate, order_n, edge_n),
        np.full(len(edge_n), np.inf),
        mean(problem.leave_slot, order_m, edge_m),
        mean(problem.leave_node, order_n, edge_n),
        nobody,
        nobody,
        np.zeros(0),
    )
