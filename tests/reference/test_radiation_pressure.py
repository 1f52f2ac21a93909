"""Radiation pressure and the displaced libration points (check values S1 to S6)."""

import numpy as np
import pytest

from farhold.constants import AU, GM_SUN
from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.absolute import propagate
from farhold.dynamics.circular import SUN_EARTH, libration_point, lightness
from farhold.dynamics.propagate import fly
from farhold.planning.holding.price import holding_m_s_yr
from farhold.study.reference import reference

MU = SUN_EARTH.mu
AREA_M2_KG = 0.026  # A/m 0.02 m2/kg at C_R 1.3


def acceleration_m_s2(pressure_area_m2_kg):
    return lightness(pressure_area_m2_kg) * GM_SUN.value / AU.value**2


@pytest.mark.parametrize(
    ("coefficient", "m_s2", "m_s_yr"),
    [(1.0, 4.53981e-8, 1.43265), (1.3, 5.90175e-8, 1.86245), (1.8, 8.17165e-8, 2.57878)],
)
def test_pressure_on_a_plain_surface_is_the_closed_form(coefficient, m_s2, m_s_yr):
    # S1: C_R (S/c) A/m at 1 AU for A/m 0.01 m2/kg; six digits printed
    assert acceleration_m_s2(coefficient * 1e-2) == pytest.approx(m_s2, rel=1.5e-6)
    assert acceleration_m_s2(coefficient * 1e-2) * YEAR_S == pytest.approx(m_s_yr, rel=4e-6)


def test_lightness_of_a_square_metre_per_kilogram():
    # S2: 7.655553788e-4; the Sun pulls with 5.930083520e-3 m/s2 at 1 AU (McInnes 1999, Solar Sailing: 5.93 mm/s2)
    assert lightness(1.0) == pytest.approx(7.655553788e-4, rel=1e-9)
    assert GM_SUN.value / AU.value**2 == pytest.approx(5.930083520e-3, rel=1e-9)


def test_critical_loading_of_a_mirror():
    # S3: McInnes 1999 (from memory) prints 1.53 g/m2; 1.53111 with S = 1361 W/m2 (a mirror has C_R = 2)
    assert 2.0 * lightness(1.0) * 1e3 == pytest.approx(1.53111, abs=1e-5)


@pytest.mark.parametrize("beta", [0.0, 1e-5, 1e-3, 0.03])
@pytest.mark.parametrize("point", ["L4", "L5"])
def test_displaced_triangular_point_has_the_published_distances(point, beta):
    # S4: Schuerman 1980, ApJ 238, 337 (from memory): r1 = (1 - beta)^(1/3), r2 = 1
    place = libration_point(point, MU, beta)
    assert np.linalg.norm(np.add(place, [MU, 0.0, 0.0])) == pytest.approx((1.0 - beta) ** (1.0 / 3.0), rel=4e-16)
    assert np.linalg.norm(place - [1.0 - MU, 0.0, 0.0]) == pytest.approx(1.0, rel=4e-16)


@pytest.mark.parametrize("beta", [0.0, 1e-5, 0.01, 0.03])
@pytest.mark.parametrize("point", ["L1", "L2", "L3", "L4", "L5"])
def test_displaced_point_is_at_rest(point, beta):
    # the equations of motion leave it there: over 0.1 of a radian an error of place grows by 1 + 5 (0.1)2
    start = np.append(libration_point(point, MU, beta), np.zeros(3))
    assert propagate(start, [0.0, 0.1], MU, beta).state[-1] == pytest.approx(start, abs=1e-15)


@pytest.mark.parametrize(("beta", "km", "tolerance"), [(1e-5, 575.804, 1e-3), (1e-4, 5758.2, 0.1)])
def test_shift_of_the_triangular_point(beta, km, tolerance):
    # S4: extended precision, printed digits
    shift = (libration_point("L4", MU, beta) - libration_point("L4", MU)) * AU.value / 1e3
    assert np.linalg.norm(shift) == pytest.approx(km, abs=tolerance)


def test_shift_of_the_triangular_point_is_inwards_and_forwards():
    # S4: radial -498.66 km, angle +1.103e-4 deg seen from the Sun
    sun = np.array([-MU, 0.0, 0.0])
    before, after = (libration_point("L4", MU, beta) - sun for beta in (0.0, 1e-5))
    radial_km = (np.linalg.norm(after) - np.linalg.norm(before)) * AU.value / 1e3
    angle_deg = np.degrees(np.arctan2(after[1], after[0]) - np.arctan2(before[1], before[0]))
    assert radial_km == pytest.approx(-498.66, abs=0.01)
    assert angle_deg == pytest.approx(1.103e-4, abs=1e-7)


