"""Axes, and where the Earth-Moon barycentre stands, against two ephemerides."""

import math

import numpy as np
import pytest
from astropy.coordinates import get_body_barycentric
from astropy.time import Time

from farhold.domain.epoch import DAY_S, Epoch
from farhold.dynamics.circular import SUN_EARTH
from farhold.dynamics.frames import (
    axes_angle_rad,
    barycentre_longitude_rad,
    ecliptic_to_icrf,
    rotating_to_icrf,
    turn_about_n,
)

EPOCHS = [
    "2000-01-01T12:00:00",
    "2010-06-21T03:04:05",
    "2028-02-29T00:00:00",
    "2035-03-20T00:00:00",
    "2049-11-11T11:11:11",
]
ARCSEC = math.pi / 180.0 / 3600.0
POINTS = ["L1", "L2", "L3", "L4", "L5"]


def longitude(vector):
    x, y, _ = ecliptic_to_icrf().T @ vector
    return math.atan2(y, x)


def difference(a, b):
    return (a - b + math.pi) % (2.0 * math.pi) - math.pi


def julian_date(text):
    return 2451545.0 + Epoch.from_iso(text).seconds_since(Epoch.from_iso("2000-01-01T12:00:00")) / DAY_S


@pytest.mark.parametrize("text", EPOCHS)
def test_longitude_is_that_of_earth_and_moon_weighed_by_mass(text):
    # astropy's built-in Earth, Moon and Sun, weighed here; it and we stand on the same series, so what is left
    # is the time scale (TDB) and rounding
    when = Time(text, scale="tdb")
    earth, moon, sun = (
        get_body_barycentric(body, when, ephemeris="builtin").xyz.to_value("m")
        for body in ("earth", "moon", "sun")
    )
    barycentre = earth + (moon - earth) / (1.0 + 81.30057)
    ours = barycentre_longitude_rad(Epoch.from_iso(text))
    assert abs(difference(ours, longitude(barycentre - sun))) < 0.02 * ARCSEC


@pytest.mark.parametrize("text", EPOCHS)
def test_longitude_agrees_with_de421(text):
    # DE421 (Folkner, Williams and Boggs 2009): the series is within 11 km of such ephemerides for the Earth
    # and 10 arcsec of the Moon, whose 81st part counts; 7 km of 1 AU are 0.01 arcsec
    de421 = pytest.importorskip("de421")
    eph = pytest.importorskip("jplephem").Ephemeris(de421)
    day = julian_date(text)
    heliocentric = (eph.position("earthmoon", day) - eph.position("sun", day)).ravel()
    ours = barycentre_longitude_rad(Epoch.from_iso(text))
    assert abs(difference(ours, longitude(heliocentric))) < 0.05 * ARCSEC


def test_earth_alone_is_not_taken_for_the_barycentre():
    # the barycentre is 4,700 km from the Earth, up to 6 arcsec of longitude
    texts = [f"2035-03-{day:02d}T00:00:00" for day in range(1, 29)]
    when = Time(texts, scale="tdb")
    earth, sun = (
        get_body_barycentric(body, when, ephemeris="builtin").xyz.to_value("m") for body in ("earth", "sun")
    )
    gaps = [
        abs(difference(barycentre_longitude_rad(Epoch.from_iso(text)), longitude((earth - sun)[:, k])))
        for k, text in enumerate(texts)
    ]
    assert 5.5 * ARCSEC < max(gaps) < 7.0 * ARCSEC


def test_obliquity_is_that_of_the_equinox():
    # at the equinox the Sun stands in the equator: the barycentre's declination is the node's, and the pole
    # of the ecliptic leans by 84381.406 arcsec (IAU 2006)
    pole = ecliptic_to_icrf()[:, 2]
    assert math.acos(pole[2]) == pytest.approx(84381.406 * ARCSEC, abs=1e-15)


@pytest.mark.parametrize("angle", [0.0, 1.0, -2.5, 400.0])
def test_axes_are_right_handed_and_of_unit_length(angle):
    matrix = rotating_to_icrf(angle, 0.3)
    assert matrix @ matrix.T == pytest.approx(np.eye(3), abs=4e-16)
    assert np.linalg.det(matrix) == pytest.approx(1.0, abs=4e-16)


@pytest.mark.parametrize(("point", "degrees"), [("L1", 0), ("L2", 0), ("L3", 180), ("L4", 60), ("L5", -60)])
def test_outward_axis_points_from_the_sun_to_the_geometric_point(equilibrium, point, degrees):
    # also where pressure has displaced the reference itself
    assert math.degrees(axes_angle_rad(point)) == pytest.approx(degrees)
    bare, pushed = (equilibrium(point, pressure_area_m2_kg=area).primaries_m()[0] for area in (0.0, 0.5))
    distance_m = np.linalg.norm(bare)
    assert bare == pytest.approx([distance_m, 0.0, 0.0], abs=1e-4)
    assert pushed[2] == 0.0
    # on the line of the bodies pressure moves the point along R alone; 1e-4 m is a rounding of 1 AU
    assert (abs(pushed[1]) > 1e3) == (point in ("L4", "L5"))
    assert point in ("L4", "L5") or abs(pushed[1]) < 1e-4


@pytest.mark.parametrize("point", POINTS)
def test_axes_turn_forward_at_the_mean_motion(equilibrium, point):
    reference = equilibrium(point)
    quarter_s = 0.5 * math.pi / SUN_EARTH.rate_rad_s
    now, later = reference.axes_to_icrf(0.0), reference.axes_to_icrf(quarter_s)
    assert later[:, 0] == pytest.approx(now[:, 1], abs=1e-14)
    assert later[:, 1] == pytest.approx(-now[:, 0], abs=1e-14)
    assert later[:, 2] == pytest.approx(now[:, 2], abs=1e-15)


def test_l4_leads_the_earth_in_the_icrf(equilibrium):
    # the direction to L4 is the Earth's turned by 60 degrees about the pole of the ecliptic
    earth = equilibrium("L1").axes_to_icrf(0.0)
    l4 = equilibrium("L4").axes_to_icrf(0.0)
    assert l4[:, 0] @ earth[:, 0] == pytest.approx(0.5, abs=1e-15)
    assert l4[:, 0] @ earth[:, 1] == pytest.approx(math.sqrt(0.75), abs=1e-15)


def test_turn_is_forward_about_the_normal():
    assert turn_about_n(0.5 * math.pi) @ [1.0, 0.0, 5.0] == pytest.approx([0.0, 1.0, 5.0], abs=1e-15)
