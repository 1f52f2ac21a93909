"""The equilibrium reference: a libration point of the circular model, displaced by the mean pressure."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import expm

from farhold.domain.epoch import Epoch
from farhold.dynamics.attraction import difference_field, plant, pressure_push
from farhold.dynamics.circular import SUN_EARTH, ThreeBody, libration_point, lightness
from farhold.dynamics.frames import axes_angle_rad, barycentre_longitude_rad, rotating_to_icrf, turn_about_n
from farhold.dynamics.trajectory import ArcMotion, Primaries
from farhold.errors import DomainError, Fault

__all__ = ["Equilibrium"]


@dataclass(frozen=True, slots=True, eq=False)
class Equilibrium:
    """A displaced libration point; see :class:`farhold.dynamics.trajectory.Reference` for the methods.

    Attributes
    ----------
    point : "L1" to "L5"
    epoch : Epoch of time zero
    pressure_area_m2_kg : C_R A/m of the reference [m2/kg]
    system : the three-body problem
    position_m : (3,) place in the barycentric rotating frame [m]
    longitude_rad : ecliptic longitude of the Earth-Moon barycentre at `epoch`
    """

    point: str
    epoch: Epoch
    pressure_area_m2_kg: float
    system: ThreeBody
    position_m: NDArray[np.float64]
    longitude_rad: float
    kind: str = "equilibrium"
    model: str = "circular"
    period_s: float | None = None

    @classmethod
    def at(
        cls, *, point: str, epoch: Epoch, pressure_area_m2_kg: float, system: ThreeBody = SUN_EARTH
    ) -> Equilibrium:
        """Place the reference.

        Raises
        ------
        DomainError
            Unknown point, or a pressure area that is negative or not finite.
        """
        if not (pressure_area_m2_kg >= 0.0 and math.isfinite(pressure_area_m2_kg)):
            raise DomainError(
                Fault("reference.pressure_area", f"got {pressure_area_m2_kg!r} m2/kg", "0 m2/kg or above")
            )
        place = libration_point(point, system.mu, lightness(pressure_area_m2_kg)) * system.length_m
        return cls(point, epoch, pressure_area_m2_kg, system, place, barycentre_longitude_rad(epoch))

    @property
    def rate_rad_s(self) -> float:
        """Rate of the rotating axes about N [rad/s]."""
        return self.system.rate_rad_s

    @property
    def gm_m3_s2(self) -> tuple[float, float, float]:
        """GM of the Sun less the reference's pressure, of the Sun bare, of Earth and Moon [m3/s2]."""
        bare = self.system.gm1_m3_s2
        return bare * (1.0 - lightness(self.pressure_area_m2_kg)), bare, self.system.gm2_m3_s2

    @property
    def stability_index(self) -> float | None:
        """None: a point has no period."""
        return None

    @property
    def autonomous(self) -> bool:
        """True: a point stands still."""
        return True

    @property
    def span_s(self) -> tuple[float, float] | None:
        """None: good at all times."""
        return None

    @property
    def provenance(self) -> dict[str, Any]:
        """What the reference was made from."""
        return {
            "kind": self.kind,
            "point": self.point,
            "options": {},
            "mu": self.system.mu,
            "beta": lightness(self.pressure_area_m2_kg),
            "position": [float(x) for x in self.position_m / self.system.length_m],
        }

    def motion(self, times_s: ArrayLike) -> NDArray[np.float64]:
        """States (k, 6) relative to the geometric libration point: the displacement by pressure, at rest."""
        bare = libration_point(self.point, self.system.mu) * self.system.length_m
        states = np.zeros((np.size(times_s), 6))
        states[:, :3] = turn_about_n(-axes_angle_rad(self.point)) @ (self.position_m - bare)
        return states

    def primaries_m(self, t_s: float = 0.0) -> Primaries:  # noqa: ARG002
        """Vectors from Sun and from Earth-Moon barycentre to the reference, in R, T, N [m]."""
        to_axes = turn_about_n(-axes_angle_rad(self.point))
        mu, length = self.system.mu, self.system.length_m
        sun = self.position_m + np.array([mu * length, 0.0, 0.0])
        earth = self.position_m - np.array([(1.0 - mu) * length, 0.0, 0.0])
        return to_axes @ sun, to_axes @ earth

    def primaries_at(self, times_s: ArrayLike) -> Primaries:
        """As `primaries_m` at k times: (k, 3), (k, 3), all alike."""
        r1, r2 = self.primaries_m()
        return np.tile(r1, (np.size(times_s), 1)), np.tile(r2, (np.size(times_s), 1))

    def _plant(self) -> NDArray[np.float64]:
        """Matrix (6, 6) of the linear deviation motion, times in units of 1/n."""
        gm = self.gm_m3_s2
        return plant(self.primaries_m(), (gm[0], gm[2]), self.rate_rad_s)

    def transition(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """State-transition matrix (6, 6) of deviations, rotating axes, SI (matrix exponential)."""
        phi: NDArray[np.float64] = expm(self._plant() * (self.rate_rad_s * (to_s - from_s)))
        phi[:3, 3:] /= self.rate_rad_s
        phi[3:, :3] *= self.rate_rad_s
        return phi

    def pressure_response(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """Deviation (6,) at `to_s` caused by a unit of beta beyond the reference's, SI."""
        response: NDArray[np.float64] = _flow(self, (to_s - from_s,))[1][0].copy()
        return response

    def arc_motion(self, from_s: float, taus_s: ArrayLike) -> ArcMotion:  # noqa: ARG002
        """Primaries (k, 3), (k, 3), transitions (k, 6, 6), pressure responses (k, 6) after `taus_s`, SI."""
        taus = np.atleast_1d(np.asarray(taus_s, dtype=float))
        r1, r2 = self.primaries_at(taus)
        phi, response = _flow(self, tuple(taus.tolist()))
        return r1, r2, phi.copy(), response.copy()

    def field(self, position_m: ArrayLike, rule: str, t_s: float = 0.0) -> NDArray[np.float64]:  # noqa: ARG002
        """Acceleration (n, 3) felt at places (n, 3) that are kept under `rule` [m/s2].

        Exact difference of attraction, plus the centrifugal part for `rotating` slots; zero for `natural`.
        """
        gm = self.gm_m3_s2
        return difference_field(position_m, rule, self.primaries_m(), (gm[0], gm[2]), self.rate_rad_s)

    def pressure_field(self, position_m: ArrayLike, t_s: float = 0.0) -> NDArray[np.float64]:  # noqa: ARG002
        """Acceleration (n, 3) per unit of beta at places (n, 3), away from the Sun [m/s2]."""
        return pressure_push(position_m, self.primaries_m()[0], self.gm_m3_s2[1])

    def axes_to_icrf(self, t_s: float) -> NDArray[np.float64]:
        """Matrix (3, 3) from rotating axes to the ICRF at `t_s`."""
        return rotating_to_icrf(self.longitude_rad + self.rate_rad_s * t_s, axes_angle_rad(self.point))

    def fastest_rate_1_s(self) -> float:
        """Fastest oscillation rate of deviations [rad/s]."""
        return float(np.abs(np.linalg.eigvals(self._plant()).imag).max()) * self.rate_rad_s

    def unstable_rate_1_s(self) -> float:
        """Largest growth rate of deviations [1/s]; 0 where they stay bounded."""
        growth = float(np.linalg.eigvals(self._plant()).real.max())
        return growth * self.rate_rad_s if growth > 1e-6 else 0.0


@lru_cache(maxsize=256)
def _flow(reference: Equilibrium, taus_s: tuple[float, ...]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Transition matrices (k, 6, 6) and pressure responses (k, 6) after each of `taus_s`, SI."""
    rate = reference.rate_rad_s
    a = np.zeros((7, 7))
    a[:6, :6] = reference._plant()
    a[3:6, 6] = reference.pressure_field(np.zeros((1, 3)))[0] / rate**2
    grown = expm(a * (rate * np.array(taus_s))[:, None, None])
    phi, response = grown[:, :6, :6].copy(), grown[:, :6, 6].copy()
    phi[:, :3, 3:] /= rate
    phi[:, 3:, :3] *= rate
    response[:, 3:] *= rate
    return phi, response
