"""How long the usable propellant lasts at a steady demand."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.margins import Margins
from farhold.propellant.rocket import G0_M_S2, dv_of

__all__ = ["LIFE_CAP_YEARS", "LifeYears", "life_years"]

LIFE_CAP_YEARS = 100.0


@dataclass(frozen=True, slots=True, eq=False)
class LifeYears:
    """Life per node: `years` (n,) of 365.25 d, at most 100; `capped` (n,) bool, where 100 is only the cap."""

    years: NDArray[np.float64]
    capped: NDArray[np.bool_]


def life_years(
    mass_kg: ArrayLike,
    usable_kg: ArrayLike,
    isp_s: ArrayLike,
    holding_m_s_yr: ArrayLike,
    margins: Margins,
    *,
    attitude_m_s_yr: ArrayLike = 0.0,
    attitude_isp_s: ArrayLike | None = None,
    leak_kg_yr: ArrayLike = 0.0,
) -> LifeYears:
    """Years until the usable propellant is gone.

    The speed change left in the usable propellant over the yearly demand: holding and attitude with their
    margins, attitude scaled to the main thruster's specific impulse, and the leak as the speed change that
    its mass would have given at the mean mass.

    Parameters
    ----------
    mass_kg, usable_kg, isp_s, holding_m_s_yr : broadcastable
        Mass now [kg], usable propellant [kg] (less than the mass), effective specific impulse [s], price of
        holding the present slot [m/s per year].
    margins : Margins
    attitude_m_s_yr, attitude_isp_s, leak_kg_yr : broadcastable
        Attitude demand [m/s per year], its thruster's specific impulse [s] (None: the main one), leak
        [kg per year].

    Returns
    -------
    LifeYears
        0 where nothing is usable; the cap, marked so, where nothing is asked or the life is longer.
    """
    mass, usable, isp, holding, attitude, leak = np.broadcast_arrays(
        *(
            np.asarray(value, dtype=np.float64)
            for value in (mass_kg, usable_kg, isp_s, holding_m_s_yr, attitude_m_s_yr, leak_kg_yr)
        )
    )
    ratio = 1.0 if attitude_isp_s is None else isp / np.asarray(attitude_isp_s, dtype=np.float64)
    some = np.maximum(usable, 0.0)
    left_m_s = dv_of(mass, mass - some, isp)
    leak_m_s = np.zeros_like(mass)
    np.divide(isp * G0_M_S2 * leak, mass - some / 2.0, out=leak_m_s, where=leak > 0)
    demand_m_s = holding * (1.0 + margins.manoeuvre) + attitude * (1.0 + margins.attitude) * ratio + leak_m_s
    within = left_m_s < LIFE_CAP_YEARS * demand_m_s
    years = np.full(mass.shape, LIFE_CAP_YEARS)
    np.divide(left_m_s, demand_m_s, out=years, where=within)
    empty = usable <= 0.0
    return LifeYears(np.where(empty, 0.0, years), np.asarray(~within & ~empty))
