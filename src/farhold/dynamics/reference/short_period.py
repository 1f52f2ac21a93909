"""The short-period reference: a periodic orbit in the plane about L4 or L5 (a year, a 2:1 ellipse)."""

from __future__ import annotations

from farhold.domain.epoch import Epoch
from farhold.dynamics.circular import SUN_EARTH, ThreeBody
from farhold.dynamics.orbits.orbit import Orbit, above_zero, problem_of
from farhold.dynamics.orbits.triangular import triangular_table
from farhold.errors import CaseError, Fault

__all__ = ["make"]


def make(
    *,
    point: str,
    epoch: Epoch,
    pressure_area_m2_kg: float,
    amplitude_m: float,
    phase_rad: float = 0.0,
    system: ThreeBody = SUN_EARTH,
) -> Orbit:
    """Find the orbit by its amplitude.

    Parameters
    ----------
    amplitude_m : its farthest place along +T, from the displaced point, where it turns back: half the longer
        axis while it is small [m]
    phase_rad : where it is at the epoch, as a share of the period in time; 0 at that place

    Raises
    ------
    CaseError
        A point without such orbits.
    ConvergenceError
        The family holds no such orbit.

    Source: linear mode (Szebehely 1967, chapter 5), closed by Newton and multiple shooting.
    """
    problem = problem_of(point, system, pressure_area_m2_kg)
    if point not in ("L4", "L5"):
        raise CaseError(Fault("reference.kind", f"got 'short-period' at {point}", "short-period at L4 L5"))
    size = above_zero("amplitude", amplitude_m, "m") / system.length_m
    return Orbit.along(
        triangular_table(problem, 1, size, system.length_m / 1e3),
        kind="short-period",
        epoch=epoch,
        pressure_area_m2_kg=pressure_area_m2_kg,
        system=system,
        options={"amplitude_m": amplitude_m},
        phase_rad=phase_rad,
    )
