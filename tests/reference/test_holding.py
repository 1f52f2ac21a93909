"""The price of holding a place (check values K4 to K6 and the accepted figures)."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ellipe

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.planning.holding.price import holding_m_s, holding_m_s_yr

AXES = {"R": 0, "T": 1, "N": 2}


def price_m_s_yr(reference, rule, axis, size_m):
    """Price of holding a place `size_m` out along an axis for the year."""
    return price_at(reference, rule, size_m * np.eye(3)[AXES[axis]])


def price_at(reference, rule, place_m):
    return float(holding_m_s_yr(reference, np.array([rule]), np.array([place_m]), 0.0, np.zeros(1))[0])


@pytest.mark.parametrize(
    ("point", "axis", "mm_s_yr_km"),
    [
        # K5: closed form from the Hessian of the potential, checked by its differences; four digits
        ("L1", "R", 11.411),
        ("L1", "T", 3.829),
        ("L1", "N", 5.080),
        ("L4", "R", 3.75285),
        ("L4", "N", 1.25095),
    ],
)
def test_holding_a_place_in_rotating_axes_costs_the_published_rate(equilibrium, point, axis, mm_s_yr_km):
    # at 10 m the curvature of the field is 10 m / gamma = 1e-8 of it
    price = price_m_s_yr(equilibrium(point), "rotating", axis, 10.0)
    assert price * 1e5 == pytest.approx(mm_s_yr_km, rel=1e-4)


@pytest.mark.parametrize(
    ("point", "eigenvalues"),
    [("L1", (9.12215, -3.06107, -4.06107)), ("L2", (8.88104, -2.94052, -3.94052)), ("L4", (3.0, 6.84e-6, -1.0))],
)
def test_field_in_rotating_axes_has_the_published_eigenvalues(equilibrium, point, eigenvalues):
    # K5, in n2; along T at L4 it is (9/4) mu. R and T there are principal axes up to 5.9 mu, whose square
    # over 3 is 1e-10, so the value along T by the secular equation is good to its three printed digits
    reference = equilibrium(point)
    matrix = reference.field(np.eye(3), "rotating") / reference.rate_rad_s**2
    assert matrix == pytest.approx(matrix.T, abs=1e-7)
    assert np.sort(np.linalg.eigvalsh(matrix)) == pytest.approx(sorted(eigenvalues), rel=2e-5, abs=5e-9)


@pytest.mark.parametrize(("axis", "eigenvalue"), [("R", 2.0), ("T", -1.0), ("N", -1.0)])
def test_field_among_the_stars_has_the_published_eigenvalues(ref_l4, axis, eigenvalue):
    # K6: (2, -1, -1) n2, to the mass ratio
    field = ref_l4.field(np.eye(3)[[AXES[axis]]], "inertial")[0] / ref_l4.rate_rad_s**2
    assert field[AXES[axis]] == pytest.approx(eigenvalue, abs=1e-5)


def test_pull_on_the_place_a_thousand_kilometres_out(ref_l4):
    # K5: 1.189198e-7 m/s2 nonlinear against 3 n2 d = 1.189208e-7; seven digits
    pull = np.linalg.norm(ref_l4.field(np.array([[1e6, 0.0, 0.0]]), "rotating"))
    assert pull == pytest.approx(1.189198e-7, abs=1.1e-13)


def test_year_among_the_stars_is_the_elliptic_integral(ref_l4):
    # K6: (4/pi) E(3/4) = 1.54196442519 n2 d over a turn, mu = 0; the mass ratio shifts it by 4e-6, and the
    # year of 365.25 d ends 0.0063 d short of the turn
    reference = ref_l4
    mean = 4.0 / np.pi * ellipe(0.75)
    assert mean == pytest.approx(1.54196442519, rel=1e-11)
    for_turn = mean * reference.rate_rad_s**2 * 1e3 * YEAR_S
    assert price_m_s_yr(reference, "inertial", "R", 1e3) == pytest.approx(for_turn, rel=3e-5)
    assert price_m_s_yr(reference, "inertial", "R", 1e3) * 1e3 == pytest.approx(1.92892, rel=3e-5)


def test_year_among_the_stars_at_the_first_point(ref_l1):
    # K6: 7.8335 mm/s per year and km, in the plane
    assert price_m_s_yr(ref_l1, "inertial", "R", 10.0) * 1e5 == pytest.approx(7.8335, rel=1e-4)


@pytest.mark.parametrize(
    ("rule", "axis", "m_s_yr"),
    [("rotating", "R", 3.753), ("rotating", "N", 1.251), ("inertial", "R", 1.929), ("inertial", "N", 1.251)],
)
@pytest.mark.parametrize("point", ["L4", "L5"])
def test_holding_a_thousand_kilometres_costs_the_accepted_figure(equilibrium, point, rule, axis, m_s_yr):
    # acceptance values, 1 %
    assert price_m_s_yr(equilibrium(point), rule, axis, 1e6) == pytest.approx(m_s_yr, rel=0.01)


@pytest.mark.parametrize("size_m", [1e3, 1e4])
def test_holding_along_the_orbit_costs_next_to_nothing(ref_l4, size_m):
    # acceptance: under 1e-4 m/s a year per 1000 km; linear rate 8.6e-6
    assert price_m_s_yr(ref_l4, "rotating", "T", size_m) * 1e6 / size_m < 1e-4


def test_months_among_the_stars_have_the_accepted_extremes(ref_l4):
    # acceptance: monthly means 1.29 to 2.48 m/s a year at 1000 km, a month being a twelfth of the year, over
    # all starts: two months centred on the least and the largest pull are among them
    place = np.array([[1e6, 0.0, 0.0]])
    month_s = YEAR_S / 12.0
    means = [
        12.0 * float(holding_m_s(ref_l4, np.array(["inertial"]), place, 0.0, t, t + month_s, np.zeros(1))[0])
        for t in np.arange(0.0, YEAR_S, DAY_S)
    ]
    assert min(means) == pytest.approx(1.29, rel=0.01)
    assert max(means) == pytest.approx(2.48, rel=0.01)


def test_two_metres_a_second_are_kept_at_900_km_and_broken_at_1200_km(ref_l4):
    # the yardstick of 2 m/s a year for inertial slots
    assert price_m_s_yr(ref_l4, "inertial", "R", 0.9e6) < 2.0 < price_m_s_yr(ref_l4, "inertial", "R", 1.2e6)


@pytest.mark.parametrize("point", ["L1", "L2", "L3", "L4", "L5"])
@pytest.mark.parametrize("rule", ["rotating", "inertial"])
def test_the_reference_slot_is_free(equilibrium, point, rule):
    # K4: an equilibrium costs nothing to stay at
    assert price_at(equilibrium(point), rule, np.zeros(3)) == 0.0


def test_natural_slots_are_free(ref_l4):
    assert price_at(ref_l4, "natural", np.array([1e6, 2e6, 3e5])) == 0.0


@pytest.mark.parametrize("days", [3.0, 47.3, 400.0])
def test_price_of_any_window_is_the_integral_of_the_pull(ref_l4, days):
    # SciPy's adaptive quadrature over the pull on a place that turns back in rotating axes
    place, rate, start_s = np.array([8e5, -3e5, 4e5]), ref_l4.rate_rad_s, 12.0 * DAY_S

    def pull_m_s_day(day):
        angle = -rate * (day * DAY_S - start_s)
        c, s = np.cos(angle), np.sin(angle)
        turned = np.array([[c * place[0] - s * place[1], s * place[0] + c * place[1], place[2]]])
        return float(np.linalg.norm(ref_l4.field(turned, "inertial"))) * DAY_S

    begin, end = 20.0, 20.0 + days
    exact = quad(pull_m_s_day, begin, end, epsabs=0.0, epsrel=1e-11, limit=200)[0]
    ours = holding_m_s(
        ref_l4, np.array(["inertial"]), place[None], start_s, begin * DAY_S, end * DAY_S, np.zeros(1)
    )
    assert ours[0] == pytest.approx(exact, rel=1e-9)
