"""The rocket equation against published and closed-form values (check values R1 to R6)."""

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp

from farhold.propellant.burn import burn_s, centroid_s, finite_loss_share
from farhold.propellant.rocket import G0_M_S2, dv_of, mass_after_kg, propellant_kg


def test_standard_acceleration_is_the_conventional_value():
    # 3rd CGPM 1901, resolution 2; ISO 80000-3: exact
    assert G0_M_S2 == 9.80665


def test_rocket_equation_reproduces_the_two_burn_ascent_of_curtis():
    # H. D. Curtis, Orbital Mechanics for Engineering Students, example 6.1 (from memory): 3.0522 km/s at
    # 300 s from 2000 kg takes 1291.3 kg; the book's g0 is 9.81, which moves the answer by 0.25 kg
    first = propellant_kg(2000.0, 1722.5, 300.0)
    second = propellant_kg(2000.0 - first, 1329.7, 300.0)
    assert first + second == pytest.approx(1291.3, abs=0.3)


@pytest.mark.parametrize(
    ("dv_m_s", "isp_s", "share"),
    [
        (1000.0, 300.0, 0.28816234366),
        (10.0, 60.0, 0.01685166530),
        (10.0, 220.0, 0.00462434832),
        (10.0, 1500.0, 0.00067957979),
    ],
)
def test_propellant_share_is_the_closed_form(dv_m_s, isp_s, share):
    # closed form 1 - exp(-dv / (isp g0)), printed to 11 digits
    assert propellant_kg(1.0, dv_m_s, isp_s) == pytest.approx(share, abs=6e-12)


def test_burns_in_sequence_equal_the_burn_of_their_sum():
    # 3 + 5 + 2 m/s at 220 s from 100 kg: 99.53756516813574 kg in extended precision
    stepped = mass_after_kg(mass_after_kg(mass_after_kg(100.0, 3.0, 220.0), 5.0, 220.0), 2.0, 220.0)
    assert stepped == pytest.approx(99.53756516813574, rel=1e-14)
    assert mass_after_kg(100.0, 10.0, 220.0) == pytest.approx(99.53756516813574, rel=1e-14)


def test_speed_change_is_recovered_from_the_masses():
    assert dv_of(100.0, 99.53756516813574, 220.0) == pytest.approx(10.0, rel=1e-12)


def test_centroid_of_a_burn_is_the_published_instant():
    # dv 200 m/s, 220 s, 600 s long: 304.63440996784 s (closed form in extended precision)
    assert centroid_s(600.0, 200.0, 220.0) == pytest.approx(304.63440996784, abs=1e-9)


def test_centroid_of_a_burn_is_the_mean_time_of_its_acceleration():
    dv_m_s, isp_s, length_s, mass_kg = 150.0, 65.0, 900.0, 9.7
    flow_kg_s = propellant_kg(mass_kg, dv_m_s, isp_s) / length_s

    def acceleration(t):
        return flow_kg_s * isp_s * G0_M_S2 / (mass_kg - flow_kg_s * t)

    total = quad(acceleration, 0.0, length_s, epsrel=1e-12)[0]
    moment = quad(lambda t: t * acceleration(t), 0.0, length_s, epsrel=1e-12)[0]
    assert total == pytest.approx(dv_m_s, rel=1e-10)
    assert centroid_s(length_s, dv_m_s, isp_s) == pytest.approx(moment / total, rel=1e-10)


def test_burn_length_spends_the_propellant_at_the_mass_flow_of_the_thruster():
    length_s = burn_s(9.7, 1.0, 65.0, 0.020)
    flow_kg_s = 0.020 / (65.0 * G0_M_S2)
    assert flow_kg_s * length_s == pytest.approx(propellant_kg(9.7, 1.0, 65.0), rel=1e-14)


def fixed_direction_loss(arc_rad):
    """Loss of energy gain of a small tangential burn of fixed direction, centred, on a circular orbit."""

    def rates(t, state):
        x, y, vx, vy = state
        cube = np.hypot(x, y) ** 3
        return [vx, vy, -x / cube, -y / cube + 1e-6]

    half = arc_rad / 2.0
    start = [np.cos(-half), np.sin(-half), -np.sin(-half), np.cos(-half)]
    x, y, vx, vy = solve_ivp(rates, (-half, half), start, rtol=1e-13, atol=1e-15).y[:, -1]
    gained = (vx**2 + vy**2) / 2.0 - 1.0 / np.hypot(x, y) + 0.5
    return 1.0 - gained / (1e-6 * arc_rad)


@pytest.mark.parametrize(("arc_rad", "printed"), [(0.1, 0.00041661), (0.2, 0.0016658), (0.4, 0.0066532)])
def test_finite_burn_loss_is_the_share_of_robbins(arc_rad, printed):
    # H. M. Robbins, AIAA Journal 4 (1966) 1417 (from memory): (n t_b)^2 / 24, leading order; the next term
    # is (n t_b)^4 / 1920, so 0.3 % at 0.4 rad
    assert finite_loss_share(1.0, arc_rad) == pytest.approx(printed, rel=3e-3)
    assert fixed_direction_loss(arc_rad) == pytest.approx(float(finite_loss_share(1.0, arc_rad)), rel=1e-2)
