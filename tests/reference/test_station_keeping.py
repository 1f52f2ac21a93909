"""Station keeping of halos against published ranges (check values K1 to K3): a check of size, not of digits."""

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S, Epoch
from farhold.dynamics.reference import make_reference
from farhold.planning.holding.loop import Loop, Spacecraft, hold

EPOCH = Epoch.from_iso("2035-03-20T00:00:00")


def halo(point):
    return make_reference("halo", point=point, epoch=EPOCH, pressure_area_m2_kg=0.0, family="north", az_m=2e8)


def kept(point, policy, cadence_d, fix_velocity_m_s, years=2, seed=3):
    """Hold a node on a halo for some years: one orbit solution of the given class at each decision."""
    loop = Loop(
        rule="natural",
        policy=policy,
        start_s=0.0,
        span_s=cadence_d * DAY_S * round(365.25 * years / cadence_d),
        cadence_s=cadence_d * DAY_S,
        fix_s=cadence_d * DAY_S,
        box_m=1e9,
        fix_position_m=1e3,
        fix_velocity_m_s=fix_velocity_m_s,
        filtered=False,
        acceleration_m_s2=1e-9,
        magnitude=0.02,
        pointing_rad=0.01,
    )
    craft = Spacecraft(np.zeros((1, 3)), np.zeros(1), np.zeros(1), np.zeros(1))
    return hold(halo(point), loop, craft, 300, np.random.default_rng(seed))


@pytest.mark.parametrize("point", ["L1", "L2"])
@pytest.mark.parametrize("policy", ["unstable-mode", "target-point"])
@pytest.mark.parametrize(
    ("cadence_d", "fix_velocity_m_s", "low", "high"),
    [
        # K1, Dunham & Roberts 2001 (abstract): about four burns a year, "just over 2 m/s per year" on one, four
        # times that on an earlier one; here 1 cm/s at the decision
        (90.0, 0.01, 1.0, 8.0),
        # K2, Yoon et al. 2014 (abstract): a burn every 21 d and velocity known to better than 2 cm/s; K3, 1 to
        # 2 m/s a year for several (from memory, not confirmed): half of that is in the range
        (21.0, 0.02, 0.5, 8.0),
    ],
)
def test_holding_a_halo_costs_what_missions_of_its_kind_paid(
    point, policy, cadence_d, fix_velocity_m_s, low, high
):
    found = kept(point, policy, cadence_d, fix_velocity_m_s)
    assert low < found.steady_m_s_yr.mean() < high
    # e-folding of 23 d: without control an error of 1 cm/s is out of sight in two years
    assert np.isfinite(found.worst_m).all()
    assert np.median(found.worst_m) < 2e7


@pytest.mark.parametrize("policy", ["unstable-mode", "target-point"])
def test_second_year_on_a_halo_costs_no_more_than_the_first(policy):
    # stable: the motion does not build up
    found = kept("L2", policy, 21.0, 0.02)
    short = kept("L2", policy, 21.0, 0.02, years=1, seed=4)
    assert found.steady_m_s_yr.mean() == pytest.approx(short.steady_m_s_yr.mean(), rel=0.1)
