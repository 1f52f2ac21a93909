"""Least total dv."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from farhold.planning.assignment.objective import Objective

__all__ = ["OBJECTIVE"]


def _weigh(
    dv_m_s: NDArray[np.float64],
    mass_kg: NDArray[np.float64],  # noqa: ARG001 - one signature for all objectives
    isp_s: NDArray[np.float64],  # noqa: ARG001
) -> NDArray[np.float64]:
    """Return dv as it is."""
    return dv_m_s


OBJECTIVE = Objective("least-total", "the least dv over all nodes", "m/s", _weigh)
