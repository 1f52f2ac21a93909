"""The price of holding slots, against closed forms and a quadrature of its own."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ellipe

from farhold.constants import AU, GM_EARTH_MOON, GM_SUN
from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.circular import lightness
from farhold.planning.holding.price import holding_m_s, holding_m_s_yr

N = np.sqrt((GM_SUN.value + GM_EARTH_MOON.value) / AU.value**3)
BETA = lightness(0.026)


def yearly(reference, rule, place, beta=0.0):
    place = np.atleast_2d(np.asarray(place, dtype=float))
    return holding_m_s_yr(reference, np.full(len(place), rule), place, 0.0, np.full(len(place), beta))


def window(reference, rule, place, at_s, from_s, to_s, beta=0.0):
    place = np.atleast_2d(np.asarray(place, dtype=float))
    return holding_m_s(reference, np.full(len(place), rule), place, at_s, from_s, to_s, np.full(len(place), beta))


# design section 4, accepted within 1 %; R is 3 n2 r, N is n2 r
@pytest.mark.parametrize(("place", "price_m_s_yr"), [([1e6, 0, 0], 3.753), ([0, 0, 1e6], 1.251)])
def test_rotating_slot_costs_the_accepted_price(ref_l4, place, price_m_s_yr):
    assert yearly(ref_l4, "rotating", place)[0] == pytest.approx(price_m_s_yr, rel=1e-3)


def test_rotating_slot_along_track_costs_nothing_to_first_order(ref_l4):
    assert yearly(ref_l4, "rotating", [0, 1e6, 0])[0] < 1e-4


@pytest.mark.parametrize("angle_rad", [0.0, 1.0, 2.5])
def test_inertial_slot_in_the_plane_costs_the_mean_of_the_tidal_ellipse(ref_l4, angle_rad):
    # gradient diag(2, -1) n2 r over one turn: the mean of sqrt(4 cos2 + sin2) is a complete elliptic integral
    mean = 2.0 / np.pi * 2.0 * ellipe(0.75)
    place = [1e6 * np.cos(angle_rad), 1e6 * np.sin(angle_rad), 0]
    price = yearly(ref_l4, "inertial", place)[0]
    assert price == pytest.approx(mean * N**2 * 1e6 * YEAR_S, rel=2e-5)
    assert price == pytest.approx(1.929, rel=0.01)


def test_inertial_slot_along_n_costs_as_much_as_a_rotating_one(ref_l4):
    np.testing.assert_allclose(yearly(ref_l4, "inertial", [0, 0, 1e6]), yearly(ref_l4, "rotating", [0, 0, 1e6]))


def test_monthly_means_of_an_inertial_slot_span_the_stated_range(ref_l4):
    # design section 4: 1.29 to 2.48 m/s per year
    month = YEAR_S / 12.0
    means = [
        window(ref_l4, "inertial", [1e6, 0, 0], 0.0, (k - 0.5) * month, (k + 0.5) * month)[0] * 12.0
        for k in range(12)
    ]
    assert min(means) == pytest.approx(1.29, abs=0.01)
    assert max(means) == pytest.approx(2.48, abs=0.01)


def pull_m_s2(area, beta, place, centrifugal):
    """Tidal pull and pressure at a place at L4 in R, T, N, by differences of absolute forces."""
    r1 = (1.0 - lightness(area)) ** (1.0 / 3.0)
    x = 0.5 * r1**2
    sun = AU.value * np.array([x, np.sqrt(r1**2 - x**2), 0.0])
    c, s = np.cos(np.pi / 3.0), np.sin(np.pi / 3.0)
    turn = np.array([[c, s, 0.0], [-s, c, 0.0], [0.0, 0.0, 1.0]])
    home = turn @ sun, turn @ (sun - [AU.value, 0.0, 0.0])
    gms = GM_SUN.value * (1.0 - lightness(area)), GM_EARTH_MOON.value
    total = np.zeros(3)
    for gm, rho in zip(gms, home, strict=True):
        there = rho + place
        total += gm * (rho / np.linalg.norm(rho) ** 3 - there / np.linalg.norm(there) ** 3)
    out = home[0] + place
    total += beta * GM_SUN.value * out / np.linalg.norm(out) ** 3
    return total + N**2 * place * [1.0, 1.0, 0.0] if centrifugal else total


@pytest.mark.parametrize("area", [0.0, 0.026])
@pytest.mark.parametrize("beta", [0.0, 0.2 * BETA, -0.1 * BETA])
@pytest.mark.parametrize("place", [[1e6, 0, 0], [2e7, -1e7, 5e6], [0, 3e4, -2e4]])
def test_inertial_slot_costs_what_a_quadrature_of_its_own_says(equilibrium, area, beta, place):
    reference = equilibrium("L4", pressure_area_m2_kg=area)
    at_s, from_s, to_s = 2e6, 5e6, 5e6 + 75.0 * DAY_S

    def size(t):
        c, s = np.cos(N * (t - at_s)), np.sin(N * (t - at_s))
        x, y, z = place
        return np.linalg.norm(pull_m_s2(area, beta, np.array([c * x + s * y, -s * x + c * y, z]), False))

    exact = quad(size, from_s, to_s, epsabs=1e-12, epsrel=1e-10, limit=400)[0]
    price = window(reference, "inertial", place, at_s, from_s, to_s, beta)[0]
    # the pull of some cases nearly turns round, where the panels of 30 d leave about 1e-5
    assert price == pytest.approx(exact, rel=1e-4)


@pytest.mark.parametrize("beta", [0.0, 0.2 * BETA, -0.1 * BETA])
@pytest.mark.parametrize("place", [[1e6, 0, 0], [2e7, -1e7, 5e6], [0, 3e4, -2e4]])
def test_rotating_slot_costs_its_constant_pull(equilibrium, beta, place):
    reference = equilibrium("L4", pressure_area_m2_kg=0.026)
    pull = np.linalg.norm(pull_m_s2(0.026, beta, np.array(place, dtype=float), True))
    price = window(reference, "rotating", place, 9e9, 1e6, 1e6 + 40.0 * DAY_S, beta)[0]
    assert price == pytest.approx(pull * 40.0 * DAY_S, rel=1e-7)


@pytest.mark.parametrize("rule", ["rotating", "inertial", "natural"])
def test_common_pressure_is_not_counted(equilibrium, rule):
    # trap: the reference carries it
    reference = equilibrium("L4", pressure_area_m2_kg=0.026)
    assert yearly(reference, rule, [0, 0, 0])[0] == 0.0


@pytest.mark.parametrize("rule", ["rotating", "inertial", "natural"])
def test_pressure_beyond_the_reference_is_fought(ref_l4, rule):
    # C_R A/m of 0.02 and 1.3: 2 x 1.86245 m/s in a Julian year (check value S1), about 3.73
    price = yearly(ref_l4, rule, [0, 0, 0], BETA)[0]
    assert price == pytest.approx(2.0 * 1.86245, rel=2e-5)


def test_natural_slot_costs_nothing_without_pressure(ref_l4):
    assert yearly(ref_l4, "natural", [[1e6, 2e6, -3e5], [0, 0, 1e5]]).tolist() == [0.0, 0.0]


def test_small_pressure_can_pay_for_a_slot_outward_in_r(ref_l4):
    # a node that feels less pressure than the reference may sit where 3 n2 r makes up for it
    beta = -0.1 * BETA
    outward = -beta * GM_SUN.value / AU.value**2 / (3.0 * N**2)
    assert (
        yearly(ref_l4, "rotating", [outward, 0, 0], beta)[0]
        < 1e-3 * yearly(ref_l4, "rotating", [0, 0, 0], beta)[0]
    )


@pytest.mark.parametrize("rule", ["rotating", "inertial", "natural"])
@pytest.mark.parametrize("cut_days", [1.0, 37.0, 364.0])
def test_parts_of_a_window_add_up_to_the_whole(ref_l4, rule, cut_days):
    place, beta = [[4e5, -6e5, 2e5], [1e6, 0, 0]], 1e-6
    cut_s = cut_days * DAY_S
    parts = window(ref_l4, rule, place, 0.0, 0.0, cut_s, beta) + window(
        ref_l4, rule, place, 0.0, cut_s, YEAR_S, beta
    )
    np.testing.assert_allclose(parts, window(ref_l4, rule, place, 0.0, 0.0, YEAR_S, beta), rtol=1e-7)


@pytest.mark.parametrize("to_s", [0.0, -5.0])
def test_empty_window_costs_nothing(ref_l4, to_s):
    assert window(ref_l4, "rotating", [1e6, 0, 0], 0.0, 0.0, to_s).tolist() == [0.0]


def test_rules_may_be_mixed_and_each_node_pays_its_own(ref_l4):
    place = np.array([[1e6, 0, 0], [1e6, 0, 0], [1e6, 0, 0]])
    rule = np.array(["natural", "inertial", "rotating"])
    together = holding_m_s_yr(ref_l4, rule, place, 0.0, np.zeros(3))
    alone = [yearly(ref_l4, one, place[0])[0] for one in rule]
    np.testing.assert_array_equal(together, alone)


@pytest.mark.parametrize("rule", ["rotating", "inertial"])
@pytest.mark.parametrize("factor", [0.1, 2.0])
def test_price_grows_with_the_distance(ref_l4, rule, factor):
    place = np.array([3e5, 2e5, -4e5])
    # the field bends by the offset over the Sun's distance, about 1e-5
    assert yearly(ref_l4, rule, factor * place)[0] == pytest.approx(
        factor * yearly(ref_l4, rule, place)[0], rel=2e-5
    )
