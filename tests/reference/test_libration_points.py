"""Places of the libration points and the rates of motion about them (check values P1 to P16)."""

import math

import numpy as np
import pytest

from farhold.dynamics.absolute import jacobi_constant
from farhold.dynamics.circular import SUN_EARTH, libration_point

JORBA = 3.040423398444176e-6  # Jorba and Masdemont 1999, Physica D 132, 189
EARTH_MOON = 0.01215058560962404
RICHARDSON = 3.040357143e-6


def gamma_of(point, mu):
    """Distance of a collinear point from its nearer primary."""
    x = libration_point(point, mu)[0]
    return -mu - x if point == "L3" else abs(x - 1.0 + mu)


@pytest.fixture
def rates_of(equilibrium, unit_system):
    """Gives the six linear rates at a point, sorted by size, from the transition matrix over half a radian."""

    def rates(point, mu):
        return np.log(np.linalg.eigvals(equilibrium(point, system=unit_system(mu)).transition(0.0, 0.5))) / 0.5

    return rates


@pytest.mark.parametrize(
    ("point", "published"),
    [("L1", 0.989970922056916), ("L2", 1.01009043578556), ("L3", -1.00000127258333)],
)
def test_collinear_points_are_those_of_the_orbit_catalogue(point, published):
    # P1: JPL three-body periodic orbit catalogue, Sun-Earth, with its own mu = 3.0542e-6; its places are
    # good to 1.3e-12 only, as an extended precision solution shows
    assert libration_point(point, 3.0542e-6)[0] == pytest.approx(published, abs=5e-12)


def test_first_point_is_where_richardson_puts_it():
    # P2: D. L. Richardson 1980, Celestial Mechanics 22, 241: 1.497610042e6 km with an AU of 149.5978714e6 km
    assert gamma_of("L1", RICHARDSON) * 149.5978714e6 == pytest.approx(1.497610042e6, abs=5e-4)


@pytest.mark.parametrize(
    ("mu", "point", "published"),
    [
        # P3, P4: the three quintics solved in extended precision (residual below 1e-30)
        (JORBA, "L1", 0.01001097722778141),
        (JORBA, "L2", 0.01007824043999064),
        (JORBA, "L3", 0.9999982264196842),
        (0.04, "L1", 0.2190901571386766),
        (0.04, "L2", 0.256430567614388),
    ],
)
def test_distance_of_collinear_points_solves_the_quintic(mu, point, published):
    # a distance read from a coordinate near 1 carries the rounding of 1, 2.2e-16
    assert gamma_of(point, mu) == pytest.approx(published, abs=4e-16)


@pytest.mark.parametrize(
    ("point", "published"),
    [("L1", 0.8369151257723572), ("L2", 1.155682165444884), ("L3", -1.005062645810278)],
)
def test_points_of_the_earth_and_moon(point, published):
    # P5: mu of the JPL catalogue; quintics in extended precision
    assert libration_point(point, EARTH_MOON)[0] == pytest.approx(published, abs=4e-16)


@pytest.mark.parametrize(("point", "signs"), [("L1", (-1.0, -23.0)), ("L2", (1.0, -31.0))])
def test_distance_follows_the_series_in_the_hill_radius(point, signs):
    # P6: Murray and Dermott 1999, Solar System Dynamics, ch. 3 (from memory); truncated at a5 = 1e-10
    a = (SUN_EARTH.mu / (3.0 * (1.0 - SUN_EARTH.mu))) ** (1.0 / 3.0)
    series = a + signs[0] * a**2 / 3.0 - a**3 / 9.0 + signs[1] * a**4 / 81.0
    assert gamma_of(point, SUN_EARTH.mu) == pytest.approx(series, abs=a**5)


@pytest.mark.parametrize(
    ("point", "coefficient", "constant"),
    [("L1", -10.0 / 3.0, 1.0), ("L2", -14.0 / 3.0, 1.0), ("L3", 1.0, 0.0), ("L4", -1.0, 0.0)],
)
def test_jacobi_constant_of_the_points_follows_the_series(point, coefficient, constant):
    # P7: Murray and Dermott 1999, ch. 3 (from memory); the next terms are mu^(4/3) = 4e-8 at the near points
    # and mu2 = 1e-11 at the far ones
    mu = SUN_EARTH.mu
    series = 3.0 + constant * 3.0 ** (4.0 / 3.0) * mu ** (2.0 / 3.0) + coefficient * mu
    ours = jacobi_constant(np.append(libration_point(point, mu), [0.0, 0.0, 0.0]), mu)
    assert ours == pytest.approx(series, abs=mu ** (4.0 / 3.0) if constant else mu**2)


