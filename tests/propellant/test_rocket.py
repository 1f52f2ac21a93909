import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from farhold.propellant.burn import centroid_s
from farhold.propellant.rocket import dv_of, mass_after_kg, propellant_kg

masses_kg = st.floats(0.1, 1e4)
dvs_m_s = st.floats(0.0, 500.0)
isps_s = st.floats(30.0, 5000.0)


@given(mass=masses_kg, first=dvs_m_s, second=dvs_m_s, isp=isps_s)
def test_propellant_of_two_burns_equals_that_of_their_sum(mass, first, second, isp):
    spent = propellant_kg(mass, first, isp)
    both = spent + propellant_kg(mass - spent, second, isp)
    np.testing.assert_allclose(both, propellant_kg(mass, first + second, isp), rtol=1e-12, atol=1e-15 * mass)


@given(mass=masses_kg, dv=dvs_m_s, isp=isps_s)
def test_mass_is_conserved_by_a_burn(mass, dv, isp):
    np.testing.assert_allclose(mass_after_kg(mass, dv, isp) + propellant_kg(mass, dv, isp), mass, rtol=1e-15)


@given(mass=masses_kg, dv=dvs_m_s, isp=isps_s)
def test_undoing_a_burn_gives_its_mass_back(mass, dv, isp):
    np.testing.assert_allclose(mass_after_kg(mass_after_kg(mass, dv, isp), -dv, isp), mass, rtol=1e-14)


def test_propellant_of_a_tiny_burn_keeps_its_digits():
    # first order dv / (isp g0); the second order is 8e-13 of it
    np.testing.assert_allclose(propellant_kg(1.0, 1e-9, 65.0), 1e-9 / (65.0 * 9.80665), rtol=2e-12)


@given(mass=masses_kg, dv=st.floats(1e-3, 500.0), isp=isps_s)
def test_speed_change_is_recovered_from_the_masses(mass, dv, isp):
    np.testing.assert_allclose(dv_of(mass, mass_after_kg(mass, dv, isp), isp), dv, rtol=1e-6)


@given(isp=isps_s)
def test_centroid_series_meets_its_closed_form(isp):
    around = np.array([0.1 - 1e-9, 0.1 + 1e-9]) * isp * 9.80665
    below, above = centroid_s(1.0, around, isp)
    np.testing.assert_allclose(below, above, rtol=1e-9)


def test_centroid_of_a_vanishing_burn_is_its_middle():
    assert centroid_s(600.0, 0.0, 220.0) == 300.0
