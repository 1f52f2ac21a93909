"""The equilibrium reference: a libration point of the circular model, displaced by the mean pressure."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import expm

from farhold.domain.epoch import Epoch
from farhold.dynamics.circular import SUN_EARTH, ThreeBody, libration_point, lightness
from farhold.dynamics.frames import axes_angle_rad, barycentre_longitude_rad, rotating_to_icrf, turn_about_n
from farhold.dynamics.trajectory import Primaries
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

    def primaries_m(self) -> Primaries:
        """Vectors from Sun and from Earth-Moon barycentre to the reference, in R, T, N [m]."""
        to_axes = turn_about_n(-axes_angle_rad(self.point))
        mu, length = self.system.mu, self.system.length_m
        sun = self.position_m + np.array([mu * length, 0.0, 0.0])
        earth = self.position_m - np.array([(1.0 - mu) * length, 0.0, 0.0])
        return to_axes @ sun, to_axes @ earth

    def _gradient(self) -> NDArray[np.float64]:
        """Gravity gradient (3, 3) at the reference, in units of the squared rate."""
        total = np.zeros((3, 3))
        r1, r2 = self.primaries_m()
        for gm, rho in ((self.gm_m3_s2[0], r1), (self.gm_m3_s2[2], r2)):
            size = float(np.linalg.norm(rho))
            unit = rho / size
            total += gm / size**3 * (3.0 * np.outer(unit, unit) - np.eye(3))
        return total / self.rate_rad_s**2

    def _plant(self) -> NDArray[np.float64]:
        """Matrix (6, 6) of the linear deviation motion, times in units of 1/n."""
        a = np.zeros((6, 6))
        a[:3, 3:] = np.eye(3)
        a[3:, :3] = self._gradient() + np.diag([1.0, 1.0, 0.0])
        a[3, 4], a[4, 3] = 2.0, -2.0
        return a

    def transition(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """State-transition matrix (6, 6) of deviations, rotating axes, SI (matrix exponential)."""
        phi: NDArray[np.float64] = expm(self._plant() * (self.rate_rad_s * (to_s - from_s)))
        phi[:3, 3:] /= self.rate_rad_s
        phi[3:, :3] *= self.rate_rad_s
        return phi

    def pressure_response(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """Deviation (6,) at `to_s` caused by a unit of beta beyond the reference's, SI."""
        rate = self.rate_rad_s
        a = np.zeros((7, 7))
        a[:6, :6] = self._plant()
        a[3:6, 6] = self.pressure_field(np.zeros((1, 3)))[0] / rate**2
        response: NDArray[np.float64] = expm(a * (rate * (to_s - from_s)))[:6, 6]
        response[3:] *= rate
        return response

    def field(self, position_m: ArrayLike, rule: str) -> NDArray[np.float64]:
        """Acceleration (n, 3) felt at places (n, 3) that are kept under `rule` [m/s2].

        Exact difference of attraction, plus the centrifugal part for `rotating` slots; zero for `natural`.
        """
        delta = np.asarray(position_m, dtype=float)
        if rule == "natural":
            return np.zeros_like(delta)
        total = np.zeros_like(delta)
        r1, r2 = self.primaries_m()
        for gm, rho in ((self.gm_m3_s2[0], r1), (self.gm_m3_s2[2], r2)):
            rho2 = float(rho @ rho)
            q = np.sum(delta * (delta + 2.0 * rho), axis=1) / rho2
            w = (1.0 + q) ** 1.5
            f = (q * (3.0 + q * (3.0 + q)) / (w + w * w))[:, None]
            total -= gm / rho2**1.5 * (delta * (1.0 - f) - rho * f)
        if rule == "rotating":
            total += self.rate_rad_s**2 * delta * np.array([1.0, 1.0, 0.0])
        return total

    def pressure_field(self, position_m: ArrayLike) -> NDArray[np.float64]:
        """Acceleration (n, 3) per unit of beta at places (n, 3), away from the Sun [m/s2]."""
        away = np.asarray(position_m, dtype=float) + self.primaries_m()[0]
        push: NDArray[np.float64] = self.gm_m3_s2[1] * away / np.linalg.norm(away, axis=1, keepdims=True) ** 3
        return push

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
