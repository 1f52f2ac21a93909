"""Reserves held back from the tank and margins put on prices, each counted once."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.margins import Margins
from farhold.propellant.rocket import G0_M_S2, propellant_kg

__all__ = ["affordable", "margin_kg", "reserve_kg", "usable_kg"]


def reserve_kg(
    dry_mass_kg: ArrayLike, loaded_kg: ArrayLike, isp_s: ArrayLike, margins: Margins
) -> NDArray[np.float64]:
    """Propellant that no plan may touch: the residual and the contingency.

    The residual is its share of the load. The contingency is what its speed change needs at the end of life,
    when the node weighs its dry mass and the residual.

    Parameters
    ----------
    dry_mass_kg, loaded_kg, isp_s : broadcastable
        Mass without propellant [kg], propellant at load [kg], effective specific impulse [s].
    margins : Margins

    Returns
    -------
    broadcast shape, [kg]
    """
    residual_kg = margins.residual * np.asarray(loaded_kg, dtype=np.float64)
    speed_m_s = np.asarray(isp_s, dtype=np.float64) * G0_M_S2
    end_kg = np.asarray(dry_mass_kg, dtype=np.float64) + residual_kg
    return np.asarray(residual_kg + end_kg * np.expm1(margins.contingency_m_s / speed_m_s))


def usable_kg(
    mass_kg: ArrayLike, dry_mass_kg: ArrayLike, loaded_kg: ArrayLike, isp_s: ArrayLike, margins: Margins
) -> NDArray[np.float64]:
    """Propellant that plans may spend: mass less dry mass less the reserve.

    Negative where a node already lives on its reserve; it is not clipped, so that the shortfall shows.
    Arguments as :func:`reserve_kg`, with the mass now [kg] first.
    """
    aboard_kg = np.asarray(mass_kg, dtype=np.float64) - np.asarray(dry_mass_kg, dtype=np.float64)
    return np.asarray(aboard_kg - reserve_kg(dry_mass_kg, loaded_kg, isp_s, margins))


def margin_kg(mass_kg: ArrayLike, dv_m_s: ArrayLike, isp_s: ArrayLike, share: float) -> NDArray[np.float64]:
    """Propellant that a margin of `share` on the speed change adds to a burn [kg]; nothing adds nothing.

    Arguments as :func:`farhold.propellant.rocket.propellant_kg`; 5 % is a `share` of 0.05.
    """
    dv = np.asarray(dv_m_s, dtype=np.float64)
    after_kg = np.asarray(mass_kg, dtype=np.float64) - propellant_kg(mass_kg, dv, isp_s)
    return propellant_kg(after_kg, dv * share, isp_s)


def affordable(
    mass_kg: ArrayLike, dv_m_s: ArrayLike, isp_s: ArrayLike, share: float, usable_kg: ArrayLike
) -> NDArray[np.bool_]:
    """Whether a burn with its margin fits in the usable propellant.

    A burn of nothing is always affordable, also for a node that already lives on its reserve: it would
    otherwise forbid every change that leaves it where it is.

    Arguments as :func:`margin_kg`, then the usable propellant [kg]; returns bool of the broadcast shape.
    """
    dv = np.asarray(dv_m_s, dtype=np.float64)
    need_kg = propellant_kg(mass_kg, dv * (1.0 + share), isp_s)
    return np.asarray((need_kg <= np.asarray(usable_kg, dtype=np.float64)) | (dv == 0.0))
