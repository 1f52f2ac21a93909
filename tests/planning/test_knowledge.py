"""How long positions stay known, against closed forms and the design's figures."""

import numpy as np
import pytest
from scipy.optimize import brentq

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.dispersion import carried_covariance
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.errors import DomainError
from farhold.planning.knowledge import horizon_days, rms_m

FIX = {"position_m": 1.0, "velocity_m_s": 1e-4}


def test_a_metre_and_a_tenth_millimetre_a_second_are_ten_metres_after_two_thirds_of_a_day(ref_l4):
    # the 0.66 d; free motion gives sqrt(3 (1 + (1e-4 t)^2)) = 10 at 0.657 d, gradients 1e-4 of that
    free = np.sqrt(100.0 / 3.0 - 1.0) / 1e-4 / DAY_S
    assert horizon_days(ref_l4, **FIX) == pytest.approx(0.66, abs=0.005)
    assert horizon_days(ref_l4, **FIX) == pytest.approx(free, rel=1e-3)


@pytest.mark.parametrize("after_s", [0.0, 1e3, 1e4, 5e4])
@pytest.mark.parametrize("acceleration", [0.0, 1e-7])
def test_error_soon_after_the_fix_is_that_of_free_motion(ref_l1, after_s, acceleration):
    free = np.sqrt(3.0 * (1.0 + (1e-4 * after_s) ** 2 + (0.5 * acceleration * after_s**2) ** 2))
    assert rms_m(ref_l1, after_s, **FIX, acceleration_m_s2=acceleration) == pytest.approx(free, rel=1e-3)


def test_velocity_known_to_a_tenth_millimetre_a_second_drifts_as_the_design_says(ref_l4):
    # 8.6 m a day and axis, 60 m in 7 d, 280/251/248 m along R, T, N in 30 d
    def axes_m(days):
        fix = np.diag([0.0] * 3 + [1e-8] * 3)
        return np.sqrt(np.diag(carried_covariance(ref_l4, fix, 0.0, days * DAY_S)[0])[:3])

    assert axes_m(1.0) == pytest.approx([8.64] * 3, rel=0.01)
    assert axes_m(7.0) == pytest.approx([60.0] * 3, rel=0.02)
    assert axes_m(30.0) == pytest.approx([280.0, 251.0, 248.0], abs=0.5)
    rms = rms_m(ref_l4, 30.0 * DAY_S, position_m=0.0, velocity_m_s=1e-4)
    assert rms == pytest.approx(np.linalg.norm([280.0, 251.0, 248.0]), abs=1.0)


@pytest.mark.parametrize(("acceleration", "asked"), [(1e-9, 10.0), (1e-10, 1.0), (1e-8, 100.0)])
def test_acceleration_alone_falls_as_its_square_of_time(ref_l4, acceleration, asked):
    # sqrt(3) a t2/2 = asked; within a tenth of a turn
    free = np.sqrt(2.0 * asked / (np.sqrt(3.0) * acceleration)) / DAY_S
    got = horizon_days(ref_l4, position_m=0.0, velocity_m_s=0.0, acceleration_m_s2=acceleration, asked_m=asked)
    assert got == pytest.approx(free, rel=0.02)


@pytest.mark.parametrize("point", ["L1", "L2", "L3", "L4", "L5"])
@pytest.mark.parametrize("asked", [10.0, 1e3, 3e4])
def test_error_at_the_horizon_is_the_one_asked_and_less_before(equilibrium, point, asked):
    reference = equilibrium(point)
    days = horizon_days(reference, **FIX, asked_m=asked)
    assert rms_m(reference, days * DAY_S, **FIX) == pytest.approx(asked, rel=1e-3)
    assert max(rms_m(reference, share * days * DAY_S, **FIX) for share in np.linspace(0.0, 0.99, 12)) < asked


