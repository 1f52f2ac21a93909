"""Least worst over all pairs: the least limit under which all nodes (or all slots) can be paired."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.errors import DomainError, Fault, NoSolutionError
from farhold.kernels.pairing.bottleneck import dearest_least, match_under
from farhold.kernels.pairing.layout import Rows, Slots
from farhold.kernels.pairing.tree import paid
from farhold.planning.assignment.solver.problem import Problem
from farhold.planning.assignment.solver.tree import grow
from farhold.watch import SILENT, Watch

__all__ = ["WorstSolution", "solve_bottleneck"]

_EVEN = 1.02
_CLOSE = 1e-6


@dataclass(frozen=True, slots=True, eq=False)
class WorstSolution:
    """A pairing whose dearest node pays as little as any pairing allows.

    Attributes
    ----------
    column : (n,) slot of each node
    worst : what the dearest node pays;  bound : what it pays at least in any pairing
    phases : searches that were needed
    """

    column: NDArray[np.int64]
    worst: float
    bound: float
    phases: int


def solve_bottleneck(
    problem: Problem, *, start: NDArray[np.int64] | None = None, watch: Watch = SILENT
) -> WorstSolution:
    """Find a pairing of all nodes whose worst price is least.

    Parameters
    ----------
    problem : n nodes and m >= n slots; slots that stay empty cost nothing here
    start : (n,) a pairing to begin with, such as that of least sum

    Raises
    ------
    DomainError
        More nodes than slots.
    NoSolutionError
        No pairing respects caps and forbidden pairs.
    """
    n, m = len(problem.node), len(problem.slot)
    if n > m:
        raise DomainError(Fault("pairing", f"{n} nodes for {m} slots", "at least as many slots as nodes"))
    if n == 0:
        return WorstSolution(np.zeros(0, dtype=np.int64), 0.0, 0.0, 0)
    grown = grow(problem)
    rows, slots = grown.rows, grown.slots
    low = float(dearest_least(rows, slots))
    taken, holder = np.full(n, -1, dtype=np.int64), np.full(m, -1, dtype=np.int64)
    best: NDArray[np.int64] | None = None
    high, limit, step, phases = np.inf, low, _EVEN, 0
    if start is not None:
        place_of = np.argsort(grown.slot_order)
        best = place_of[start[grown.node_order]]
        high = _paid(best, grown.rows, slots).max()
        limit = low if low >= high else 0.5 * (low + high)
        _restart(best, limit, rows, slots, taken, holder)
    if np.isinf(low):
        raise _no_pairing()
    watch.stage("least worst price", None)
    while low < high:
        free, further, more = match_under(limit, True, rows, slots, taken, holder)
        phases += more
        watch.advance(0)
        if free == 0:
            best = taken.copy()
            high = float(_paid(best, rows, slots).max())
        else:
            low = float(further)
            if np.isinf(low):
                raise _no_pairing()
        if low >= high:
            break
        if np.isinf(high):
            limit = max(low, limit * step)
            step **= 1.6
        else:
            limit = 0.5 * (low + high) if high - low > _CLOSE * high else low
            assert best is not None
            _restart(best, limit, rows, slots, taken, holder)
    assert best is not None
    column = np.empty(n, dtype=np.int64)
    column[grown.node_order] = grown.slot_order[best]
    return WorstSolution(column, high, min(low, high), phases)


def _no_pairing() -> NoSolutionError:
    return NoSolutionError(
        Fault("pairing", "some nodes find no slot within the cap and the forbidden pairs", hint="raise the cap")
    )


def _paid(taken: NDArray[np.int64], rows: Rows, slots: Slots) -> NDArray[np.float64]:
    """Return the price of each row's slot."""
    whole: NDArray[np.float64] = paid(taken, rows, slots, np.zeros(0))[0]
    return whole


def _restart(
    best: NDArray[np.int64],
    limit: float,
    rows: Rows,
    slots: Slots,
    taken: NDArray[np.int64],
    holder: NDArray[np.int64],
) -> None:
    """Begin with the pairs of `best` that respect `limit`."""
    taken[:], holder[:] = best, -1
    taken[_paid(best, rows, slots) > limit] = -1
    held = np.flatnonzero(taken >= 0)
    holder[taken[held]] = held
