"""What every reference trajectory offers, whatever its kind or model."""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import Epoch

__all__ = ["ArcMotion", "Primaries", "Reference"]

Primaries = tuple[NDArray[np.float64], NDArray[np.float64]]
ArcMotion = tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]


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

    @property
    def stability_index(self) -> float | None:
        """(|l| + 1/|l|) / 2 of the largest multiplier l over one period; None where there is no period."""

    @property
    def autonomous(self) -> bool:
        """Whether the reference stands still in rotating axes, so that nothing depends on the epoch."""

    @property
    def span_s(self) -> tuple[float, float] | None:
        """First and last time it is known for [s]; None where all times are good."""

    @property
    def provenance(self) -> dict[str, Any]:
        """What it was made from: kind, options, mu, beta, initial state, closure, iterations."""

    def motion(self, times_s: ArrayLike) -> NDArray[np.float64]:
        """States (k, 6) of the reference itself, relative to the geometric libration point, R, T, N, SI.

        This and all methods below raise DomainError for a time outside `span_s`.
        """

    def primaries_m(self, t_s: float = 0.0) -> Primaries:
        """Vectors (3,), (3,) from Sun and from Earth-Moon barycentre to the reference, rotating axes [m]."""

    def primaries_at(self, times_s: ArrayLike) -> Primaries:
        """As `primaries_m` at k times: (k, 3), (k, 3)."""

    def transition(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """State-transition matrix (6, 6) of deviations, rotating axes, SI."""

    def pressure_response(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """Deviation (6,) at `to_s` caused by a unit of beta beyond the reference's since `from_s`, SI."""

    def arc_motion(self, from_s: float, taus_s: ArrayLike) -> ArcMotion:
        """All that the linear motion along one arc needs, at k times `from_s` + `taus_s`.

        Returns the vectors (k, 3), (k, 3) of `primaries_at`, the transition matrices (k, 6, 6) and the pressure
        responses (k, 6) from `from_s` to each of the times.
        """

    def field(self, position_m: ArrayLike, rule: str, t_s: float = 0.0) -> NDArray[np.float64]:
        """Acceleration (n, 3) that a place (n, 3) kept under `rule` must be given against, rotating axes."""

    def pressure_field(self, position_m: ArrayLike, t_s: float = 0.0) -> NDArray[np.float64]:
        """Acceleration (n, 3) per unit of beta at places (n, 3), rotating axes [m/s2]."""

    def axes_to_icrf(self, t_s: float) -> NDArray[np.float64]:
        """Matrix (3, 3) from rotating axes to the ICRF at `t_s`."""

    def fastest_rate_1_s(self) -> float:
        """Fastest oscillation rate of deviations [rad/s]."""

    def unstable_rate_1_s(self) -> float:
        """Largest growth rate of deviations [1/s]; 0 where they stay bounded."""
