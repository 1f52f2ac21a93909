"""The equilibrium reference: fields against plain differences, refusals, and the room it lives in."""

import mpmath
import numpy as np
import pytest

from farhold.dynamics.circular import SUN_EARTH
from farhold.dynamics.reference import make_reference
from farhold.errors import CaseError, DomainError

POINTS = ["L1", "L2", "L3", "L4", "L5"]


def attraction_difference(reference, place_m):
    """Attraction at the place less that at the reference, by plain subtraction in forty digits."""
    mp = mpmath.MPContext()
    mp.dps = 40
    total = [mp.mpf(0)] * 3
    for gm, rho in zip((reference.gm_m3_s2[0], reference.gm_m3_s2[2]), reference.primaries_m(), strict=True):
        at = [mp.mpf(float(x)) for x in rho]
        there = [a + mp.mpf(float(d)) for a, d in zip(at, place_m, strict=True)]
        r3 = [mp.sqrt(mp.fdot(v, v)) ** 3 for v in (there, at)]
        for k in range(3):
            total[k] -= mp.mpf(gm) * (there[k] / r3[0] - at[k] / r3[1])
    return np.array([float(v) for v in total])


@pytest.mark.parametrize("size_m", [1e-3, 1.0, 1e6, 2e8])
@pytest.mark.parametrize("point", POINTS)
def test_field_among_the_stars_is_the_difference_of_attractions(equilibrium, point, size_m):
    # without cancellation: fifteen digits at any distance
    reference = equilibrium(point, pressure_area_m2_kg=0.026)
    place = size_m * np.array([0.6, -0.48, 0.64])
    ours = reference.field(place[None], "inertial")[0]
    exact = attraction_difference(reference, place)
    assert ours == pytest.approx(exact, abs=1e-14 * np.linalg.norm(exact) + 1e-30)


def test_field_in_rotating_axes_adds_the_centrifugal_part(ref_l4):
    place = np.array([[3e5, -4e5, 5e5]])
    added = ref_l4.field(place, "rotating") - ref_l4.field(place, "inertial")
    assert added[0] == pytest.approx(SUN_EARTH.rate_rad_s**2 * np.array([3e5, -4e5, 0.0]), rel=1e-12)


@pytest.mark.parametrize("point", POINTS)
def test_pressure_pushes_away_from_the_sun_by_the_inverse_square(equilibrium, point):
    reference = equilibrium(point)
    sun = reference.primaries_m()[0]
    near, far = reference.pressure_field(np.array([0.0 * sun, sun]))
    assert near / np.linalg.norm(near) == pytest.approx(sun / np.linalg.norm(sun), abs=1e-15)
    assert far == pytest.approx(near / 4.0, rel=1e-14)
    assert np.linalg.norm(near) == pytest.approx(SUN_EARTH.gm1_m3_s2 / (sun @ sun), rel=1e-14)


@pytest.mark.parametrize("point", POINTS)
def test_response_to_pressure_grows_from_nothing_as_half_the_square_of_time(equilibrium, point):
    reference = equilibrium(point)
    push = reference.pressure_field(np.zeros((1, 3)))[0]
    response = reference.pressure_response(0.0, 3600.0)
    # the next order is 2 n t / 3 = 5e-4 of it
    assert response[:3] == pytest.approx(0.5 * push * 3600.0**2, abs=1e-3 * 0.5 * np.linalg.norm(push) * 3600.0**2)
    assert response[3:] == pytest.approx(push * 3600.0, abs=2e-3 * np.linalg.norm(push) * 3600.0)
    assert (reference.pressure_response(50.0, 50.0) == 0.0).all()


@pytest.mark.parametrize("point", POINTS)
def test_response_to_pressure_composes_with_the_transition(equilibrium, point):
    # s(0, 2t) = Phi s(0, t) + s(0, t)
    reference = equilibrium(point)
    once = reference.pressure_response(0.0, 2e6)
    twice = reference.pressure_response(0.0, 4e6)
    assert reference.transition(2e6, 4e6) @ once + once == pytest.approx(twice, rel=1e-10)


@pytest.mark.parametrize(
    ("point", "stable"), [("L1", False), ("L2", False), ("L3", False), ("L4", True), ("L5", True)]
)
def test_growth_rate_tells_the_stable_points(equilibrium, point, stable):
    assert (equilibrium(point).unstable_rate_1_s() == 0.0) == stable


def test_public_facts_of_the_reference(ref_l5):
    assert (ref_l5.point, ref_l5.kind, ref_l5.model, ref_l5.period_s) == ("L5", "equilibrium", "circular", None)


@pytest.mark.parametrize("area", [-1e-9, float("nan"), float("inf")])
def test_unlawful_pressure_is_refused_by_name(equilibrium, area):
    with pytest.raises(DomainError) as refused:
        equilibrium("L4", pressure_area_m2_kg=area)
    assert str(refused.value) == f"reference.pressure_area: got {area!r} m2/kg (allowed: 0 m2/kg or above)"


def test_unknown_point_is_refused_by_name(equilibrium):
    with pytest.raises(DomainError) as refused:
        equilibrium("L0")
    assert str(refused.value) == "reference.point: got 'L0' (allowed: L1 L2 L3 L4 L5)"


def test_unknown_kind_is_refused_by_name():
    with pytest.raises(CaseError, match=r"^reference\.kind: got 'spiral' \(allowed: .*equilibrium"):
        make_reference("spiral")
