"""The lyapunov reference: a periodic orbit in the plane about L1, L2 or L3."""

from __future__ import annotations

import math

import numpy as np

from farhold.domain.epoch import Epoch
from farhold.dynamics.circular import SUN_EARTH, ThreeBody
from farhold.dynamics.orbits.analytic import Richardson
from farhold.dynamics.orbits.corrector import Family, OutOfFamilyError, planar_rows
from farhold.dynamics.orbits.loops import closed_table
from farhold.dynamics.orbits.orbit import Orbit, above_zero, problem_of
from farhold.errors import CaseError, ConvergenceError, Fault

__all__ = ["make"]

_FIRST_AY = 0.05


def make(
    *,
    point: str,
    epoch: Epoch,
    pressure_area_m2_kg: float,
    ay_m: float,
    phase_rad: float = 0.0,
    system: ThreeBody = SUN_EARTH,
) -> Orbit:
    """Find a planar Lyapunov orbit by its amplitude.

    Parameters
    ----------
    ay_m : its largest distance from the Sun-to-Earth line along T [m]
    phase_rad : where it is at the epoch, as a share of the period in time; 0 on the Sun-to-Earth line, on the
        Sun's side of the point

    Raises
    ------
    CaseError
        A point without Lyapunov orbits.
    ConvergenceError
        The family holds no such orbit; the message says what it holds.

    Source: third-order start of Richardson 1980 in the plane, followed by pseudo-arclength.
    """
    problem = problem_of(point, system, pressure_area_m2_kg)
    if point not in ("L1", "L2", "L3"):
        raise CaseError(Fault("reference.kind", f"got 'lyapunov' at {point}", "lyapunov at L1 L2 L3"))
    target = above_zero("ay", ay_m, "m") / system.length_m
    analytic = Richardson.about(point, problem.mu, problem.beta)
    ay = min(_FIRST_AY, target / analytic.gamma)
    ax = ay / analytic.k
    state, rate = analytic.state(ax, 0.0, 0.0), analytic.frequency(ax, 0.0)
    scale = np.array([analytic.gamma, analytic.gamma, 1.0, 1.0, analytic.gamma])
    family = Family(planar_rows(problem.mu, problem.beta), scale)
    first = family.member([state[0], state[4], math.pi / rate, 0.5 * math.pi / rate, ay * analytic.gamma], 4)
    try:
        found = first if ay < _FIRST_AY else family.reach(first, 4, 4, target)
    except OutOfFamilyError as error:
        km = system.length_m / 1e3
        raise ConvergenceError(
            Fault(
                "reference.ay",
                f"no lyapunov orbit at {point} reaches {target * km:.6g} km",
                f"up to {error.most * km:.6g} km",
            )
        ) from None
    x, vy, half = found[:3]
    table = closed_table(problem, [x, 0.0, 0.0, 0.0, vy, 0.0], 2.0 * half)
    return Orbit.along(
        table,
        kind="lyapunov",
        epoch=epoch,
        pressure_area_m2_kg=pressure_area_m2_kg,
        system=system,
        options={"ay_m": ay_m},
        phase_rad=phase_rad,
    )
