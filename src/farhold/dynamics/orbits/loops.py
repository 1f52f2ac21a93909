"""From a corrected periodic orbit in double precision to its closed table in extended precision."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from farhold.dynamics.absolute import propagate
from farhold.dynamics.orbits.table import Table, segments_for, settle
from farhold.dynamics.orbits.taylor import Problem

__all__ = ["closed_table"]

_SAMPLES = 60


def closed_table(
    problem: Problem, start: ArrayLike, period: float, *, period_free: bool = True, held: tuple[int, ...] = (1,)
) -> Table:
    """Tabulate the periodic orbit that passes by `start` (6,), barycentric synodic, and takes `period`.

    The components `held` of the start, in R, T, N, stay as they are; the rest and, where `period_free`, the
    period change by no more than the error of the start.

    Raises
    ------
    ConvergenceError
        The path from `start` is no periodic orbit.
    """
    samples = propagate(start, np.linspace(0.0, period, _SAMPLES), problem.mu, problem.beta).state
    count = segments_for(problem, np.array([problem.from_synodic(s) for s in samples]), period)
    flown = propagate(start, np.arange(count) * (period / count), problem.mu, problem.beta).state
    nodes = np.array([problem.from_synodic(s) for s in flown], dtype=np.longdouble)
    return settle(problem, nodes, period / count, closed=True, step_free=period_free, held=held)