@pytest.mark.parametrize(
    ("mu", "published"),
    [
        # P8 and P5: extended precision
        (JORBA, (3.000897941483119, 3.000893887543918, 3.000003040423206, 2.999996959585846)),
        (EARTH_MOON, (3.18834111774924, 3.172160460968527, 3.012147150680504, 2.987997051121033)),
    ],
)
def test_jacobi_constant_at_rest_in_the_points(mu, published):
    states = np.array([np.append(libration_point(f"L{k}", mu), [0.0, 0.0, 0.0]) for k in (1, 2, 3, 4)])
    # four roundings of numbers near 3
    assert jacobi_constant(states, mu) == pytest.approx(published, abs=2e-15)


def test_jacobi_constant_of_the_triangular_points_is_exact():
    # P7: 3 - mu + mu2, closed form
    mu = 0.1
    state = np.append(libration_point("L5", mu), [0.0, 0.0, 0.0])
    assert jacobi_constant(state, mu) == pytest.approx(3.0 - mu + mu**2, abs=2e-15)


@pytest.mark.parametrize(("factor", "grows"), [(1.0 - 1e-6, False), (1.0 + 1e-6, True)])
def test_triangular_point_loses_stability_at_the_critical_mass(rates_of, factor, grows):
    # P9: Routh's mass (1 - sqrt(69)/9)/2 = 0.0385208965 (Szebehely 1967, from memory). Beyond it by a
    # fraction e the growth is sqrt(e) in size, 1e-3 here; below it only rounding, whose root is 1e-8
    critical = (1.0 - math.sqrt(69.0) / 9.0) / 2.0
    assert critical == pytest.approx(0.038520896504551397, rel=1e-14)
    growth = rates_of("L4", critical * factor).real.max()
    assert (growth > 1e-5) == grows
    assert grows or growth < 1e-6


@pytest.mark.parametrize(("mu", "ratio"), [(0.024293897142052322, 2.0), (0.013516016022452527, 3.0)])
def test_rates_at_the_triangular_point_are_commensurable_at_the_published_masses(rates_of, mu, ratio):
    # P10: Deprit and Deprit-Bartholome 1967, Astronomical Journal 72, 173 (from memory)
    vertical = np.argmin(abs(abs(rates_of("L4", mu).imag) - 1.0))
    planar = np.unique(np.round(abs(np.delete(rates_of("L4", mu).imag, vertical)), 10))
    planar = planar[abs(planar - 1.0) > 1e-6]
    assert planar[-1] / planar[0] == pytest.approx(ratio, abs=1e-8)


@pytest.mark.parametrize("mu", [JORBA, 0.0109136676772, 0.02])
def test_rates_at_the_triangular_point_solve_the_characteristic_equation(rates_of, mu):
    # P11: w4 - w2 + 27/4 mu (1 - mu) = 0 and w = 1 out of the plane (Szebehely 1967, from memory); the long
    # rate, 220 times smaller than 1, feels the rounding of 1 by the inverse of itself
    root = math.sqrt(1.0 - 27.0 * mu * (1.0 - mu))
    slow = math.sqrt(13.5 * mu * (1.0 - mu) / (1.0 + root))
    expected = np.sort([slow, math.sqrt((1.0 + root) / 2.0), 1.0])
    rates = rates_of("L4", mu)
    assert np.sort(rates.imag)[3:] == pytest.approx(expected, abs=1e-13 / slow)
    assert abs(rates.real).max() < 1e-13 / slow


def test_rates_of_the_sun_and_earth_triangular_point(rates_of):
    # P11: extended precision: short 0.9999897383389773 (1.0000102618 yr), long 0.00453025570401343 (220.738 yr)
    slow, fast, vertical = np.sort(rates_of("L4", JORBA).imag)[3:]
    assert slow == pytest.approx(0.00453025570401343, abs=1e-11)
    assert fast == pytest.approx(0.9999897383389773, abs=1e-13)
    assert vertical == pytest.approx(1.0, abs=1e-14)


