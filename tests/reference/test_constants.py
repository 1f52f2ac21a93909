"""Constants we hold against published ones (check values C1 to C15)."""

import math

import pytest
from astropy import constants as astropy_constants

from farhold import constants
from farhold.domain.epoch import YEAR_S
from farhold.dynamics.circular import SUN_EARTH, lightness
from farhold.study.reference import reference

# IAU 2009 / NSFA current best estimates, Luzum et al. 2011, CMDA 110, 293 (from memory)
SUN_OVER_EARTH = 332946.0487
MOON_OVER_EARTH = 1.23000371e-2


@pytest.mark.parametrize(
    ("held", "published"),
    [
        (constants.AU, 149_597_870_700.0),  # C4: IAU 2012 resolution B2, exact
        (constants.SPEED_OF_LIGHT, 299_792_458.0),  # C5: definition of the metre, exact
        (constants.SOLAR_IRRADIANCE, 1361.0),  # C3: IAU 2015 resolution B3, nominal, exact
        (constants.SUN_RADIUS, 6.957e8),  # IAU 2015 resolution B3, nominal, exact
        (constants.EARTH_RADIUS, 6.3781e6),  # IAU 2015 resolution B3, nominal equatorial, exact
        (constants.GM_SUN, 1.32712440041e20),  # C7: IAU 2009, TDB-compatible (from memory)
        (constants.G0, 9.80665),  # R1: 3rd CGPM 1901, exact
    ],
)
def test_constant_is_the_published_one(held, published):
    assert held.value == published
    assert held.source


@pytest.mark.parametrize(
    ("held", "name"),
    [(constants.AU, "au"), (constants.SPEED_OF_LIGHT, "c"), (constants.SUN_RADIUS, "R_sun")],
)
def test_constant_is_that_of_astropy(held, name):
    assert held.value == getattr(astropy_constants, name).si.value


@pytest.mark.parametrize(
    ("held", "name", "tolerance"),
    [
        # C1, C2: the nominal values are best estimates rounded to 8 and 7 digits
        (constants.GM_SUN.value, "GM_sun", 5e-9),
        (constants.GM_EARTH_MOON.value / (1.0 + MOON_OVER_EARTH), "GM_earth", 2e-7),
    ],
)
def test_gravitational_parameter_rounds_to_the_nominal_one(held, name, tolerance):
    assert held == pytest.approx(getattr(astropy_constants, name).si.value, rel=tolerance)


def test_pressure_at_one_astronomical_unit_is_the_nominal_irradiance_over_the_speed_of_light():
    # C6: 1361 / 299792458 = 4.53980733564685e-6 N/m2 (closed form, extended precision)
    pressure_n_m2 = lightness(1.0) * constants.GM_SUN.value / constants.AU.value**2
    assert pressure_n_m2 == pytest.approx(4.53980733564685e-6, rel=1e-14)


def test_nominal_luminosity_gives_the_irradiance_to_the_roundings_of_both():
    # IAU 2015 resolution B3: L = 3.828e26 W over 4 pi AU2 is 1361.166 W/m2; both nominals are rounded
    irradiance = 3.828e26 / (4.0 * math.pi * constants.AU.value**2)
    assert constants.SOLAR_IRRADIANCE.value == pytest.approx(irradiance, rel=1.3e-4)


def test_constants_agree_with_those_of_de421():
    # C9: DE421, Folkner, Williams and Boggs 2009, IPN Progress Report 42-178; its unit is its own AU, which
    # differs from the IAU's by 2e-12, and ours are rounded to 1e-9 (GM) and 1e-8 (mass ratio)
    de421 = pytest.importorskip("de421")
    jplephem = pytest.importorskip("jplephem")
    eph = jplephem.Ephemeris(de421)
    au_m, ratio = eph.AU * 1e3, eph.EMRAT
    unit = au_m**3 / 86400.0**2
    assert au_m == pytest.approx(constants.AU.value, rel=3e-12)
    assert eph.GMS * unit == pytest.approx(constants.GM_SUN.value, rel=5e-12)
    assert eph.GMB * unit == pytest.approx(constants.GM_EARTH_MOON.value, rel=2e-9)
    assert ratio == pytest.approx(constants.MASS_RATIO_EARTH_MOON.value, abs=5e-6)


def test_mass_of_the_earth_and_moon_agrees_with_the_best_estimates():
    # C10, C11: 328900.5596 from NSFA, 328900.56 in the IERS conventions 2010 (from memory); the estimates
    # themselves differ by 1e-8
    published = SUN_OVER_EARTH / (1.0 + MOON_OVER_EARTH)
    ours = constants.GM_SUN.value / constants.GM_EARTH_MOON.value
    assert ours == pytest.approx(published, rel=1e-8)
    assert ours == pytest.approx(328900.56, rel=1e-8)


@pytest.mark.parametrize("published", [3.040423405629e-6, 3.04042340992595e-6, 3.040423398444176e-6])
def test_mass_ratio_is_within_the_spread_of_published_ones(published):
    # C12: NSFA, DE421, and that of Jorba and Masdemont 1999, Physica D 132, 189; they spread by 4e-9
    assert SUN_EARTH.mu == pytest.approx(published, rel=4e-9)


def test_mass_ratio_includes_the_moon_and_is_no_catalogue_constant():
    # C13: without the Moon 3.00348e-6; C14: a catalogue of periodic orbits carries 3.0542e-6, which is no
    # mass ratio of the Earth and Moon
    assert SUN_EARTH.mu / 3.0034805952e-6 == pytest.approx(1.0 + MOON_OVER_EARTH, rel=1e-6)
    assert abs(SUN_EARTH.mu / 3.0542e-6 - 1.0) > 4e-3


def test_mean_motion_and_period_of_the_model():
    # C15: Kepler's third law for the Sun with Earth and Moon at 1 AU (closed form); the printed digits
    assert SUN_EARTH.rate_rad_s == pytest.approx(1.9909867015e-7, rel=5e-11)
    assert 1.0 / SUN_EARTH.rate_rad_s == pytest.approx(5022635.25544, rel=2e-12)
    assert SUN_EARTH.speed_m_s == pytest.approx(29784.7371, abs=5e-5)
    assert 2.0 * math.pi / SUN_EARTH.rate_rad_s / 86400.0 == pytest.approx(365.2563431, abs=5e-8)


def test_period_without_the_planet_is_the_gaussian_year():
    # C15: 2 pi / k = 365.2568983263281 d, k = 0.01720209895 exactly; the IAU 2009 GM and AU reproduce k2 to
    # 4e-12 (the AU of 2012 was chosen to), so the year to 2e-12
    days = 2.0 * math.pi * math.sqrt(constants.AU.value**3 / constants.GM_SUN.value) / 86400.0
    assert days == pytest.approx(365.2568983263281, rel=5e-11)


def test_year_is_julian():
    assert YEAR_S == 365.25 * 86400.0


@pytest.mark.parametrize("point", ["L1", "L2", "L3", "L4", "L5"])
def test_references_carry_the_computed_constants(point):
    motion = reference(point).motion
    assert motion.rate_rad_s == SUN_EARTH.rate_rad_s
    assert motion.gm_m3_s2 == (constants.GM_SUN.value, constants.GM_SUN.value, constants.GM_EARTH_MOON.value)
