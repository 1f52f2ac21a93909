"""Periodic orbits in the plane about L4 and L5, grown from the linear modes."""

from __future__ import annotations

import math

import numpy as np

from farhold.dynamics.orbits.analytic import linear_mode
from farhold.dynamics.orbits.orbit import point_plant
from farhold.dynamics.orbits.table import Table, segments_for, settle
from farhold.dynamics.orbits.taylor import Exact, Problem
from farhold.errors import ConvergenceError, Fault

__all__ = ["triangular_table"]

_GROWTH = 2.0
_LEAST_GROWTH = 1.1
_SAMPLES = 40


def triangular_table(problem: Problem, rank: int, amplitude: float, unit_km: float) -> Table:
    """Tabulate the orbit whose farthest place along +T is `amplitude` from the displaced point.

    Parameters
    ----------
    rank : 0 for the long-period family, 1 for the short-period family
    amplitude : nondimensional;  unit_km : the unit of length, for messages

    Raises
    ------
    ConvergenceError
        The family ends, or meets a resonance, before that amplitude.
    """
    shift, linear = point_plant(problem)
    rate, shape = linear_mode(linear, rank)
    place = np.concatenate([shift, np.zeros(3)])
    period = 2.0 * math.pi / rate

    def mode(count: int) -> Exact:
        angle = 2.0 * math.pi / count * np.arange(count)
        nodes: Exact = (shape * np.exp(1j * angle)[:, None]).real.astype(np.longdouble)
        return nodes

    count = segments_for(problem, (place + amplitude * mode(_SAMPLES)).astype(float), period)
    nodes, step, size, reached, growth = mode(count), period / count, amplitude, 0.0, 0.0
    while True:
        try:
            table = settle(problem, place + size * nodes, step, closed=True, step_free=True, held=(1, 4))
        except ConvergenceError:
            growth = math.sqrt(growth) if growth else 0.0
            if growth == 0.0 and size > 1e-3 * amplitude:
                size /= 4.0
                continue
            if growth < _LEAST_GROWTH:
                raise ConvergenceError(
                    Fault(
                        "reference.amplitude",
                        f"no orbit of {amplitude * unit_km:.6g} km was found at {problem.point}",
                        f"up to about {reached * unit_km:.2g} km" if reached else "",
                    )
                ) from None
        else:
            if size >= amplitude:
                return table
            nodes, step, reached = (table.motion[:, 0] - place) / size, float(table.step), size
            growth = _GROWTH
        size = min(amplitude, reached * growth)
