"""Where slots are: position and velocity of every slot of a formation at any epoch, under its rule."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from farhold.domain.formation import Formation
from farhold.dynamics.frames import turn_about_n
from farhold.dynamics.propagate import fly
from farhold.dynamics.trajectory import Reference
from farhold.errors import CaseError, Fault

__all__ = ["closest_pair", "natural_velocity", "slot_states"]

_NATURAL_POINTS = ("L3", "L4", "L5")


def slot_states(reference: Reference, formation: Formation, t_s: float) -> NDArray[np.float64]:
    """States (m, 6) of the slots of `formation` at `t_s`, relative to the reference, rotating axes, SI.

    `rotating` slots stand still in R, T, N. `inertial` slots keep their orientation among the stars, so in
    rotating axes they turn by -n about N from where they were at the formation's start. `natural` slots are a
    snapshot at the start that flies freely, started with :func:`natural_velocity`.

    Raises
    ------
    CaseError
        A `natural` formation at L1 or L2, where the snapshot needs the centre subspace.
    """
    place = formation.slots.position_m
    start = formation.start_s
    if formation.axes == "icrf":
        place = place @ reference.axes_to_icrf(start)
    if formation.rule == "rotating":
        return np.hstack([place, np.zeros_like(place)])
    if formation.rule == "inertial":
        now = place @ turn_about_n(-reference.rate_rad_s * (t_s - start)).T
        return np.hstack([now, np.cross([0.0, 0.0, -reference.rate_rad_s], now)])
    if reference.point not in _NATURAL_POINTS:
        raise CaseError(
            Fault(
                f"formation.{formation.name}.rule",
                f"natural slots cannot be placed at {reference.point} in this version",
                "rotating or inertial at L1 and L2; natural at " + ", ".join(_NATURAL_POINTS),
            )
        )
    snapshot = np.hstack([place, natural_velocity(reference, place, formation.slots.vn_m_s)])
    if t_s == start:
        return snapshot
    return fly(reference, snapshot, [t_s], start_s=start).state[:, 0]


def natural_velocity(
    reference: Reference, position_m: NDArray[np.float64], vn_m_s: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Velocity (n, 3) that keeps free nodes at (n, 3) near the reference, rotating axes [m/s].

    The drift-free 2:1 ellipse v_R = n T/2, v_T = -2 n R (Clohessy and Wiltshire 1960), then v_T trimmed until
    the heliocentric energy equals the reference's, which stops the walk that the offset's square would cause.
    """
    n = reference.rate_rad_s
    v = np.stack([0.5 * n * position_m[:, 1], -2.0 * n * position_m[:, 0], vn_m_s], axis=1)
    sun = reference.primaries_m()[0]
    gm = reference.gm_m3_s2[0]
    wanted = 0.5 * float(np.sum(np.cross([0.0, 0.0, n], sun) ** 2)) - gm / float(np.linalg.norm(sun))
    out = position_m + sun
    inertial = v + np.cross([0.0, 0.0, n], out)
    along2 = 2.0 * (wanted + gm / np.linalg.norm(out, axis=1)) - inertial[:, 0] ** 2 - inertial[:, 2] ** 2
    v[:, 1] += np.copysign(np.sqrt(along2), inertial[:, 1]) - inertial[:, 1]
    return v


def closest_pair(position_m: NDArray[np.float64]) -> tuple[float, int, int]:
    """Least distance [m] between any two of (n, 3) places, and which two; inf for fewer than two."""
    from scipy.spatial import cKDTree

    if len(position_m) < 2:
        return np.inf, -1, -1
    found = cKDTree(position_m).query(position_m, k=2)
    distance, neighbour = np.asarray(found[0])[:, 1], np.asarray(found[1])[:, 1]
    first = int(np.argmin(distance))
    return float(distance[first]), first, int(neighbour[first])
