"""A cloud of normal density, cut off at a number of sigmas."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def draw(rng: np.random.Generator, count: int, sigma_m: float, cut: float = 3.0) -> NDArray[np.float64]:
    """Draw (count, 3) points of normal density, `sigma_m` [m] on each axis, none beyond `cut` sigmas.

    Points beyond the cut are drawn again. A small cut would draw for ever, so under half a sigma, where
    the density is level within 12 %, the points come from an even ball instead.
    """
    if cut < 0.5:
        direction = rng.standard_normal((count, 3))
        direction /= np.linalg.norm(direction, axis=1, keepdims=True)
        return np.asarray(direction * (cut * sigma_m * np.cbrt(rng.random((count, 1)))), dtype=float)
    points = rng.standard_normal((count, 3))
    while True:
        far = np.flatnonzero(np.einsum("ij,ij->i", points, points) > cut * cut)
        if far.size == 0:
            return np.asarray(points * sigma_m, dtype=float)
        points[far] = rng.standard_normal((far.size, 3))
