"""What primaries do to places near a reference: gradient, exact differences of attraction, pressure."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.dynamics.trajectory import Primaries

__all__ = ["difference_field", "plant", "pressure_push"]


def plant(primaries_m: Primaries, gm_m3_s2: tuple[float, float], rate_rad_s: float) -> NDArray[np.float64]:
    """Matrix (6, 6) of the linear deviation motion at a place, rotating axes, times in units of 1/rate.

    Parameters
    ----------
    primaries_m : (3,), (3,) vectors from the Sun and the Earth-Moon barycentre to the place
    gm_m3_s2 : their GM, the Sun's less the reference's pressure
    """
    a = np.zeros((6, 6))
    a[:3, 3:] = np.eye(3)
    a[3:, :3] = np.diag([1.0, 1.0, 0.0])
    a[3, 4], a[4, 3] = 2.0, -2.0
    for gm, rho in zip(gm_m3_s2, primaries_m, strict=True):
        size = float(np.linalg.norm(rho))
        unit = rho / size
        a[3:, :3] += gm / size**3 / rate_rad_s**2 * (3.0 * np.outer(unit, unit) - np.eye(3))
    return a


def difference_field(
    position_m: ArrayLike, rule: str, primaries_m: Primaries, gm_m3_s2: tuple[float, float], rate_rad_s: float
) -> NDArray[np.float64]:
    """Acceleration (n, 3) felt at places (n, 3) that are kept under `rule` about a reference [m/s2].

    Exact difference of attraction without cancellation (Battin 1999, section 8.4), plus the centrifugal part
    for `rotating` slots; zero for `natural`. The other arguments are those of :func:`plant`.
    """
    delta = np.asarray(position_m, dtype=float)
    total = np.zeros_like(delta)
    if rule == "natural":
        return total
    for gm, rho in zip(gm_m3_s2, primaries_m, strict=True):
        rho2 = float(rho @ rho)
        q = np.sum(delta * (delta + 2.0 * rho), axis=1) / rho2
        w = (1.0 + q) ** 1.5
        f = (q * (3.0 + q * (3.0 + q)) / (w + w * w))[:, None]
        total -= gm / rho2**1.5 * (delta * (1.0 - f) - rho * f)
    if rule == "rotating":
        total += rate_rad_s**2 * delta * np.array([1.0, 1.0, 0.0])
    return total


def pressure_push(position_m: ArrayLike, sun_m: NDArray[np.float64], gm_bare_m3_s2: float) -> NDArray[np.float64]:
    """Acceleration (n, 3) per unit of beta at places (n, 3), away from the Sun [m/s2]; `sun_m` (3,) from it."""
    away = np.asarray(position_m, dtype=float) + sun_m
    push: NDArray[np.float64] = gm_bare_m3_s2 * away / np.linalg.norm(away, axis=1, keepdims=True) ** 3
    return push
