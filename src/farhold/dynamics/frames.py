"""Axes: rotating R, T, N; the barycentric rotating frame of the circular model; inertial (ICRF).

R points from the Sun to the geometric libration point (never to the one displaced by pressure), N along the
orbit normal, T = N x R. In the circular model they stand still in the rotating frame.
"""

from __future__ import annotations

import math

import erfa
import numpy as np
from numpy.typing import NDArray

from farhold.constants import AU, MASS_RATIO_EARTH_MOON, OBLIQUITY_J2000
from farhold.domain.epoch import DAY_S, Epoch

__all__ = [
    "axes_angle_rad",
    "barycentre_longitude_rad",
    "ecliptic_to_icrf",
    "rotating_to_icrf",
    "turn_about_n",
]

_ANGLES_DEG = {"L1": 0.0, "L2": 0.0, "L3": 180.0, "L4": 60.0, "L5": -60.0}
_J2000 = Epoch.from_iso("2000-01-01T12:00:00")
_J2000_JD = 2451545.0


def axes_angle_rad(point: str) -> float:
    """Angle from the Sun-to-barycentre line forward to R, for a libration point "L1" to "L5" [rad]."""
    return math.radians(_ANGLES_DEG[point])


def turn_about_n(angle_rad: float) -> NDArray[np.float64]:
    """Matrix (3, 3) that turns a vector forward about N by `angle_rad`."""
    c, s = math.cos(angle_rad), math.sin(angle_rad)
    return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])


def ecliptic_to_icrf() -> NDArray[np.float64]:
    """Matrix (3, 3) from the J2000 ecliptic to the ICRF; the frame bias of 23 mas is left out."""
    obliquity = math.radians(OBLIQUITY_J2000.value / 3600.0)
    c, s = math.cos(obliquity), math.sin(obliquity)
    return np.array([[1.0, 0.0, 0.0], [0.0, c, -s], [0.0, s, c]])


def barycentre_longitude_rad(epoch: Epoch) -> float:
    """True longitude of the Earth-Moon barycentre seen from the Sun, J2000 ecliptic, at `epoch` [rad].

    Earth from ERFA's epv00 and the Moon from its moon98; ERFA's own barycentre routine (plan94) is coarser
    and is not used. Agreement with DE421 is tested.
    """
    days = epoch.seconds_since(_J2000) / DAY_S
    heliocentric, _ = erfa.epv00(_J2000_JD, days)
    moon = erfa.moon98(_J2000_JD, days)
    barycentre_au = heliocentric["p"] + moon["p"] / (1.0 + MASS_RATIO_EARTH_MOON.value)
    x, y, _ = ecliptic_to_icrf().T @ (np.asarray(barycentre_au) * AU.value)
    return math.atan2(y, x)


def rotating_to_icrf(longitude_rad: float, angle_rad: float) -> NDArray[np.float64]:
    """Matrix (3, 3) from R, T, N to the ICRF: barycentre at `longitude_rad`, R `angle_rad` ahead of it."""
    return ecliptic_to_icrf() @ turn_about_n(longitude_rad + angle_rad)
