"""Physical constants: one record per number, with value, unit and source."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = [
    "AU",
    "EARTH_RADIUS",
    "G0",
    "GM_EARTH_MOON",
    "GM_SUN",
    "MASS_RATIO_EARTH_MOON",
    "OBLIQUITY_J2000",
    "SOLAR_IRRADIANCE",
    "SPEED_OF_LIGHT",
    "SUN_RADIUS",
    "Constant",
]


@dataclass(frozen=True, slots=True)
class Constant:
    """A number with its unit and the document it was taken from."""

    value: float
    unit: str
    source: str


AU = Constant(149_597_870_700.0, "m", "IAU 2012 Resolution B2, exact")
GM_SUN = Constant(1.32712440041e20, "m3/s2", "IAU 2009 system of constants, TDB-compatible (from memory)")
GM_EARTH_MOON = Constant(4.03503236e14, "m3/s2", "sum of Earth and Moon, DE421 constants rounded to 1e-9")
MASS_RATIO_EARTH_MOON = Constant(81.30057, "1", "DE421 EMRAT 81.3005690699153, rounded")
SOLAR_IRRADIANCE = Constant(1361.0, "W/m2", "nominal total solar irradiance, IAU 2015 Resolution B3")
SPEED_OF_LIGHT = Constant(299_792_458.0, "m/s", "SI definition, exact")
G0 = Constant(9.80665, "m/s2", "standard acceleration, 3rd CGPM 1901 and ISO 80000-3, exact")
OBLIQUITY_J2000 = Constant(84381.406, "arcsec", "IAU 2006 precession, Capitaine et al. 2003 (from memory)")
SUN_RADIUS = Constant(6.957e8, "m", "nominal solar radius, IAU 2015 Resolution B3")
EARTH_RADIUS = Constant(6.3781e6, "m", "nominal equatorial Earth radius, IAU 2015 Resolution B3")