def test_horizon_is_that_of_flown_nodes(ref_l1):
    # 4000 nodes off by as much as the fix: their rms at the horizon, to 3 standard errors and more
    days = horizon_days(ref_l1, **FIX, asked_m=1e4)
    states = np.random.default_rng(2).normal(size=(4000, 6)) * np.repeat([1.0, 1e-4], 3)
    place = fly(ref_l1, states, [days * DAY_S]).state[:, 0, :3]
    assert np.sqrt((place**2).sum(axis=1).mean()) == pytest.approx(1e4, rel=0.05)


@pytest.mark.parametrize("asked", [1.7, 0.1])
def test_what_is_asked_below_the_fix_is_lost_at_once(ref_l4, asked):
    # sqrt(3) times a metre is 1.73 m
    assert horizon_days(ref_l4, **FIX, asked_m=asked) == 0.0


@pytest.mark.parametrize("fix", [FIX, {"position_m": 0.0, "velocity_m_s": 0.0}])
def test_error_that_never_grows_so_far_has_no_horizon(ref_l4, fix):
    # some 300 m after 30 d and tens of kilometres after ten years
    assert horizon_days(ref_l4, **fix, asked_m=1e7) is None


@pytest.mark.parametrize("shortfall", [0.99, 1.01])
def test_horizon_beyond_the_longest_time_is_none(ref_l4, shortfall):
    longest = shortfall * horizon_days(ref_l4, **FIX)
    got = horizon_days(ref_l4, **FIX, longest_days=longest)
    assert (got is None) == (shortfall < 1.0)


def test_horizon_keeps_within_the_span_of_its_reference(ref_l4):
    span_s = 0.2 * YEAR_S
    orbit = make_reference(
        "lissajous", point="L2", epoch=ref_l4.epoch, pressure_area_m2_kg=0.0, ay_m=1e8, az_m=1e8, span_s=span_s
    )
    assert horizon_days(orbit, **FIX, asked_m=1e9) is None
    start_s = span_s - 0.5 * DAY_S
    assert horizon_days(orbit, **FIX, start_s=start_s) is None
    assert horizon_days(orbit, **FIX, start_s=start_s - DAY_S) == pytest.approx(0.657, abs=0.005)


def test_growth_at_l1_is_that_of_its_unstable_mode(ref_l1):
    # late horizons lie one e-folding apart for each e in what is asked
    days = [horizon_days(ref_l1, **FIX, asked_m=asked) for asked in (1e6, np.e * 1e6)]
    assert days[1] - days[0] == pytest.approx(1.0 / (ref_l1.unstable_rate_1_s() * DAY_S), rel=1e-3)


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"position_m": -1.0}, "knowledge.position: got -1.0 (allowed: 0 or above, finite)"),
        ({"velocity_m_s": np.nan}, "knowledge.velocity: got nan (allowed: 0 or above, finite)"),
        ({"acceleration_m_s2": np.inf}, "knowledge.acceleration: got inf (allowed: 0 or above, finite)"),
        ({"asked_m": 0.0}, "knowledge.asked_m: got 0.0 (allowed: above 0 m)"),
        ({"asked_m": np.nan}, "knowledge.asked_m: got nan (allowed: above 0 m)"),
    ],
)
def test_unlawful_errors_are_refused_by_name(ref_l4, change, text):
    with pytest.raises(DomainError) as refused:
        horizon_days(ref_l4, **{**FIX, **change})
    assert str(refused.value) == text


def test_first_crossing_is_found_where_the_error_swings(ref_l4):
    # position errors alone swing by the year: the first time, by a scan of quarter days
    fix = {"position_m": 1.0, "velocity_m_s": 0.0}
    asked = 0.8 * max(rms_m(ref_l4, day * DAY_S, **fix) for day in range(0, 366, 3))
    days = np.arange(0.0, 366.0, 0.25)
    errors = np.array([rms_m(ref_l4, day * DAY_S, **fix) - asked for day in days])
    first = int(np.flatnonzero(errors > 0.0)[0])
    exact = brentq(lambda day: rms_m(ref_l4, day * DAY_S, **fix) - asked, days[first - 1], days[first])
    assert horizon_days(ref_l4, **fix, asked_m=asked) == pytest.approx(exact, abs=1e-3)
