"""Prices of holding about references that move, against an independent quadrature of a numeric Hessian."""

import numpy as np
import pytest
from scipy.integrate import quad

from farhold.domain.epoch import YEAR_S, Epoch
from farhold.dynamics.reference import make_reference
from farhold.planning.holding.price import holding_m_s, holding_m_s_yr

EPOCH = Epoch.from_iso("2035-03-20T00:00:00")
DAY_S = 86400.0
SLOTS_M = 1e3 * np.array([[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [0.6, -0.7, 0.4]])


@pytest.fixture(scope="module")
def halo():
    return make_reference("halo", point="L2", epoch=EPOCH, pressure_area_m2_kg=0.026, family="south", az_m=2e8)


def potential(reference, place_m, t_s, centrifugal):
    """Attraction potential, and the centrifugal one where asked, at places from the reference, in long double."""
    total = np.longdouble(0.0)
    gm_sun, _, gm_earth = reference.gm_m3_s2
    for gm, rho in zip((gm_sun, gm_earth), reference.primaries_m(t_s), strict=True):
        total -= gm / np.sqrt(np.sum((rho.astype(np.longdouble) + place_m) ** 2))
    if centrifugal:
        total -= 0.5 * reference.rate_rad_s**2 * (place_m[0] ** 2 + place_m[1] ** 2)
    return total


def hessian(reference, t_s, centrifugal):
    """Second derivatives (3, 3) by central differences over 200 km."""
    step, axes = np.longdouble(2e5), np.eye(3, dtype=np.longdouble)
    out = np.empty((3, 3))
    for i in range(3):
        for j in range(3):
            corners = [
                s * u * potential(reference, step * (s * axes[i] + u * axes[j]), t_s, centrifugal)
                for s in (-1, 1)
                for u in (-1, 1)
            ]
            out[i, j] = float(np.sum(corners) / (4.0 * step**2))
    return out


@pytest.mark.parametrize("slot", SLOTS_M, ids=["R", "T", "N", "askew"])
def test_price_of_a_rotating_slot_about_a_halo_is_the_hessian_integrated(halo, slot):
    first, last = 20.0 * DAY_S, 110.0 * DAY_S
    price = holding_m_s(halo, np.array(["rotating"]), slot[None], first, first, last, np.zeros(1))[0]
    expected, _ = quad(lambda t: np.linalg.norm(hessian(halo, t, True) @ slot), first, last, epsrel=1e-6)
    # differences over 200 km of 1.3e6 km: (0.15e-3)^2 x 15; the slot's own 1 km: 1e-6 x 3
    assert price == pytest.approx(expected, rel=1e-5)


def test_price_of_an_inertial_slot_about_a_halo_is_the_hessian_integrated(halo):
    first, last, n = 0.0, 90.0 * DAY_S, halo.rate_rad_s
    slot = SLOTS_M[3]

    def pull(t):
        c, s = np.cos(n * t), np.sin(n * t)
        place = np.array([c * slot[0] + s * slot[1], c * slot[1] - s * slot[0], slot[2]])
        return np.linalg.norm(hessian(halo, t, False) @ place)

    price = holding_m_s(halo, np.array(["inertial"]), slot[None], first, first, last, np.zeros(1))[0]
    assert price == pytest.approx(quad(pull, first, last, epsrel=1e-6)[0], rel=1e-5)


# K5: per km and year at L1 and at L4, R, T, N; of the pull along T at L4 it prints the part along T alone, the
# whole of which is (3 sqrt 3 / 2) mu n2 d (closed form): 9.886e-9 m/s
@pytest.mark.parametrize(
    ("point", "expected"), [("L1", (11.411e-3, 3.829e-3, 5.080e-3)), ("L4", (3.75285e-3, 9.886e-9, 1.25095e-3))]
)
def test_price_of_a_kilometre_at_a_point_is_the_published_one(point, expected):
    reference = make_reference("equilibrium", point=point, epoch=EPOCH, pressure_area_m2_kg=0.0)
    price = holding_m_s_yr(reference, np.full(3, "rotating"), SLOTS_M[:3], 0.0, np.zeros(3))
    # four digits; the square of 1 km adds a part in a thousand to the T of L4
    assert price == pytest.approx(np.array(expected), rel=2e-4)


@pytest.mark.parametrize(("point", "expected"), [("L4", 1.92892e-3), ("L1", 7.8335e-3)])
def test_price_of_an_inertial_kilometre_at_a_point_is_the_published_one(point, expected):
    # K6: mean of a year of a place in the plane
    reference = make_reference("equilibrium", point=point, epoch=EPOCH, pressure_area_m2_kg=0.0)
    price = holding_m_s_yr(reference, np.full(1, "inertial"), SLOTS_M[:1], 0.0, np.zeros(1))[0]
    assert price == pytest.approx(expected, rel=2e-4)


def test_price_about_a_tiny_lyapunov_orbit_is_that_at_its_point():
    still = make_reference("equilibrium", point="L1", epoch=EPOCH, pressure_area_m2_kg=0.026)
    tiny = make_reference("lyapunov", point="L1", epoch=EPOCH, pressure_area_m2_kg=0.026, ay_m=1e4)
    rules = np.array(["rotating", "inertial", "natural", "rotating"])
    beta = np.array([0.0, 1e-6, 1e-6, 2e-6])
    prices = [holding_m_s_yr(one, rules, SLOTS_M, 0.0, beta) for one in (still, tiny)]
    # 10 km of 1.5e6 km change the gradient by 2e-5
    np.testing.assert_allclose(prices[1], prices[0], rtol=5e-5)


def test_yearly_price_about_an_orbit_that_ends_sooner_is_the_mean_up_to_its_end():
    span = 100.0 * DAY_S
    ends = make_reference(
        "lissajous", point="L2", epoch=EPOCH, pressure_area_m2_kg=0.0, ay_m=1e8, az_m=1e8, span_s=span
    )
    rules = np.full(4, "rotating")
    yearly = holding_m_s_yr(ends, rules, SLOTS_M, 0.0, np.zeros(4))
    whole = holding_m_s(ends, rules, SLOTS_M, 0.0, 0.0, span, np.zeros(4))
    np.testing.assert_allclose(yearly, whole * YEAR_S / span, rtol=1e-12)
