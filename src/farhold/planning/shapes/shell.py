"""A sphere covered evenly."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

_GOLDEN_RAD = math.pi * (3.0 - math.sqrt(5.0))


def make(count: int, radius_m: float) -> NDArray[np.float64]:
    """Place (count, 3) points on the sphere of `radius_m` [m].

    Fibonacci's lattice: equal steps in height, so each point has the same area, and a golden-angle step in
    longitude. Source: A. Gonzalez, Mathematical Geosciences 42 (2010) 49-64, with half-step heights.
    """
    k = np.arange(count)
    height = 1.0 - (2.0 * k + 1.0) / count
    across = np.sqrt(np.maximum(0.0, 1.0 - height * height))
    longitude_rad = _GOLDEN_RAD * k
    unit = np.column_stack([across * np.cos(longitude_rad), across * np.sin(longitude_rad), height])
    return np.asarray(radius_m * unit, dtype=float)
