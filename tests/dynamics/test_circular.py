"""The circular model: its points are where the equations say, and what it refuses."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from farhold.dynamics.circular import POINTS, SUN_EARTH, ThreeBody, libration_point, lightness
from farhold.errors import DomainError

ratios = st.floats(1e-9, 0.49)
pressures = st.floats(0.0, 0.4)


@given(mu=ratios, beta=pressures, point=st.sampled_from(POINTS))
def test_resultant_vanishes_at_every_point(mu, beta, point):
    # balance of both attractions, pressure and centrifugal force; a rounding of place times the gradient of
    # the nearer attraction, mu / r2^3, is what is left
    place = libration_point(point, mu, beta)
    r1, r2 = np.add(place, [mu, 0.0, 0.0]), place - [1.0 - mu, 0.0, 0.0]
    d1, d2 = np.linalg.norm(r1), np.linalg.norm(r2)
    pull = (1.0 - mu) * (1.0 - beta) * r1 / d1**3 + mu * r2 / d2**3
    left = place * [1.0, 1.0, 0.0] - pull
    assert np.linalg.norm(left) <= 4e-15 * (1.0 + 1.0 / d1**3 + mu / d2**3)


@given(mu=ratios, beta=pressures)
def test_points_lie_in_their_places(mu, beta):
    l1, l2, l3, l4, l5 = (libration_point(point, mu, beta) for point in POINTS)
    assert l3[0] < -mu < l1[0] < 1.0 - mu < l2[0]
    assert l4[1] > 0.0
    assert (l5 == l4 * [1.0, -1.0, 1.0]).all()


@given(beta=st.floats(0.0, 0.05))
def test_pressure_moves_every_point_towards_the_sun_or_keeps_it(beta):
    mu = SUN_EARTH.mu
    sun = np.array([-mu, 0.0, 0.0])
    distances = [
        [np.linalg.norm(libration_point(point, mu, b) - sun) for b in (beta, 0.0)] for point in ("L1", "L2", "L4")
    ]
    assert all(pushed <= bare for pushed, bare in distances)


def test_scales_follow_from_the_masses_and_the_length():
    # Kepler's third law: masses of 3 and 1 at distance 4 turn at sqrt(4 / 64) = 1/4
    system = ThreeBody(3.0, 1.0, 4.0)
    assert system.mu == 0.25
    assert system.rate_rad_s == 0.25
    assert system.speed_m_s == 1.0
    assert system.scale.tolist() == [4.0, 4.0, 4.0, 1.0, 1.0, 1.0]


@given(area=st.floats(0.0, 100.0))
def test_lightness_is_proportional(area):
    assert lightness(area) == pytest.approx(area * lightness(1.0), rel=1e-15)


@pytest.mark.parametrize(
    ("point", "mu", "beta", "text"),
    [
        ("L6", 0.1, 0.0, "reference.point: got 'L6' (allowed: L1 L2 L3 L4 L5)"),
        ("L4", 0.0, 0.0, "reference.mu: got 0.0 (allowed: above 0 and below 0.5)"),
        ("L4", 0.5, 0.0, "reference.mu: got 0.5 (allowed: above 0 and below 0.5)"),
        ("L4", float("nan"), 0.0, "reference.mu: got nan (allowed: above 0 and below 0.5)"),
        ("L1", 0.1, 0.5, "reference.pressure_area: gives beta 0.5 (allowed: 0 <= beta < 0.5)"),
        ("L1", 0.1, -1e-9, "reference.pressure_area: gives beta -1e-09 (allowed: 0 <= beta < 0.5)"),
    ],
)
def test_unlawful_input_is_refused_by_name(point, mu, beta, text):
    with pytest.raises(DomainError) as refused:
        libration_point(point, mu, beta)
    assert str(refused.value) == text