@pytest.mark.parametrize(
    ("point", "growth", "planar", "vertical"),
    [
        # P12: Jorba and Masdemont 1999, Physica D 132, 189 (attribution from memory)
        ("L1", 2.532659174053, 2.086453564223108, 2.015210662996639),
        # P13, P14: the same formulas in extended precision
        ("L2", 2.4843167201836, 2.057014190774502, 1.985074856305407),
        ("L3", 0.0028250830488, 1.0000026604, 1.0000013302),
    ],
)
def test_rates_at_the_collinear_points(rates_of, point, growth, planar, vertical):
    rates = rates_of(point, JORBA)
    slow = min(growth, 1.0)
    # the printed digits of the growth at L3 are 11 decimals, and it feels roundings like the slow rate above
    assert rates.real.max() == pytest.approx(growth, abs=1e-12 / slow)
    oscillating = np.sort(rates.imag)[-2:]
    printed = 1e-13 if point != "L3" else 1e-10
    assert oscillating == pytest.approx(sorted([vertical, planar]), abs=printed)


@pytest.mark.parametrize(("point", "days"), [("L1", 22.953), ("L2", 23.3997), ("L3", 20577.0)])
def test_growth_time_of_the_unstable_points(equilibrium, point, days):
    # P12 to P14: e-folding times, to the digits printed
    assert 1.0 / equilibrium(point).unstable_rate_1_s() / 86400.0 == pytest.approx(days, rel=3e-5)


def test_fastest_rate_is_the_larger_oscillation(equilibrium):
    # P12
    reference = equilibrium("L1")
    assert reference.fastest_rate_1_s() / reference.rate_rad_s == pytest.approx(2.0864535642, abs=1e-7)


def test_in_plane_oscillation_at_the_first_point_has_the_published_axis_ratio(equilibrium, unit_system):
    # P12: k = 3.229268251936296 (Jorba and Masdemont 1999, from memory)
    values, vectors = np.linalg.eig(equilibrium("L1", system=unit_system(JORBA)).transition(0.0, 0.5))
    k = np.argmin(abs(np.log(values) / 0.5 - 2.086453564223108j))
    assert abs(vectors[1, k] / vectors[0, k]) == pytest.approx(3.229268251936296, abs=1e-11)


@pytest.mark.parametrize(
    ("order", "published"),
    [
        (2, 4.0610740162554),
        (3, 3.0200106527851),
        (4, 3.0305381044887),
        (5, 3.0304316486828),
        (6, 3.0304327251863),
    ],
)
def test_expansion_coefficients_at_the_first_point(order, published):
    # P15: c_n = (mu + (-1)^n (1 - mu) (g / (1 - g))^(n+1)) / g3, Richardson 1980; g itself carries 2e-16 of
    # 0.01, so c_n 1e-13
    g = gamma_of("L1", JORBA)
    coefficient = (JORBA + (-1) ** order * (1.0 - JORBA) * (g / (1.0 - g)) ** (order + 1)) / g**3
    assert coefficient == pytest.approx(published, abs=5e-13)


@pytest.mark.parametrize("point", ["L1", "L2"])
def test_gradient_at_the_near_points_is_that_of_the_expansion(equilibrium, unit_system, point):
    # c2 from the gradient: -g_N / n2 d = c2 (field of rotating slots along N), computed from our gamma by P15
    g = gamma_of(point, JORBA)
    side = 1.0 if point == "L1" else -1.0
    c2 = (JORBA + (1.0 - JORBA) * (g / (1.0 - side * g)) ** 3) / g**3
    field = equilibrium(point, system=unit_system(JORBA)).field(np.array([[0.0, 0.0, 1e-9]]), "rotating")
    assert -field[0, 2] / 1e-9 == pytest.approx(c2, rel=1e-12)


def test_axis_ratios_of_the_modes_at_the_triangular_point(equilibrium, unit_system):
    # P16: 331.1086 and 2.000007 from the eigenvectors in extended precision; the rule 1/sqrt(3 mu) = 331.1100
    # is Murray and Dermott 1999, section 3.8 (from memory), leading order
    values, vectors = np.linalg.eig(equilibrium("L4", system=unit_system(JORBA)).transition(0.0, 0.5))
    rates = np.log(values) / 0.5

    def ratio(rate):
        vector = vectors[:2, np.argmin(abs(rates - 1j * rate))]
        axes = np.linalg.svd(np.stack([vector.real, vector.imag]), compute_uv=False)
        return axes[0] / axes[1]

    assert ratio(0.00453025570401343) == pytest.approx(331.1086, abs=2e-3)
    assert ratio(0.00453025570401343) == pytest.approx(1.0 / math.sqrt(3.0 * JORBA), rel=1e-5)
    assert ratio(0.9999897383389773) == pytest.approx(2.000007, abs=1e-6)
