"""Accuracy levels of the full lane, against thirty digits, and the choice of arcs and steps."""

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.lanes.accuracy import ACCURACIES, LONGEST_S, probe_states
from farhold.dynamics.lanes.own import own_step
from farhold.dynamics.lanes.shared import scheme_for
from farhold.dynamics.propagate import fly
from farhold.kernels.status import OK

STARTS = np.array(
    [
        (1e6, 0.0, 0.0, 0.0, 0.0, 0.0),
        (0.0, -1e6, 0.0, 0.0, 0.0, 0.0),
        (5e5, 5e5, -7e5, 0.1, -0.1, 0.1),
    ]
)
# accuracies are promised for 1000 km and a year, that is for an end 40,000 km away; beyond, they scale
PROMISED_AT_M = 4e7


@pytest.fixture(scope="module")
def year(ref_l4, truth):
    """Places (3, 3) of the starts after a year, to thirty digits."""
    return np.array([truth(ref_l4).fly(start, [YEAR_S])[0, :3] for start in STARTS])


def own_times(n):
    """An impulse of nothing at the start of each node: the flight is cut into arcs of each node's own."""
    return {"impulse_s": np.zeros((n, 1)), "dv_m_s": np.zeros((n, 1, 3))}


@pytest.fixture(params=["shared", "own"])
def lane(request):
    """The arguments by which `fly` takes the lane of shared arcs, or that of arcs of one's own."""
    return own_times if request.param == "own" else lambda n: {}


@pytest.mark.parametrize("accuracy", ["draft", "default", "fine"])
def test_accuracy_after_a_year_at_a_thousand_kilometres_is_kept(ref_l4, year, lane, accuracy):
    # 1 m, 1 mm, 10 micrometres
    flight = fly(ref_l4, STARTS, [YEAR_S], accuracy=accuracy, **lane(3))
    assert np.linalg.norm(flight.state[:, 0, :3] - year, axis=1).max() < ACCURACIES[accuracy]
    assert flight.status.tolist() == [OK] * 3
    assert flight.accurate


@pytest.mark.parametrize("accuracy", ["draft", "default", "fine"])
@pytest.mark.parametrize("point", ["L1", "L2"])
def test_accuracy_is_kept_where_the_motion_grows(equilibrium, truth, lane, accuracy, point):
    # 100 km, 60 d: deviations grow by e^(60/23) = 13
    reference = equilibrium(point)
    start = 0.1 * STARTS[2]
    ours = fly(reference, [start], [60.0 * DAY_S], accuracy=accuracy, **lane(1)).state[0]
    theirs = truth(reference).fly(start, [60.0 * DAY_S])
    assert np.linalg.norm((ours - theirs)[:, :3]) < ACCURACIES[accuracy]


@pytest.mark.parametrize("radius_m", [10.0, 2e7])
def test_accuracy_is_kept_at_any_radius(ref_l4, truth, lane, radius_m):
    start = radius_m / 1e6 * STARTS[2]
    ours = fly(ref_l4, [start], [YEAR_S], **lane(1)).state[0]
    theirs = truth(ref_l4).fly(start, [YEAR_S])
    size = np.linalg.norm(theirs[0, :3])
    assert np.linalg.norm((ours - theirs)[:, :3]) < 1e-3 * max(1.0, size / PROMISED_AT_M)


@pytest.mark.parametrize("excess", [-1e-5, 1e-6, 1e-5, 1e-4])
@pytest.mark.parametrize(("point", "days"), [("L4", 365.25), ("L1", 60.0)])
def test_pressure_alone_drives_a_node_as_far_as_it_is_right(equilibrium, truth, lane, point, days, excess):
    # a node at rest at the reference, driven away some 1,000 to 200,000 km by its own pressure
    reference = equilibrium(point)
    flight = fly(reference, np.zeros((1, 6)), [days * DAY_S], excess_beta=[excess], **lane(1))
    theirs = truth(reference).fly(np.zeros(6), [days * DAY_S], excess)
    size = np.linalg.norm(theirs[0, :3])
    assert np.linalg.norm((flight.state[0] - theirs)[:, :3]) < 1e-3 * max(1.0, size / PROMISED_AT_M)


def test_pressure_sets_the_arcs_up_and_not_the_rescue(ref_l4, monkeypatch):
    # following nodes one by one is a thousand times slower: it is for the few that go astray
    monkeypatch.setattr("farhold.dynamics.propagate.follow_nodes", pytest.fail)
    beta = np.array([1e-6, -1e-5, 1e-4, 1e-3])
    assert fly(ref_l4, np.zeros((4, 6)), [YEAR_S], excess_beta=beta).status.tolist() == [OK] * 4


def test_accuracy_levels_are_the_promised_ones():
    assert ACCURACIES == {"draft": 1.0, "default": 1e-3, "fine": 1e-5}


def work(reference, radius_m, span_s, accuracy):
    """Samples of the remainder that a flight without impulses takes."""
    scheme = scheme_for(reference, radius_m, 0.0, span_s, span_s, accuracy)
    return np.ceil(span_s / scheme.longest_s) * scheme.nodes * scheme.sweeps


def test_finer_accuracy_takes_no_longer_step(ref_l4):
    steps = [own_step(ref_l4, 1e6, 0.0, YEAR_S, accuracy)[0] for accuracy in ("draft", "default", "fine")]
    assert steps == sorted(steps, reverse=True)


