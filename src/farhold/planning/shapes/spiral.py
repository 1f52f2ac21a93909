"""A flat spiral of even winding walked in equal steps."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from farhold.errors import DomainError, Fault

_STEPS_PER_TURN = 2000


def make(count: int, radius_m: float, inner_radius_m: float = 0.0, turns: float = 3.0) -> NDArray[np.float64]:
    """Place (count, 3) points at equal steps along an Archimedean spiral about N.

    Its radius grows in proportion to the angle from `inner_radius_m` to `radius_m` [m] in `turns`. The length
    walked, the integral of sqrt(r^2 + (dr/dangle)^2), has a closed form: with u = r/b and b = dr/dangle it is
    b (u sqrt(1 + u^2) + asinh u)/2; it is inverted on a fine table.
    """
    if inner_radius_m >= radius_m:
        what = f"got {inner_radius_m / 1e3:g} km with a radius of {radius_m / 1e3:g} km"
        raise DomainError(Fault("inner_radius", what, "less than the radius"))
    if turns > 1000:
        raise DomainError(Fault("turns", f"got {turns:g}", "up to 1000"))
    full_rad = 2.0 * np.pi * turns
    slope_m = (radius_m - inner_radius_m) / full_rad
    angle_rad = np.linspace(0.0, full_rad, int(_STEPS_PER_TURN * max(turns, 1.0)) + 1)
    u = inner_radius_m / slope_m + angle_rad
    walked = u * np.sqrt(1.0 + u * u) + np.arcsinh(u)
    at_rad = np.interp(np.linspace(walked[0], walked[-1], count), walked, angle_rad)
    distance_m = inner_radius_m + slope_m * at_rad
    return np.column_stack([distance_m * np.cos(at_rad), distance_m * np.sin(at_rad), np.zeros(count)])
