"""What every reference trajectory offers, whatever its kind or model."""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import Epoch

__all__ = ["Primaries", "Reference"]

Primaries = tuple[NDArray[np.float64], NDArray[np.float64]]


class Reference(Protocol):
    """A trajectory that formations are defined about; times are seconds from `epoch`."""

    def __hash__(self) -> int:
        """References are frozen; calibrations are kept per reference."""

    @property
    def point(self) -> str:
        """Libration point, "L1" to "L5"."""

    @property
    def kind(self) -> str:
        """Kind of reference, such as "equilibrium"."""

    @property
    def model(self) -> str:
        """Dynamical model, such as "circular"."""

    @property
    def epoch(self) -> Epoch:
        """Epoch of time zero."""

    @property
    def pressure_area_m2_kg(self) -> float:
        """C_R A/m that the reference itself carries [m2/kg]."""

    @property
    def rate_rad_s(self) -> float:
        """Rate of the rotating axes about N [rad/s]."""

    @property
    def gm_m3_s2(self) -> tuple[float, float, float]:
        """GM of the Sun less the reference's pressure, of the Sun bare, of Earth and Moon [m3/s2]."""

    @property
    def period_s(self) -> float | None:
        """Period where the reference is periodic, None where it is not or stands still [s]."""

    def primaries_m(self) -> Primaries:
        """Vectors (3,), (3,) from Sun and from Earth-Moon barycentre to the reference, rotating axes [m]."""

    def transition(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """State-transition matrix (6, 6) of deviations, rotating axes, SI."""

    def pressure_response(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """Deviation (6,) at `to_s` caused by a unit of beta beyond the reference's since `from_s`, SI."""

    def field(self, position_m: ArrayLike, rule: str) -> NDArray[np.float64]:
        """Acceleration (n, 3) that a place (n, 3) kept under `rule` must be given against, rotating axes."""

    def pressure_field(self, position_m: ArrayLike) -> NDArray[np.float64]:
        """Acceleration (n, 3) per unit of beta at places (n, 3), rotating axes [m/s2]."""

    def axes_to_icrf(self, t_s: float) -> NDArray[np.float64]:
        """Matrix (3, 3) from rotating axes to the ICRF at `t_s`."""

    def fastest_rate_1_s(self) -> float:
        """Fastest oscillation rate of deviations [rad/s]."""

    def unstable_rate_1_s(self) -> float:
        """Largest growth rate of deviations [1/s]; 0 where they stay bounded."""