def test_finer_accuracy_takes_no_less_work(ref_l4):
    samples = [work(ref_l4, 1e6, YEAR_S, accuracy) for accuracy in ("draft", "default", "fine")]
    assert samples == sorted(samples)


CHEAP = [
    ("L4", 365.25, "default", 60, 96),
    ("L4", 365.25, "fine", 120, 190),
    ("L1", 60.0, "default", 40, 64),
    ("L4", 7.0, "default", 1, 8),
]


@pytest.mark.parametrize(("point", "days", "accuracy", "steps", "samples"), CHEAP)
def test_flight_costs_few_steps(equilibrium, point, days, accuracy, steps, samples):
    # a guard against silent slowness: order 8 needs some tens of steps a turn, at 12 samples each; arcs with
    # exact linear motion need some of eight samples each
    reference = equilibrium(point)
    assert days * DAY_S / own_step(reference, 1e6, 0.0, days * DAY_S, accuracy)[0] <= steps
    assert work(reference, 1e6, days * DAY_S, accuracy) <= samples


@pytest.mark.parametrize("accuracy", ["default", "fine"])
def test_step_is_found_where_rounding_forbids_the_accuracy(ref_l4, accuracy):
    # 100 years at 1000 km: roundings grow beyond what is asked, and smaller steps do not help
    span_s = 100.0 * YEAR_S
    assert own_step(ref_l4, 1e6, 0.0, span_s, accuracy)[0] > 0.2 * DAY_S
    assert scheme_for(ref_l4, 1e6, 0.0, span_s, span_s, accuracy).longest_s > 0.2 * DAY_S


def test_flight_that_amplifies_its_rounding_says_so(ref_l4, lane, monkeypatch):
    # no double holds 1e-14 m of the 4e7 m of a year
    monkeypatch.setitem(ACCURACIES, "hopeless", 1e-14)
    assert not fly(ref_l4, STARTS, [YEAR_S], accuracy="hopeless", **lane(3)).accurate


@pytest.mark.parametrize("gap_days", [0.1, 1.0, 7.0, 40.0])
def test_arcs_are_set_up_for_the_longest_leg_and_no_longer(ref_l4, gap_days):
    # to the next power of two, so that calibrations stay few
    scheme = scheme_for(ref_l4, 1e6, 0.0, YEAR_S, gap_days * DAY_S, "default")
    assert scheme.longest_s <= min(2.0 * gap_days * DAY_S, LONGEST_S)


@pytest.mark.parametrize("radius_m", [1e3, 1e6, 2e7])
def test_probes_reach_the_radius_each_way(radius_m):
    rate = 2e-7
    probes = probe_states(radius_m, rate)
    place, speed = np.linalg.norm(probes[:, :3], axis=1), np.linalg.norm(probes[:, 3:], axis=1)
    assert np.hypot(place, speed / rate) == pytest.approx(radius_m)
    assert probes.sum(axis=0) == pytest.approx(0.0, abs=1e-6)
    assert np.linalg.matrix_rank(probes / [1.0, 1.0, 1.0, rate, rate, rate]) == 6


@pytest.mark.parametrize("factor", [0.9, 1.0])
def test_step_is_shared_by_like_radii_and_spans(ref_l4, factor):
    # rounding the radius up to a power of two and the span to whole days keeps calibrations few
    like = (factor * 2.0**20, 0.0, 99.5 * DAY_S), (2.0**20, 0.0, 100.0 * DAY_S)
    assert own_step(ref_l4, *like[0], "default") == own_step(ref_l4, *like[1], "default")
    schemes = [scheme_for(ref_l4, *each, 50.0 * DAY_S, "default") for each in like]
    assert schemes[0] == schemes[1]


@pytest.fixture(scope="module", params=["shared", "own"])
def crowd(ref_l4, request):
    """Eleven hundred nodes with pressure and impulses, as flown together: a flight of some, and all states.

    Enough for blocks of several widths on one and two threads.
    """
    rng = np.random.default_rng(4)
    n = 1100
    states = np.hstack([rng.normal(0.0, 5e5, (n, 3)), rng.normal(0.0, 0.1, (n, 3))])
    beta, dv = rng.normal(0.0, 1e-6, n), rng.normal(0.0, 0.1, (n, 2, 3))
    when = np.sort(rng.uniform(0.0, 60.0, (n, 2)), axis=1) * DAY_S
    output_s = np.array([20.0, 60.0]) * DAY_S

    def flown(rows):
        times = when[0] if request.param == "shared" else when[rows]
        job = {"excess_beta": beta[rows], "impulse_s": times, "dv_m_s": dv[rows], "radius_m": 2e6}
        return fly(ref_l4, states[rows], output_s, **job).state

    return flown, flown(np.arange(n))


@pytest.mark.parametrize("n", [1, 2, 127, 128, 129, 256, 257, 513, 1025])
def test_result_has_the_same_bits_for_any_number_of_nodes(crowd, n):
    flown, whole = crowd
    assert (flown(np.arange(n)) == whole[:n]).all()


@pytest.mark.parametrize("seed", range(3))
def test_result_has_the_same_bits_in_any_order(crowd, seed):
    flown, whole = crowd
    order = np.random.default_rng(seed).permutation(len(whole))
    assert (flown(order) == whole[order]).all()


@pytest.mark.parametrize("threads", [1, 2, 5])
def test_result_has_the_same_bits_on_any_number_of_threads(crowd, set_threads, threads):
    flown, whole = crowd
    set_threads(threads)
    assert (flown(np.arange(len(whole))) == whole).all()