@pytest.mark.parametrize(
    ("mu", "beta", "slow", "fast"),
    [(3.040423398444176e-6, 0.03, 0.0045454, 0.99998967), (0.01215058560962404, 0.05, 0.3000565, 0.9539214)],
)
def test_rates_about_the_displaced_triangular_point(mu, beta, slow, fast):
    # S5: w4 - w2 + 9 mu (1 - mu)(1 - r1^2/4) = 0 (Simmons, McDonald and Brown 1985, Cel. Mech. 35, 145, from
    # memory), by the eigenvalues of the variational equations
    start = np.append(libration_point("L4", mu, beta), np.zeros(3))
    matrix = propagate(start, [0.0, 1.0], mu, beta, with_transition=True).transition[-1]
    rates = np.sort(np.log(np.linalg.eigvals(matrix)).imag)[3:]
    r1 = (1.0 - beta) ** (1.0 / 3.0)
    product = 9.0 * mu * (1.0 - mu) * (1.0 - r1**2 / 4.0)
    assert rates == pytest.approx([slow, fast, 1.0], abs=6e-8)
    assert rates[0] * rates[1] == pytest.approx(np.sqrt(product), rel=1e-8)


@pytest.mark.parametrize("point", ["L1", "L2", "L4"])
def test_transition_about_a_displaced_reference_is_that_of_the_variational_equations(equilibrium, point):
    area = 0.5
    held = equilibrium(point, pressure_area_m2_kg=area)
    start = np.append(held.position_m / AU.value, np.zeros(3))
    flown = propagate(start, [0.0, 1.0], MU, lightness(area), with_transition=True).transition[-1]
    rate = held.rate_rad_s
    ours = held.transition(0.0, 1.0 / rate)
    # traces and singular values do not depend on the axes
    assert np.trace(ours) == pytest.approx(np.trace(flown), rel=1e-9)
    assert np.linalg.svd(ours[:3, 3:], compute_uv=False) * rate == pytest.approx(
        np.linalg.svd(flown[:3, 3:], compute_uv=False), rel=1e-9
    )


@pytest.mark.parametrize(
    ("point", "beta", "km", "tolerance"),
    [("L1", 1e-5, -167.346, 1e-3), ("L2", 1e-5, -165.083, 1e-3), ("L1", 1e-2, -187740.0, 5.0)],
)
def test_shift_of_the_near_points_is_sunwards(point, beta, km, tolerance):
    # S6: root in extended precision, printed digits
    shift_km = (libration_point(point, MU, beta) - libration_point(point, MU))[0] * AU.value / 1e3
    assert shift_km == pytest.approx(km, abs=tolerance)


@pytest.mark.parametrize("point", ["L1", "L2"])
def test_shift_of_the_near_points_follows_the_linear_rule(point):
    # S6: -beta (1 - mu) / ((x + mu)2 (1 + 2 c2)); the next order is beta / gamma = 1e-4 of it at beta 1e-6
    x = libration_point(point, MU)[0]
    c2 = (1.0 - MU) / abs(x + MU) ** 3 + MU / abs(x - 1.0 + MU) ** 3
    rule = -1e-6 * (1.0 - MU) / ((x + MU) ** 2 * (1.0 + 2.0 * c2))
    shift = (libration_point(point, MU, 1e-6) - libration_point(point, MU))[0]
    assert shift == pytest.approx(rule, rel=1e-4)


def test_pressure_on_the_accepted_node_is_the_accepted_figure(ref_l4):
    # acceptance values, 1 %: 1.18e-7 m/s2 and 3.73 m/s a year if fought; nothing if the reference carries it
    assert np.linalg.norm(lightness(AREA_M2_KG) * ref_l4.pressure_field(np.zeros((1, 3)))) == pytest.approx(
        1.18e-7, rel=0.01
    )
    fought = holding_m_s_yr(
        ref_l4, np.array(["rotating"]), np.zeros((1, 3)), 0.0, np.array([lightness(AREA_M2_KG)])
    )
    assert fought[0] == pytest.approx(3.73, rel=0.01)


def test_pressure_carried_by_the_reference_costs_nothing(equilibrium):
    carried = equilibrium("L4", pressure_area_m2_kg=AREA_M2_KG)
    free = holding_m_s_yr(carried, np.array(["rotating"]), np.zeros((1, 3)), 0.0, np.zeros(1))
    assert free[0] == 0.0


def test_spread_of_pressure_is_the_accepted_figure(equilibrium):
    # acceptance values, 1 %: a tenth more than the reference's is 0.37 m/s a year and 2.16 km in 7 d
    carried = equilibrium("L4", pressure_area_m2_kg=AREA_M2_KG)
    excess = np.array([lightness(0.1 * AREA_M2_KG)])
    held = holding_m_s_yr(carried, np.array(["rotating"]), np.zeros((1, 3)), 0.0, excess)
    drift = fly(carried, np.zeros((1, 6)), [7.0 * DAY_S], excess_beta=excess).state[0, 0]
    assert held[0] == pytest.approx(0.37, rel=0.01)
    assert np.linalg.norm(drift[:3]) == pytest.approx(2160.0, rel=0.01)


def test_public_reference_gives_a_node_its_own_pressure():
    # the same 2.16 km through the public door, whose default is the reference's own pressure
    ref = reference("L4", pressure_m2_kg=AREA_M2_KG)
    rest = np.zeros((2, 6))
    end = ref.fly(rest, [7.0], pressure_m2_kg=[AREA_M2_KG, 1.1 * AREA_M2_KG])[:, 0]
    assert (end[0] == 0.0).all()
    assert np.linalg.norm(end[1, :3]) == pytest.approx(2160.0, rel=0.01)
    assert (ref.fly(rest, [7.0]) == 0.0).all()
