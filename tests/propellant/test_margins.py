import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from farhold.domain.margins import Margins
from farhold.propellant.life import LIFE_CAP_YEARS, life_years
from farhold.propellant.margins import affordable, margin_kg, usable_kg
from farhold.propellant.rocket import dv_of, mass_after_kg, propellant_kg

NONE = Margins(manoeuvre=0.0, attitude=0.0, residual=0.0)


def test_margins_reproduce_the_worked_case_of_the_margin_philosophy():
    # SRE-PA/2011.097 Iss. 1 Rev. 3 (from secondary sources): 20 m/s computed at 5 %, 3 + 1 m/s at 100 % are
    # 29.0 m/s; 12 kg dry at 220 s need 0.162390 kg, with 2 % residuals 0.165637 kg
    needed_kg = propellant_kg(12.0 * math.exp((20.0 * 1.05 + 4.0 * 2.0) / (220.0 * 9.80665)), 29.0, 220.0)
    assert needed_kg == pytest.approx(0.162390, abs=1e-6)
    loaded_kg = 0.165637
    aboard = usable_kg(12.0 + loaded_kg, 12.0, loaded_kg, 220.0, Margins(residual=0.02))
    assert aboard == pytest.approx(0.98 * loaded_kg, rel=1e-12)
    assert aboard == pytest.approx(0.162390, abs=1e-4)


def test_contingency_leaves_its_speed_change_when_the_usable_is_gone():
    margins = Margins(residual=0.02, contingency_m_s=0.2)
    left_kg = 9.7 - usable_kg(9.7, 9.4, 0.3, 65.0, margins)
    assert dv_of(left_kg, 9.4 + 0.006, 65.0) == pytest.approx(0.2, rel=1e-10)


def test_usable_is_negative_on_the_reserve():
    assert usable_kg(9.405, 9.4, 0.3, 65.0, Margins()) == pytest.approx(-0.001, rel=1e-9)


def test_margin_of_nothing_is_nothing():
    assert margin_kg(9.7, 0.0, 65.0, 1.0) == 0.0


@given(mass=st.floats(1.0, 100.0), dv=st.floats(0.0, 50.0), share=st.floats(0.0, 1.0))
def test_margin_is_the_price_with_it_less_the_price_without(mass, dv, share):
    difference = propellant_kg(mass, dv * (1 + share), 65.0) - propellant_kg(mass, dv, 65.0)
    np.testing.assert_allclose(margin_kg(mass, dv, 65.0, share), difference, rtol=1e-9, atol=1e-13 * mass)


def test_affordable_counts_the_margin_once():
    just_kg = float(propellant_kg(9.7, 1.05, 65.0))
    usable = np.array([just_kg * 1.0001, just_kg * 0.9999])
    assert affordable(9.7, 1.0, 65.0, 0.05, usable).tolist() == [True, False]


def test_affordable_lets_a_node_on_its_reserve_stay_where_it_is():
    assert affordable(9.4, [0.0, 1e-6], 65.0, 0.05, -0.001).tolist() == [True, False]


def test_life_spends_exactly_the_usable_propellant():
    life = life_years(9.7, 0.2, 65.0, 2.0, NONE)
    assert mass_after_kg(9.7, 2.0 * life.years, 65.0) == pytest.approx(9.5, rel=1e-13)
    assert not life.capped


def test_life_counts_margins_and_the_attitude_thruster():
    margins = Margins(manoeuvre=0.05, attitude=1.0)
    plain = life_years(9.7, 0.2, 65.0, 1.0 * 1.05 + 0.1 * 2.0 * 65.0 / 40.0, NONE)
    priced = life_years(9.7, 0.2, 65.0, 1.0, margins, attitude_m_s_yr=0.1, attitude_isp_s=40.0)
    assert priced.years == pytest.approx(plain.years, rel=1e-14)


def test_life_of_a_leaking_tank_is_its_content_over_the_leak():
    # ln(m / (m - u)) (m - u/2) = u (1 + (u/m)^2 / 12 + ...): 4e-5 here
    life = life_years(9.7, 0.2, 65.0, 0.0, NONE, leak_kg_yr=0.01)
    assert life.years == pytest.approx(20.0, rel=1e-4)


@pytest.mark.parametrize(
    ("usable", "holding", "years", "capped"),
    [
        (0.0, 1.0, 0.0, False),
        (-0.1, 0.0, 0.0, False),
        (0.2, 0.0, LIFE_CAP_YEARS, True),
        (0.2, 1e-9, 100.0, True),
    ],
)
def test_life_at_its_ends(usable, holding, years, capped):
    life = life_years(9.7, usable, 65.0, holding, NONE)
    assert (float(life.years), bool(life.capped)) == (years, capped)
