"""Accuracy levels of the full lane, against thirty digits, and the choice of the step."""

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.lanes import ACCURACIES, probe_states, step_s
from farhold.dynamics.propagate import fly

STARTS = np.array(
    [
        (1e6, 0.0, 0.0, 0.0, 0.0, 0.0),
        (0.0, -1e6, 0.0, 0.0, 0.0, 0.0),
        (5e5, 5e5, -7e5, 0.1, -0.1, 0.1),
    ]
)


@pytest.fixture(scope="module")
def year(ref_l4, truth):
    """Places (3, 3) of the starts after a year, to thirty digits."""
    return np.array([truth(ref_l4).fly(start, [YEAR_S])[0, :3] for start in STARTS])


@pytest.mark.parametrize("accuracy", ["draft", "default", "fine"])
def test_accuracy_after_a_year_at_a_thousand_kilometres_is_kept(ref_l4, year, accuracy):
    # 1 m, 1 mm, 10 micrometres
    flown = fly(ref_l4, STARTS, [YEAR_S], accuracy=accuracy).state[:, 0, :3]
    assert np.linalg.norm(flown - year, axis=1).max() < ACCURACIES[accuracy]


def test_accuracy_levels_are_the_promised_ones():
    assert ACCURACIES == {"draft": 1.0, "default": 1e-3, "fine": 1e-5}


def test_finer_accuracy_takes_no_longer_step(ref_l4):
    steps = [step_s(ref_l4, 1e6, YEAR_S, accuracy) for accuracy in ("draft", "default", "fine")]
    assert steps == sorted(steps, reverse=True)


@pytest.mark.parametrize(
    ("point", "days", "accuracy", "most"),
    [
        ("L4", 365.25, "default", 60),
        ("L4", 365.25, "fine", 120),
        ("L1", 60.0, "default", 40),
        ("L4", 7.0, "default", 1),
    ],
)
def test_flight_costs_few_steps(equilibrium, point, days, accuracy, most):
    # a guard against silent slowness: order 8 needs some tens of steps a turn
    assert days * DAY_S / step_s(equilibrium(point), 1e6, days * DAY_S, accuracy) <= most


@pytest.mark.parametrize("accuracy", ["default", "fine"])
def test_step_is_found_where_rounding_forbids_the_accuracy(ref_l4, accuracy):
    # 100 years at 1000 km: roundings grow beyond what is asked, and smaller steps do not help
    assert step_s(ref_l4, 1e6, 100.0 * YEAR_S, accuracy) > 0.2 * DAY_S


@pytest.mark.parametrize("radius_m", [1e3, 1e6, 2e7])
def test_probes_reach_the_radius_each_way(radius_m):
    rate = 2e-7
    probes = probe_states(radius_m, rate)
    assert np.linalg.norm(probes[:3, :6], axis=0) == pytest.approx(radius_m)
    assert np.hypot(
        np.linalg.norm(probes[:3], axis=0), np.linalg.norm(probes[3:], axis=0) / rate
    ) == pytest.approx(radius_m)
    assert probes.sum(axis=1) == pytest.approx(0.0, abs=1e-6)


@pytest.mark.parametrize("factor", [0.9, 1.0])
def test_step_is_shared_by_like_radii_and_spans(ref_l4, factor):
    # rounding the radius up to a power of two and the span to whole days keeps calibrations few
    assert step_s(ref_l4, factor * 2.0**20, 99.5 * DAY_S, "default") == step_s(
        ref_l4, 2.0**20, 100.0 * DAY_S, "default"
    )
