"""The circular model: Sun and Earth-Moon barycentre on circles, with radiation pressure."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from farhold.constants import AU, GM_EARTH_MOON, GM_SUN, SOLAR_IRRADIANCE, SPEED_OF_LIGHT
from farhold.errors import DomainError, Fault

__all__ = ["POINTS", "SUN_EARTH", "ThreeBody", "libration_point", "lightness"]

POINTS = ("L1", "L2", "L3", "L4", "L5")


@dataclass(frozen=True, slots=True)
class ThreeBody:
    """A circular restricted three-body problem with its scales.

    Attributes
    ----------
    gm1_m3_s2, gm2_m3_s2 : gravitational parameters of the primary and the secondary
    length_m : distance between them
    """

    gm1_m3_s2: float
    gm2_m3_s2: float
    length_m: float

    @property
    def mu(self) -> float:
        """Mass ratio of the secondary to both."""
        return self.gm2_m3_s2 / (self.gm1_m3_s2 + self.gm2_m3_s2)

    @property
    def rate_rad_s(self) -> float:
        """Mean motion n from n2 = GM/a3 [rad/s]."""
        return math.sqrt((self.gm1_m3_s2 + self.gm2_m3_s2) / self.length_m**3)

    @property
    def speed_m_s(self) -> float:
        """Unit of speed, length times rate [m/s]."""
        return self.length_m * self.rate_rad_s

    @property
    def scale(self) -> NDArray[np.float64]:
        """Units of a state, (6,) [m], [m/s]."""
        return np.repeat([self.length_m, self.speed_m_s], 3)


SUN_EARTH = ThreeBody(GM_SUN.value, GM_EARTH_MOON.value, AU.value)


def lightness(pressure_area_m2_kg: float) -> float:
    """Return beta, radiation pressure over the Sun's gravity, for C_R A/m [m2/kg] (McInnes 1999, ch. 2)."""
    pressure_n_m2 = SOLAR_IRRADIANCE.value / SPEED_OF_LIGHT.value
    return pressure_area_m2_kg * pressure_n_m2 * AU.value**2 / GM_SUN.value


def libration_point(point: str, mu: float, beta: float = 0.0) -> NDArray[np.float64]:
    """Place of a libration point, displaced by radiation pressure, in the barycentric rotating frame.

    Parameters
    ----------
    point : "L1" to "L5" (L2 beyond the secondary, L4 ahead of it)
    mu : mass ratio, 0 < mu < 0.5
    beta : radiation pressure over gravity of the primary, 0 <= beta < 0.5

    Returns
    -------
    (3,) nondimensional position; L4/L5 in closed form r1 = (1 - beta)^(1/3), r2 = 1 (Schuerman 1980).

    Raises
    ------
    DomainError
        Unknown point, mu or beta out of range.
    """
    if point not in POINTS:
        raise DomainError(Fault("reference.point", f"got {point!r}", " ".join(POINTS)))
    if not 0.0 < mu < 0.5:
        raise DomainError(Fault("reference.mu", f"got {mu!r}", "above 0 and below 0.5"))
    if not 0.0 <= beta < 0.5:
        raise DomainError(Fault("reference.pressure_area", f"gives beta {beta!r}", "0 <= beta < 0.5"))
    pull = (1.0 - mu) * (1.0 - beta)
    if point in ("L4", "L5"):
        r1 = (1.0 - beta) ** (1.0 / 3.0)
        x = r1 * r1 / 2.0 - mu
        y = math.sqrt(r1 * r1 - (x + mu) ** 2)
        return np.array([x, y if point == "L4" else -y, 0.0])
    if point == "L3":
        r1 = _root(lambda r: -mu - r + pull / r**2 + mu / (1.0 + r) ** 2, 0.5, 1.5)
        return np.array([-mu - r1, 0.0, 0.0])
    side = -1.0 if point == "L1" else 1.0

    def balance(gamma: float) -> float:
        x = 1.0 - mu + side * gamma
        return x - pull / (1.0 + side * gamma) ** 2 - side * mu / gamma**2

    gamma = _root(balance, 1e-6 * (mu / 3.0) ** (1.0 / 3.0), 0.9 if point == "L1" else 1.5)
    return np.array([1.0 - mu + side * gamma, 0.0, 0.0])


def _root(balance: object, low: float, high: float) -> float:
    """Find the zero of `balance` between `low` and `high` to the last digit."""
    return float(brentq(balance, low, high, xtol=1e-300, rtol=8.9e-16, maxiter=500))  # type: ignore[call-overload]
