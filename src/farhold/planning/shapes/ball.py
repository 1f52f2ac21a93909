"""A ball filled evenly."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def draw(rng: np.random.Generator, count: int, radius_m: float) -> NDArray[np.float64]:
    """Draw (count, 3) points of equal density within `radius_m` [m].

    The direction is that of a normal vector, the distance the cube root of a uniform number (the volume
    inside r grows as r^3).
    """
    direction = rng.standard_normal((count, 3))
    direction /= np.linalg.norm(direction, axis=1, keepdims=True)
    distance_m = radius_m * np.cbrt(rng.random((count, 1)))
    return np.asarray(direction * distance_m, dtype=float)
