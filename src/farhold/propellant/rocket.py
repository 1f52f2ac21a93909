"""The rocket equation, exact for burns of micrometres a second.

Source: K. E. Tsiolkovsky, 1903; m_after = m_before exp(-dv / (isp g0)). Written with expm1 and log1p, because
1 - exp(-x) loses every digit of a holding burn.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.constants import G0

__all__ = ["G0_M_S2", "dv_of", "mass_after_kg", "propellant_kg"]

G0_M_S2: float = float(G0.value)


def propellant_kg(mass_kg: ArrayLike, dv_m_s: ArrayLike, isp_s: ArrayLike) -> NDArray[np.float64]:
    """Propellant that a burn takes.

    Parameters
    ----------
    mass_kg, dv_m_s, isp_s : broadcastable
        Mass before the burn [kg], speed change [m/s] (negative: what undoing the burn gives back), effective
        specific impulse [s].

    Returns
    -------
    broadcast shape, [kg]
    """
    exponent = np.asarray(dv_m_s, dtype=np.float64) / (np.asarray(isp_s, dtype=np.float64) * G0_M_S2)
    return np.asarray(-np.asarray(mass_kg, dtype=np.float64) * np.expm1(-exponent))


def mass_after_kg(mass_kg: ArrayLike, dv_m_s: ArrayLike, isp_s: ArrayLike) -> NDArray[np.float64]:
    """Mass left after a burn [kg]; arguments as :func:`propellant_kg`."""
    return np.asarray(np.asarray(mass_kg, dtype=np.float64) - propellant_kg(mass_kg, dv_m_s, isp_s))


def dv_of(mass_before_kg: ArrayLike, mass_after_kg: ArrayLike, isp_s: ArrayLike) -> NDArray[np.float64]:
    """Speed change that took a node from one mass to another [m/s]; broadcastable, masses above 0 [kg]."""
    before = np.asarray(mass_before_kg, dtype=np.float64)
    share = (before - np.asarray(mass_after_kg, dtype=np.float64)) / before
    return np.asarray(-np.asarray(isp_s, dtype=np.float64) * G0_M_S2 * np.log1p(-share))
