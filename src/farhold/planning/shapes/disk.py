"""A flat disk covered evenly."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from farhold.errors import DomainError, Fault

_GOLDEN_RAD = math.pi * (3.0 - math.sqrt(5.0))


def make(count: int, radius_m: float, inner_radius_m: float = 0.0) -> NDArray[np.float64]:
    """Place (count, 3) points over the disk between `inner_radius_m` and `radius_m` [m] about N.

    The heads of a sunflower: equal steps in area and a golden-angle step.
    Source: H. Vogel, Mathematical Biosciences 44 (1979) 179-189.
    """
    if inner_radius_m >= radius_m:
        what = f"got {inner_radius_m / 1e3:g} km with a radius of {radius_m / 1e3:g} km"
        raise DomainError(Fault("inner_radius", what, "less than the radius"))
    share = (np.arange(count) + 0.5) / count
    distance_m = np.sqrt(inner_radius_m**2 + share * (radius_m**2 - inner_radius_m**2))
    angle_rad = _GOLDEN_RAD * np.arange(count)
    return np.column_stack([distance_m * np.cos(angle_rad), distance_m * np.sin(angle_rad), np.zeros(count)])
