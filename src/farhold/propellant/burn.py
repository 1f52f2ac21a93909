"""Burns of finite length: how long, where their middle lies, what their length costs."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.propellant.rocket import G0_M_S2, propellant_kg

__all__ = ["burn_s", "centroid_s", "finite_loss_share"]

_SERIES_BELOW = 0.1


def burn_s(mass_kg: ArrayLike, dv_m_s: ArrayLike, isp_s: ArrayLike, thrust_n: ArrayLike) -> NDArray[np.float64]:
    """Length of a burn at constant thrust [s].

    Parameters
    ----------
    mass_kg, dv_m_s, isp_s, thrust_n : broadcastable
        Mass before the burn [kg], speed change [m/s], specific impulse [s] and thrust [N], the last two both
        nominal or both along the wanted direction: the mass flow is their quotient.

    Returns
    -------
    broadcast shape, [s]
    """
    speed_m_s = np.asarray(isp_s, dtype=np.float64) * G0_M_S2
    return np.asarray(propellant_kg(mass_kg, dv_m_s, isp_s) * speed_m_s / np.asarray(thrust_n, dtype=np.float64))


def centroid_s(burn_s: ArrayLike, dv_m_s: ArrayLike, isp_s: ArrayLike) -> NDArray[np.float64]:
    """Time from ignition to the instant at which one impulse does what the burn does [s].

    t_c = t_b (1/x + 1/ln(1-x)) with x = 1 - exp(-dv / (isp g0)): the mean of the time over the acceleration
    of a constant thrust, to first order in the gravity gradient. Below an exponent of 0.1 by its series
    1/2 + u/12 - u^3/720 + u^5/30240, where the closed form would cancel.

    Parameters
    ----------
    burn_s, dv_m_s, isp_s : broadcastable
        Length of the burn [s], speed change [m/s], specific impulse [s].

    Returns
    -------
    broadcast shape, [s]
    """
    u = np.asarray(dv_m_s, dtype=np.float64) / (np.asarray(isp_s, dtype=np.float64) * G0_M_S2)
    small = np.abs(u) < _SERIES_BELOW
    series = 0.5 + u / 12.0 - u**3 / 720.0 + u**5 / 30240.0
    safe = np.where(small, 1.0, u)
    closed = -1.0 / np.expm1(-safe) - 1.0 / safe
    return np.asarray(np.asarray(burn_s, dtype=np.float64) * np.where(small, series, closed))


def finite_loss_share(mean_motion_rad_s: ArrayLike, burn_s: ArrayLike) -> NDArray[np.float64]:
    """Share of the speed change lost because a burn takes time: (n t_b)^2 / 24.

    Source: H. M. Robbins, "An analytical study of the impulsive approximation", AIAA Journal 4 (1966) 1417
    (attribution from memory); fixed inertial direction, circular orbit, n the mean motion [rad/s], burn [s].
    """
    arc_rad = np.asarray(mean_motion_rad_s, dtype=np.float64) * np.asarray(burn_s, dtype=np.float64)
    return np.asarray(arc_rad**2 / 24.0)
