"""References that move: they solve the equations of motion, close, and are described by their tables."""

import hashlib
import json
import math

import mpmath
import numpy as np
import pytest

from farhold.dynamics.absolute import propagate
from farhold.dynamics.circular import lightness

DAY_S = 86400.0
# what the motion in rotating axes keeps, M^T W M = W (check value O12)
K = np.array([[0.0, 2.0, 0.0], [-2.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
W = np.block([[K, -np.eye(3)], [np.eye(3), np.zeros((3, 3))]])


def flown(reference, state, from_s, to_s, beta=None, **options):
    """Absolute state in R, T, N about the point, SI, after flying one by the adaptive integrator."""
    problem, scale, rate = reference.table.problem, reference.system.scale, reference.rate_rad_s
    start = problem.to_synodic(state / scale)
    path = propagate(
        start, [rate * from_s, rate * to_s], problem.mu, problem.beta if beta is None else beta, **options
    )
    return problem.from_synodic(path.state[-1]) * scale, path.transition


def unitless(reference, matrix):
    """Transition matrix in units of length and 1/n."""
    unit = np.repeat([1.0, reference.rate_rad_s], 3)
    return matrix * (unit / unit[:, None])


def test_segments_of_the_table_meet(orbit):
    # asked: 1e-11; here some roundings of a long double, 1e-19 each where the processor has it
    assert orbit.provenance["closure"] < 100.0 * float(np.finfo(np.longdouble).eps)


def test_reference_asked_for_again_is_the_one_made_before(make_orbit):
    assert make_orbit("lyapunov", ay_m=1e7) is make_orbit("lyapunov", ay_m=1e7)
    assert make_orbit("lyapunov", ay_m=1e7) is not make_orbit("lyapunov", ay_m=2e7)


def test_motion_between_two_times_is_what_the_adaptive_integrator_flies(orbit):
    there, _ = flown(orbit, orbit.motion([3.0 * DAY_S])[0], 3.0 * DAY_S, 33.0 * DAY_S)
    ours = orbit.motion([33.0 * DAY_S])[0]
    # 1e-15 AU of rounding at the start grows by up to 4 in 30 d
    assert ours / orbit.system.scale == pytest.approx(there / orbit.system.scale, abs=2e-14)


def test_orbit_returns_after_its_period(loop):
    times = np.array([0.0, 0.31, 0.77]) * loop.period_s
    before, after = loop.motion(times), loop.motion(times + loop.period_s)
    # a double holds a time of 7e9 s to 1e-6 s, in which the orbit moves a micrometre
    np.testing.assert_allclose(before / loop.system.scale, after / loop.system.scale, atol=1e-15)


def test_halo_flown_for_half_a_period_crosses_squarely(orbits):
    halo = orbits["halo"]
    end, _ = flown(halo, halo.motion([0.0])[0], 0.0, 0.5 * halo.period_s)
    # T, v_R and v_N vanish; the multiplier of 1600 makes 40 of the rounding over half a turn
    assert np.abs((end / halo.system.scale)[[1, 3, 5]]).max() < 1e-13


@pytest.mark.parametrize("kind", ["halo", "short-period"])
def test_table_agrees_with_multiple_precision(orbits, kind):
    # a Taylor integrator of 30 digits, from the digits that the provenance prints
    reference = orbits[kind]
    problem, made = reference.table.problem, reference.provenance
    with mpmath.workdps(30):
        mu, pull = mpmath.mpf(problem.mu), 1 - mpmath.mpf(problem.beta)
        offsets = [[mpmath.mpf(repr(x).split("'")[1]) for x in row] for row in problem.offsets]
        centre = [mpmath.mpf(repr(x).split("'")[1]) for x in problem.centre]

        def rate(_, y):
            total = [2 * y[4] + centre[0] + y[0], -2 * y[3] + centre[1] + y[1], mpmath.mpf(0)]
            for gm, offset in zip(((1 - mu) * pull, mu), offsets, strict=True):
                rho = [offset[k] + y[k] for k in range(3)]
                cube = mpmath.sqrt(sum(x * x for x in rho)) ** 3
                total = [total[k] - gm * rho[k] / cube for k in range(3)]
            return [*y[3:], *total]

        start = [mpmath.mpf(x) for x in made["initial_state"]]
        truth = mpmath.odefun(rate, 0, start, tol=mpmath.mpf("1e-24"))(mpmath.mpf("0.25"))
        ours = reference.table.states(np.array([0.25], dtype=np.longdouble))[0]
        miss = [float(abs(mpmath.mpf(repr(x).split("'")[1]) - y)) for x, y in zip(ours, truth, strict=True)]
    # 1e-3 m is 7e-15; long double keeps 1e-19 where the processor has it, a double 1e-16
    assert max(miss) < max(30.0 * float(np.finfo(np.longdouble).eps), 1e-18)


@pytest.mark.parametrize(("from_d", "to_d"), [(0.0, 20.0), (15.0, 75.0), (40.0, 10.0)])
def test_transition_matrix_is_the_one_of_the_adaptive_integrator(orbit, from_d, to_d):
    _, theirs = flown(orbit, orbit.motion([from_d * DAY_S])[0], from_d * DAY_S, to_d * DAY_S, with_transition=True)
    problem = orbit.table.problem
    turn = np.array([problem.from_synodic(problem.to_synodic(np.zeros(6)) + row) for row in np.eye(6)]).T
    ours = unitless(orbit, orbit.transition(from_d * DAY_S, to_d * DAY_S))
    expected = turn @ theirs[-1] @ turn.T
    # rounding of the start, 1e-16 of 1 AU, is 1e-14 of the distance to the Earth
    np.testing.assert_allclose(ours, expected, rtol=0.0, atol=2e-12 * np.abs(expected).max())


@pytest.mark.parametrize(
    ("a", "b", "c"), [(0.0, 100.0, 170.0), (20.0, 90.0, 50.0), (160.0, 30.0, 5.0), (10.0, 300.0, 420.0)]
)
def test_transition_matrices_compose(orbit, a, b, c):
    a, b, c = (x * DAY_S for x in (a, b, c))
    both = unitless(orbit, orbit.transition(b, c)) @ unitless(orbit, orbit.transition(a, b))
    once = unitless(orbit, orbit.transition(a, c))
    size = (
        np.abs(unitless(orbit, orbit.transition(b, c))).max()
        * np.abs(unitless(orbit, orbit.transition(a, b))).max()
    )
    np.testing.assert_allclose(once, both, rtol=0.0, atol=1e-14 * size)


def test_transition_over_two_periods_is_the_square_of_one(loop):
    once = unitless(loop, loop.transition(0.0, loop.period_s))
    twice = unitless(loop, loop.transition(0.0, 2.0 * loop.period_s))
    np.testing.assert_allclose(twice, once @ once, rtol=0.0, atol=1e-13 * np.abs(once).max() ** 2)


@pytest.mark.parametrize(("from_d", "to_d"), [(0.0, 30.0), (120.0, 20.0), (0.0, 180.0)])
def test_transition_matrix_is_symplectic(orbit, from_d, to_d):
    matrix = unitless(orbit, orbit.transition(from_d * DAY_S, to_d * DAY_S))
    np.testing.assert_allclose(matrix.T @ W @ matrix, W, atol=2e-15 * np.abs(matrix).max() ** 2)


def test_pressure_response_is_the_difference_of_flights(orbit):
    start, step = orbit.motion([5.0 * DAY_S])[0], 1e-7
    beta = orbit.table.problem.beta
    more, _ = flown(orbit, start, 5.0 * DAY_S, 45.0 * DAY_S, beta + step)
    less, _ = flown(orbit, start, 5.0 * DAY_S, 45.0 * DAY_S, beta - step)
    ours = orbit.pressure_response(5.0 * DAY_S, 45.0 * DAY_S)
    # rounding 1e-15 over a step of 1e-7, and the square of the step
    np.testing.assert_allclose(
        ours / orbit.system.scale, (more - less) / orbit.system.scale / (2.0 * step), atol=1e-7
    )


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_arc_motion_is_the_same_as_one_time_after_another(orbit, sign):
    start, taus = 40.0 * DAY_S, sign * np.array([0.0, 0.7, 3.0, 11.0, 29.0]) * DAY_S
    sun, earth, phi, response = orbit.arc_motion(start, taus)
    suns, earths = orbit.primaries_at(start + taus)
    np.testing.assert_allclose(sun, suns, atol=1e-4)
    np.testing.assert_allclose(earth, earths, atol=1e-4)
    for k, tau in enumerate(taus):
        expected = orbit.transition(start, start + tau)
        np.testing.assert_allclose(phi[k], expected, rtol=1e-13, atol=1e-15 * np.abs(expected).max())
        np.testing.assert_allclose(response[k], orbit.pressure_response(start, start + tau), rtol=1e-13)


def test_primaries_are_one_astronomical_unit_apart(orbit):
    sun, earth = orbit.primaries_at(np.array([0.0, 10.0, 100.0]) * DAY_S)
    np.testing.assert_allclose(np.linalg.norm(sun - earth, axis=1), orbit.system.length_m, rtol=1e-15)


def test_primaries_follow_the_motion(orbit):
    first, later = 2.0 * DAY_S, 50.0 * DAY_S
    moved = np.diff(orbit.motion([first, later])[:, :3], axis=0)[0]
    sun = orbit.primaries_m(later)[0] - orbit.primaries_m(first)[0]
    np.testing.assert_allclose(sun, moved, atol=1e-4)


def test_equilibrium_arc_is_that_of_its_transition_and_of_a_still_point(ref_l2):
    taus = np.array([0.0, 2.0, 9.0, 30.0]) * DAY_S
    sun, earth, phi, response = ref_l2.arc_motion(123.0, taus)
    np.testing.assert_array_equal(np.ptp(sun, axis=0), 0.0)
    np.testing.assert_allclose(earth[2], ref_l2.primaries_m()[1], rtol=1e-15)
    for k, tau in enumerate(taus):
        np.testing.assert_allclose(phi[k], ref_l2.transition(0.0, tau), rtol=1e-13, atol=1e-20)
        np.testing.assert_allclose(response[k], ref_l2.pressure_response(0.0, tau), rtol=1e-13)


def test_references_say_whether_they_stand_still(orbit, ref_l4):
    assert (orbit.autonomous, ref_l4.autonomous) == (False, True)
    assert ref_l4.span_s is None
    assert ref_l4.stability_index is None


@pytest.mark.parametrize(("family", "sign"), [("north", 1.0), ("south", -1.0)])
def test_halo_goes_as_far_along_n_as_asked_and_no_farther(make_orbit, family, sign):
    halo = make_orbit("halo", family=family, az_m=6e8)
    height = sign * halo.motion(np.linspace(0.0, halo.period_s, 2001))[:, 2]
    assert height[0] == pytest.approx(6e8, rel=1e-11)
    assert height.max() <= 6e8 * (1.0 + 1e-12)
    assert -height.min() < 6e8


def test_southern_halo_mirrors_the_northern(make_orbit, orbits):
    south = make_orbit("halo", family="south")
    times = np.linspace(0.0, 2e7, 9)
    mirror = np.array([1.0, 1.0, -1.0, 1.0, 1.0, -1.0])
    scale = south.system.scale
    np.testing.assert_allclose(
        south.motion(times) * mirror / scale, orbits["halo"].motion(times) / scale, atol=1e-13
    )


def test_halo_of_an_asked_period_has_it_and_is_that_of_its_amplitude(make_orbit):
    by_period = make_orbit("halo", period_s=179.0 * DAY_S, az_m=None)
    assert by_period.period_s == pytest.approx(179.0 * DAY_S, rel=1e-15)
    by_height = make_orbit("halo", az_m=float(by_period.motion([0.0])[0, 2]))
    assert by_height.period_s == pytest.approx(179.0 * DAY_S, rel=1e-12)


def test_lyapunov_orbit_goes_as_far_along_t_as_asked(orbits):
    lyapunov = orbits["lyapunov"]
    along = np.abs(lyapunov.motion(np.linspace(0.0, lyapunov.period_s, 4001))[:, 1])
    # 4001 looks miss the turning point by at most 1e-6 of it
    assert along.max() == pytest.approx(3e8, rel=1e-6)
    assert along.max() <= 3e8 * (1.0 + 1e-12)


@pytest.mark.parametrize(("kind", "ratio"), [("short-period", 2.000007), ("long-period", 331.1)])
def test_triangular_orbit_turns_back_where_asked_with_the_published_axes(make_orbit, kind, ratio):
    # P16: axes 2.000007 and 331.1086 to 1 in the linear modes, without pressure
    orbit = make_orbit(kind, amplitude_m=1e6, pressure_area_m2_kg=0.0)
    path = orbit.motion(np.linspace(0.0, orbit.period_s, 2001))
    assert path[:, 1].max() == pytest.approx(1e6, rel=1e-5)
    principal = np.linalg.svd(path[:, :2] - path[:, :2].mean(axis=0), compute_uv=False)
    assert principal[0] / principal[1] == pytest.approx(ratio, rel=2e-3)


def test_periods_about_l4_are_the_published_ones(make_orbit):
    # P11: 1.0000102618 and 220.738092 sidereal years
    year = 2.0 * math.pi / make_orbit("short-period").rate_rad_s
    short = make_orbit("short-period", point="L4", amplitude_m=1e6, pressure_area_m2_kg=0.0)
    long = make_orbit("long-period", point="L4", amplitude_m=1e6, pressure_area_m2_kg=0.0)
    assert short.period_s / year == pytest.approx(1.0000102618, abs=2e-10)
    assert long.period_s / year == pytest.approx(220.738092, abs=2e-6)


@pytest.mark.parametrize("kind", ["short-period", "long-period"])
def test_orbits_about_the_triangular_points_are_stable(orbits, kind):
    assert orbits[kind].unstable_rate_1_s() == 0.0
    assert orbits[kind].stability_index == pytest.approx(1.0, abs=1e-9)


def test_small_halo_grows_as_its_point(make_orbit, equilibrium):
    # e-folding of the point 23.4 d (P13); on the smallest halo slower by some per cent
    point = 1.0 / equilibrium("L2").unstable_rate_1_s() / DAY_S
    halo = 1.0 / make_orbit("halo", az_m=1e7, pressure_area_m2_kg=0.0).unstable_rate_1_s() / DAY_S
    assert point < halo < 1.1 * point


def test_lissajous_stays_near_its_linear_part(orbits):
    path = orbits["lissajous"].motion(np.linspace(0.0, 4e7, 1000))
    assert np.abs(path[:, 1]).max() == pytest.approx(2.5e8, rel=0.1)
    assert np.abs(path[:, 2]).max() == pytest.approx(1e8, rel=0.15)
    assert orbits["lissajous"].stability_index is None
    assert orbits["lissajous"].period_s is None


@pytest.mark.parametrize("kind", ["halo", "lyapunov", "short-period"])
def test_phase_shifts_the_epoch_along_the_orbit(make_orbit, orbits, kind):
    shifted, whole = make_orbit(kind, phase_rad=math.pi / 2.0), orbits[kind]
    times = np.array([0.0, 1e6, 9e6])
    scale = whole.system.scale
    np.testing.assert_allclose(
        shifted.motion(times) / scale, whole.motion(times + 0.25 * whole.period_s) / scale, atol=2e-15
    )


@pytest.mark.parametrize("turns", [-1.0, 1.0, 5.0])
def test_phase_of_whole_turns_changes_nothing(make_orbit, orbits, turns):
    turned = make_orbit("halo", phase_rad=turns * 2.0 * math.pi)
    scale = turned.system.scale
    np.testing.assert_allclose(turned.motion([1e6]) / scale, orbits["halo"].motion([1e6]) / scale, atol=1e-15)


def test_provenance_is_the_same_each_time_and_can_be_written(make_anew, orbit):
    again = make_anew(orbit.kind)
    assert again is not orbit
    texts = [json.dumps(one.provenance, sort_keys=True) for one in (orbit, again)]
    assert len({hashlib.sha256(text.encode()).hexdigest() for text in texts}) == 1
    assert orbit.provenance["beta"] == lightness(0.026)


def test_pressure_moves_the_orbit_towards_the_sun(make_orbit, orbits):
    # S6: about 165.1 km per 1e-5 of beta at L2, for the mean of the orbit as for the point
    bare = make_orbit("halo", pressure_area_m2_kg=0.0)
    means = [np.mean(one.motion(np.linspace(0.0, one.period_s, 201)[:-1])[:, 0]) for one in (bare, orbits["halo"])]
    assert means[1] - means[0] == pytest.approx(-165.1e3 * lightness(0.026) / 1e-5, rel=0.1)


SPAN = 4e7
REQUESTS = {
    "motion": lambda ref, t: ref.motion([t]),
    "primaries": lambda ref, t: ref.primaries_m(t),
    "transition-from": lambda ref, t: ref.transition(t, 1e6),
    "transition-to": lambda ref, t: ref.transition(1e6, t),
    "pressure": lambda ref, t: ref.pressure_response(1e6, t),
    "arc": lambda ref, t: ref.arc_motion(1e6, [t - 1e6]),
    "field": lambda ref, t: ref.field(np.ones((1, 3)), "rotating", t),
    "pressure-field": lambda ref, t: ref.pressure_field(np.ones((1, 3)), t),
}


@pytest.mark.parametrize("time", [0.0, SPAN])
@pytest.mark.parametrize("ask", REQUESTS.values(), ids=REQUESTS)
def test_lissajous_answers_at_the_ends_of_its_span(orbits, ask, time):
    ask(orbits["lissajous"], time)


@pytest.mark.parametrize("time", [np.nextafter(SPAN, 1e9), SPAN + 1e6, -1e-9, -1e6, np.nan])
@pytest.mark.parametrize("ask", [ask for name, ask in REQUESTS.items() if name != "arc"])
def test_lissajous_refuses_times_outside_its_span(orbits, ask, time):
    with pytest.raises(ValueError, match=r"reference time: got .* s \(allowed: 0 to 40000000 s from the epoch"):
        ask(orbits["lissajous"], time)


@pytest.mark.parametrize("tau", [SPAN - 1e6 + 1e-8, -1e6 - 1e-9])
def test_lissajous_refuses_arcs_beyond_its_span(orbits, tau):
    with pytest.raises(ValueError, match="the span of the lissajous"):
        orbits["lissajous"].arc_motion(1e6, [tau])


def test_periodic_reference_refuses_only_times_that_are_not_finite(loop):
    assert loop.span_s is None
    with pytest.raises(ValueError, match=r"reference time: got inf s \(allowed: finite times\)"):
        loop.motion([np.inf])
