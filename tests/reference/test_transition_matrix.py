"""Identities of the transition matrix, on a published halo and at the equilibria (check value O12)."""

import numpy as np
import pytest
from scipy.linalg import block_diag

from farhold.dynamics.absolute import propagate

MU = 3.0542e-6
HALO = np.array([1.0110059685997803, 0.0, 4.5638537751076817e-3, 0.0, -1.1344790710813389e-2, 0.0])
PERIOD = 3.0803024932763416
# the form kept by motion in rotating axes, whose velocities are no canonical momenta
CORIOLIS = np.array([[0.0, 2.0, 0.0], [-2.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
FORM = np.block([[CORIOLIS, -np.eye(3)], [np.eye(3), np.zeros((3, 3))]])


@pytest.fixture(scope="module")
def monodromy():
    """Matrix over one period of the JPL catalogue's Sun-Earth L2 halo 1197 (O4)."""
    return propagate(HALO, [0.0, PERIOD], MU, with_transition=True).transition[-1]


def test_transition_matrix_begins_as_the_identity():
    assert (propagate(HALO, [0.0, 1.0], MU, with_transition=True).transition[0] == np.eye(6)).all()


def test_transition_matrix_has_unit_determinant(monodromy):
    # Liouville; entries of 1e3 with 1e-13 each
    assert np.linalg.det(monodromy) == pytest.approx(1.0, abs=1e-8)


def test_transition_matrix_keeps_the_form_of_the_rotating_axes(monodromy):
    # entries of 1e3, squared, at 1e-15
    assert monodromy.T @ FORM @ monodromy == pytest.approx(FORM, abs=5e-9)


def test_multipliers_of_the_halo_are_reciprocal_and_the_published_ones(monodromy):
    # O4: 996.461 and its inverse, a pair on the unit circle, a pair at 1; index (l + 1/l)/2 = 498.231. The
    # pair at 1 is defective: it splits by the root of the error, 1e-5
    values = np.linalg.eigvals(monodromy)
    values = values[np.argsort(-abs(values))]
    assert values[0].real == pytest.approx(996.461, abs=2e-3)
    assert values[0] * values[-1] == pytest.approx(1.0, abs=1e-8)
    assert 0.5 * (values[0] + values[-1]).real == pytest.approx(498.231, abs=1e-3)
    assert abs(values[1:5]) == pytest.approx(1.0, abs=2e-4)
    assert np.sort(abs(values[1:5] - 1.0))[:2] == pytest.approx(0.0, abs=2e-4)


def test_velocity_along_the_orbit_returns_to_itself(monodromy):
    # the derivative of the path is a solution of the variational equations, so an eigenvector of value 1
    step = 1e-3
    ahead = propagate(HALO, [0.0, step], MU).state[-1]
    behind = propagate(HALO, [0.0, -step], MU).state[-1]
    flow = (ahead - behind) / (2.0 * step)
    # multiplier 1e3 times the difference formula's h2 |d3x| / 6 = 1e-7
    assert monodromy @ flow == pytest.approx(flow, abs=1e-3 * np.linalg.norm(flow))


@pytest.mark.parametrize("column", range(6))
def test_transition_matrix_is_the_derivative_of_the_flight(column):
    # central differences of step h: third derivatives (1e6 near the Earth, 1e4 h2 = 1e-4 relative) and
    # roundings 1e-15 / h = 1e-8
    h = 1e-7
    push = h * np.eye(6)[column]
    after = [propagate(HALO + sign * push, [0.0, 1.0], MU).state[-1] for sign in (1.0, -1.0)]
    matrix = propagate(HALO, [0.0, 1.0], MU, with_transition=True).transition[-1]
    assert matrix[:, column] == pytest.approx((after[0] - after[1]) / (2.0 * h), abs=2e-6 * np.abs(matrix).max())


def test_transition_matrices_compose():
    whole = propagate(HALO, [0.0, 1.0, 2.0], MU, with_transition=True)
    second = propagate(whole.state[1], [1.0, 2.0], MU, with_transition=True)
    product = second.transition[-1] @ whole.transition[1]
    assert product == pytest.approx(whole.transition[2], rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("point", ["L1", "L2", "L3", "L4", "L5"])
@pytest.mark.parametrize("time", [0.5, 2.0, -1.3])
def test_transition_at_an_equilibrium_is_that_of_the_variational_equations(equilibrium, unit_system, point, time):
    # two methods: the matrix exponential in R, T, N against the integration of the variational equations
    # in the barycentric frame; the equilibrium's place carries 1e-16 of 0.01, grown like the matrix itself
    mu = 0.01215
    reference = equilibrium(point, system=unit_system(mu))
    start = np.append(reference.position_m, np.zeros(3))
    angle = {"L3": np.pi, "L4": np.pi / 3.0, "L5": -np.pi / 3.0}.get(point, 0.0)
    c, s = np.cos(angle), np.sin(angle)
    turn = block_diag(*[np.array([[c, s, 0.0], [-s, c, 0.0], [0.0, 0.0, 1.0]])] * 2)
    flown = propagate(start, [0.0, time], mu, with_transition=True).transition[-1]
    ours = reference.transition(0.0, time)
    assert ours == pytest.approx(turn @ flown @ turn.T, abs=1e-10 * np.abs(ours).max())


@pytest.mark.parametrize("point", ["L1", "L2", "L3", "L4", "L5"])
def test_transition_at_an_equilibrium_keeps_volume_and_form(equilibrium, unit_system, point):
    matrix = equilibrium(point, system=unit_system(0.01215)).transition(0.0, 2.0)
    assert np.linalg.det(matrix) == pytest.approx(1.0, abs=1e-9)
    assert matrix.T @ FORM @ matrix == pytest.approx(FORM, abs=1e-14 * np.abs(matrix).max() ** 2)


@pytest.mark.parametrize("point", ["L2", "L4"])
def test_transition_in_si_units_is_the_scaled_one(equilibrium, unit_system, point):
    real = equilibrium(point)
    rate = real.rate_rad_s
    scale = np.diag([1.0, 1.0, 1.0, rate, rate, rate])
    scaled = scale @ equilibrium(point, system=unit_system(real.system.mu)).transition(0.0, 1.7) / np.diag(scale)
    assert real.transition(0.0, 1.7 / rate) == pytest.approx(scaled, rel=1e-9, abs=1e-9 * np.abs(scaled).max())


@pytest.mark.parametrize("point", ["L1", "L4"])
def test_transition_backwards_is_the_inverse(equilibrium, point):
    reference = equilibrium(point)
    there, back = reference.transition(0.0, 3e6), reference.transition(3e6, 0.0)
    scale = np.repeat([1.0, 1.0 / reference.rate_rad_s], 3)
    assert (there @ back) * scale[:, None] / scale == pytest.approx(np.eye(6), abs=1e-10)
