"""A straight line walked in equal steps."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def make(count: int, length_m: float) -> NDArray[np.float64]:
    """Place (count, 3) points along N over `length_m` [m], the middle at the origin."""
    along_m = length_m * (np.linspace(-0.5, 0.5, count) if count > 1 else np.zeros(1))
    return np.column_stack([np.zeros(count), np.zeros(count), along_m])
