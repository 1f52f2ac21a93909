"""The only importer of boinor: Lambert's problem for the first guess of absolute two-point problems.

boinor continues poliastro, which no longer installs on current Python. Its types never leave this file, and
it is imported when first used, since that takes seconds.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["lambert"]


def lambert(
    gm_m3_s2: float, start_m: ArrayLike, end_m: ArrayLike, duration_s: float, *, prograde: bool = True
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Velocities (3,), (3,) [m/s] at both ends of the single-revolution Keplerian arc between two positions.

    Parameters
    ----------
    gm_m3_s2 : gravitational parameter [m3/s2]
    start_m, end_m : (3,) positions [m], inertial axes
    duration_s : time between them [s]
    prograde : whether the arc turns about +z

    Source: Izzo 2015, Revisiting Lambert's problem, CMDA 121, 1, as implemented by boinor.
    """
    from boinor.core.iod import izzo

    start, end = np.asarray(start_m, dtype=float), np.asarray(end_m, dtype=float)
    v1, v2 = izzo(gm_m3_s2, start, end, duration_s, 0, prograde, True, 50, 1e-14)
    return np.asarray(v1), np.asarray(v2)
