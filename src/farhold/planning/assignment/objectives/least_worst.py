"""The dearest node as cheap as possible, then least total dv among those pairings."""

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


OBJECTIVE = Objective(
    "least-worst", "the least dv for the dearest node, then the least in total", "m/s", _weigh, worst=True
)
