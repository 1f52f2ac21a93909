"""The halo reference: a periodic orbit in space about L1 or L2."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S, Epoch
from farhold.dynamics.circular import SUN_EARTH, ThreeBody
from farhold.dynamics.orbits.analytic import Richardson
from farhold.dynamics.orbits.corrector import Family, OutOfFamilyError, spatial_rows
from farhold.dynamics.orbits.loops import closed_table
from farhold.dynamics.orbits.orbit import Orbit, above_zero, problem_of
from farhold.dynamics.orbits.taylor import Problem
from farhold.errors import CaseError, ConvergenceError, Fault

__all__ = ["make"]

_FIRST_AZ = 0.1


def make(
    *,
    point: str,
    epoch: Epoch,
    pressure_area_m2_kg: float,
    family: str,
    az_m: float | None = None,
    period_s: float | None = None,
    phase_rad: float = 0.0,
    system: ThreeBody = SUN_EARTH,
) -> Orbit:
    """Find a halo orbit by its amplitude or by its period.

    Parameters
    ----------
    family : "north" or "south", the side of the plane on which it goes farther
    az_m : its largest distance from the plane along N [m]
    period_s : its period [s], instead of `az_m`; the smallest orbit of that period
    phase_rad : where it is at the epoch, as a share of the period in time; 0 where it is farthest along N

    Raises
    ------
    CaseError
        Both or none of az and period, unknown family, a point without halos in reach.
    ConvergenceError
        The family holds no such orbit; the message says what it holds.

    Source: third-order start of Richardson 1980, correction of Howell 1984, followed by pseudo-arclength.
    """
    problem = problem_of(point, system, pressure_area_m2_kg)
    if point not in ("L1", "L2"):
        raise CaseError(Fault("reference.kind", f"got 'halo' at {point}", "halo at L1 L2"))
    if family not in ("north", "south"):
        raise CaseError(Fault("reference.family", f"got {family!r}", "north south"))
    if (az_m is None) == (period_s is None):
        raise CaseError(Fault("reference", "a halo is sized by one of az and period", "az or period, one of them"))
    options: dict[str, float | str] = {"family": family}
    if az_m is not None:
        options["az_m"] = above_zero("az", az_m, "m")
        x, z, vy, half = _by_height(problem, az_m / system.length_m, system)
    else:
        assert period_s is not None
        options["period_s"] = above_zero("period", period_s, "s")
        x, z, vy, half = _by_period(problem, period_s * system.rate_rad_s, system)
    start = [x, 0.0, z if family == "north" else -z, 0.0, vy, 0.0]
    table = (
        closed_table(problem, start, 2.0 * half, held=(1, 2))
        if period_s is None
        else closed_table(problem, start, 2.0 * half, period_free=False)
    )
    return Orbit.along(
        table,
        kind="halo",
        epoch=epoch,
        pressure_area_m2_kg=pressure_area_m2_kg,
        system=system,
        options=options,
        phase_rad=phase_rad,
    )


def _by_height(problem: Problem, height: float, system: ThreeBody) -> NDArray[np.float64]:
    """Unknowns of the northern halo of amplitude `height` along N."""
    family, first = _family(problem)
    if height <= first[1]:
        return family.member([first[0], height, *first[2:]], 1)
    try:
        return family.reach(first, 1, 1, height)
    except OutOfFamilyError as error:
        km = system.length_m / 1e3
        raise ConvergenceError(
            Fault(
                "reference.az",
                f"no halo at {problem.point} reaches {height * km:.6g} km",
                f"up to {error.most * km:.6g} km",
            )
        ) from None


def _by_period(problem: Problem, period: float, system: ThreeBody) -> NDArray[np.float64]:
    """Unknowns of the smallest northern halo of `period`."""
    family, first = _family(problem)
    tiny = family.member([first[0], 1e-3 * first[1], *first[2:]], 1)
    try:
        return family.reach(tiny, 1, 3, 0.5 * period)
    except OutOfFamilyError as error:
        day = 1.0 / system.rate_rad_s / DAY_S
        raise ConvergenceError(
            Fault(
                "reference.period",
                f"no halo at {problem.point} takes {period * day:.6g} d",
                f"{2.0 * error.least * day:.6g} to {2.0 * error.most * day:.6g} d",
            )
        ) from None


def _family(problem: Problem) -> tuple[Family, NDArray[np.float64]]:
    """Family of the northern halos, and a first small member from the analytic start."""
    analytic = Richardson.about(problem.point, problem.mu, problem.beta)
    ax = analytic.ax_of(_FIRST_AZ)
    ends = analytic.state(ax, _FIRST_AZ, 0.0), analytic.state(ax, -_FIRST_AZ, math.pi)
    start = max(ends, key=lambda state: float(state[2]))
    family = Family(spatial_rows(problem.mu, problem.beta), np.array([analytic.gamma] * 3 + [1.0]))
    half = math.pi / analytic.frequency(ax, _FIRST_AZ)
    return family, family.member([start[0], start[2], start[4], half])
