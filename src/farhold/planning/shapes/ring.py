"""A circle walked in equal steps."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def make(count: int, radius_m: float) -> NDArray[np.float64]:
    """Place (count, 3) points at equal steps on the circle of `radius_m` [m] about N."""
    angle_rad = 2.0 * np.pi * np.arange(count) / count
    return np.column_stack([radius_m * np.cos(angle_rad), radius_m * np.sin(angle_rad), np.zeros(count)])
