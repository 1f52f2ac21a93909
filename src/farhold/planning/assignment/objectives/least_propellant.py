"""Least total propellant: heavy nodes and poor thrusters fly less."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from farhold.planning.assignment.objective import Objective
from farhold.propellant.rocket import propellant_kg

__all__ = ["OBJECTIVE"]


def _weigh(
    dv_m_s: NDArray[np.float64], mass_kg: NDArray[np.float64], isp_s: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the propellant that each dv burns [kg]."""
    return propellant_kg(mass_kg, dv_m_s, isp_s)


OBJECTIVE = Objective("least-propellant", "the least propellant over all nodes", "kg", _weigh)
