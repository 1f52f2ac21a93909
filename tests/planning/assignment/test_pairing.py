"""The pairing, against all permutations, another solver, and the rules of who may stay and who must go."""

from itertools import permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.sparse import csr_array
from scipy.sparse.csgraph import min_weight_full_bipartite_matching

from farhold.errors import CaseError, NoSolutionError
from farhold.planning.assignment.objectives import OBJECTIVES
from farhold.planning.assignment.pairing import pair

G0 = 9.80665
NAMES = sorted(OBJECTIVES)


def cost_of(name, price, nodes):
    """Cost of each pair for an objective, by the rocket equation written out."""
    if name != "least-propellant":
        return price
    return nodes.mass_kg[:, None] * (1.0 - np.exp(-price / (nodes.isp_s[:, None] * G0)))


def all_pairings(cost):
    """Every way to fill the m columns by different rows: (k, m) rows."""
    n, m = cost.shape
    return np.array(list(permutations(range(n), m)))


def brute_force(name, cost):
    """Least value, and the least sum under the least worst for that objective."""
    rows = all_pairings(cost)
    picked = cost[rows, np.arange(cost.shape[1])]
    if name == "least-worst":
        worst = picked.max(axis=1)
        return worst.min(), picked.sum(axis=1)[worst == worst.min()].min()
    return picked.sum(axis=1).min(), picked.sum(axis=1).min()


def paid(cost, found):
    taken = np.flatnonzero(found.slot_of >= 0)
    return cost[taken, found.slot_of[taken]]


@pytest.mark.parametrize("name", NAMES)
@given(seed=st.integers(0, 10_000), n=st.integers(1, 6), fewer=st.integers(0, 2))
@settings(max_examples=25)
def test_pairing_is_the_best_of_all_permutations(linear, nodes, places, cloud, price_of, name, seed, n, fewer):
    rng = np.random.default_rng(seed)
    m = max(1, n - fewer)
    some = nodes(
        cloud(seed, n, 1e6, 0.2),
        mass_kg=rng.uniform(3, 60, n),
        isp_s=rng.uniform(40, 300, n),
        excess_beta=rng.normal(size=n) * 1e-6,
    )
    slots = places(cloud(seed + 1, m, 1e6, 0.2))
    cost = cost_of(name, price_of(some, slots), some)
    found = pair(linear, some, slots, OBJECTIVES[name])
    value, total = brute_force(name, cost)
    assert sorted(found.slot_of[found.slot_of >= 0]) == list(range(m))
    assert found.value == pytest.approx(value, rel=1e-9, abs=1e-12)
    assert paid(cost, found).sum() == pytest.approx(total, rel=1e-9, abs=1e-12)
    assert found.gap_relative < 1e-9
    assert found.lower_bound <= value * (1.0 + 1e-9)


@pytest.mark.parametrize("name", NAMES)
@given(seed=st.integers(0, 10_000))
@settings(max_examples=15)
def test_pairing_of_coincident_slots_is_still_the_best(linear, nodes, places, cloud, price_of, name, seed):
    rng = np.random.default_rng(seed)
    some = nodes(cloud(seed, 5, 1e6)[rng.integers(0, 2, 5)])
    slots = places(cloud(seed + 1, 5, 1e6)[rng.integers(0, 3, 5)])
    cost = cost_of(name, price_of(some, slots), some)
    found = pair(linear, some, slots, OBJECTIVES[name])
    value, total = brute_force(name, cost)
    assert found.value == pytest.approx(value, rel=1e-9)
    assert paid(cost, found).sum() == pytest.approx(total, rel=1e-9)
    assert found.gap_relative < 1e-9


@pytest.mark.parametrize("name", ["least-total", "least-propellant"])
@pytest.mark.parametrize("n", [60, 200])
def test_pairing_costs_what_another_solver_finds(linear, nodes, places, cloud, price_of, name, n):
    # LAPJVsp (Jonker and Volgenant 1987) instead of the dense shortest augmenting path
    rng = np.random.default_rng(n)
    some = nodes(cloud(1, n, 1e6), mass_kg=rng.uniform(5, 50, n))
    slots = places(cloud(2, n, 1e6))
    cost = cost_of(name, price_of(some, slots), some)
    row, column = min_weight_full_bipartite_matching(csr_array(cost))
    assert pair(linear, some, slots, OBJECTIVES[name]).value == pytest.approx(cost[row, column].sum(), rel=1e-12)


@pytest.mark.parametrize("n", [60, 200])
def test_least_worst_is_the_least_that_another_solver_can_do_with(linear, nodes, places, cloud, price_of, n):
    some, slots = nodes(cloud(3, n, 1e6)), places(cloud(4, n, 1e6))
    cost = price_of(some, slots)
    found = pair(linear, some, slots, OBJECTIVES["least-worst"])
    capped = csr_array(np.where(cost <= found.value * (1.0 + 1e-12), cost, 0.0))
    row, column = min_weight_full_bipartite_matching(capped)
    assert paid(cost, found).sum() == pytest.approx(cost[row, column].sum(), rel=1e-12)
    with pytest.raises(ValueError, match="no full matching"):
        min_weight_full_bipartite_matching(csr_array(np.where(cost < found.value * (1.0 - 1e-12), cost, 0.0)))


def test_classes_are_paired_apart(linear, nodes, places, cloud, price_of):
    kinds = np.array(["hub", "probe", "probe", "hub", "probe"])
    some, slots = nodes(cloud(5, 5, 1e6), class_name=kinds), places(cloud(6, 5, 1e6), class_name=kinds[::-1])
    found = pair(linear, some, slots, OBJECTIVES["least-total"])
    cost = np.where(kinds[:, None] == kinds[::-1][None], price_of(some, slots), 1e9)
    assert (kinds[::-1][found.slot_of] == kinds).all()
    assert found.value == pytest.approx(brute_force("least-total", cost)[0], rel=1e-12)


def test_nodes_left_over_keep_their_slot_and_pay_nothing(linear, nodes, places, cloud, price_of):
    some, slots = nodes(cloud(7, 6, 1e6)), places(cloud(8, 4, 1e6))
    found = pair(linear, some, slots, OBJECTIVES["least-total"])
    idle = found.slot_of < 0
    assert idle.sum() == 2
    assert not found.dv_m_s[idle].any()
    assert found.value == pytest.approx(brute_force("least-total", price_of(some, slots))[0], rel=1e-12)


def test_nodes_left_over_go_to_the_spare_places(linear, nodes, places, cloud, price_of):
    some = nodes(cloud(9, 5, 1e6))
    slots = places(cloud(10, 6, 1e6), spare=np.arange(6) >= 3)
    found = pair(linear, some, slots, OBJECTIVES["least-total"])
    cost = price_of(some, slots)
    best = min(
        cost[list(rows[:3]), [0, 1, 2]].sum() + cost[list(rows[3:]), list(spare)].sum()
        for rows in permutations(range(5))
        for spare in permutations(range(3, 6), 2)
    )
    assert set(range(3)) <= set(found.slot_of.tolist())
    assert (found.slot_of >= 0).all()
    assert found.value == pytest.approx(best, rel=1e-12)


def test_spare_places_never_empty_a_slot_however_cheap(linear, nodes, places, cloud):
    far = np.where(np.arange(6) < 3, 10.0, 0.1)[:, None]
    slots = places(cloud(10, 6, 1e6) * far, spare=np.arange(6) >= 3, priority=[1, 2, 2, np.nan, np.nan, np.nan])
    found = pair(linear, nodes(cloud(9, 5, 1e5)), slots, OBJECTIVES["least-total"])
    assert set(range(3)) <= set(found.slot_of.tolist())


def test_missing_nodes_leave_the_last_priorities_empty(linear, nodes, places, cloud):
    some = nodes(cloud(11, 3, 1e6))
    slots = places(cloud(12, 5, 1e6), priority=[2, 9, 1, 8, 3])
    found = pair(linear, some, slots, OBJECTIVES["least-total"])
    assert sorted(found.slot_of.tolist()) == [0, 2, 4]


@pytest.mark.parametrize("name", NAMES)
def test_cheapest_slot_is_filled_among_equals_at_the_cut(linear, nodes, places, cloud, price_of, name):
    some = nodes(cloud(13, 3, 1e6))
    far = np.array([10.0, 1.0, 1.0, 1.0, 10.0, 0.1])[:, None]
    slots = places(cloud(14, 6, 1e6) * far, priority=[1, 2, 2, 2, 1, 3])
    cost = cost_of(name, price_of(some, slots), some)
    found = pair(linear, some, slots, OBJECTIVES[name])
    options = [brute_force(name, cost[:, [0, 4, last]])[0] for last in (1, 2, 3)]
    assert {0, 4} <= set(found.slot_of.tolist())
    assert found.value == pytest.approx(min(options), rel=1e-12)
    assert found.gap_relative < 1e-9


def test_missing_nodes_without_priorities_are_refused(linear, nodes, places, cloud):
    slots = places(cloud(15, 3, 1e6), priority=[1, np.nan, 2])
    with pytest.raises(CaseError) as caught:
        pair(linear, nodes(cloud(16, 2, 1e6)), slots, OBJECTIVES["least-total"], formation="wide")
    assert str(caught.value) == (
        "formation wide: 3 slots for class probe but 2 nodes to fill them (allowed: as many nodes as slots, or a "
        "priority on every slot of the class; drop 1 slots, or give each slot a priority (1 is filled first))"
    )


@pytest.mark.parametrize("name", NAMES)
def test_pinned_node_takes_its_slot_and_the_rest_is_best(linear, nodes, places, cloud, price_of, name):
    some = nodes(cloud(17, 5, 1e6))
    slots = places(cloud(18, 5, 1e6), pinned=[-1, -1, 4, -1, 0])
    cost = cost_of(name, price_of(some, slots), some)
    found = pair(linear, some, slots, OBJECTIVES[name])
    barred = cost.copy()
    barred[4, [0, 1, 3, 4]] = barred[0, [0, 1, 2, 3]] = 1e9
    assert found.slot_of[[4, 0]].tolist() == [2, 4]
    assert found.value == pytest.approx(brute_force(name, barred)[0], rel=1e-12)


def test_pins_that_contradict_each_other_have_no_solution(linear, nodes, places, cloud):
    slots = places(cloud(19, 3, 1e6), pinned=[1, 1, -1])
    with pytest.raises(NoSolutionError) as caught:
        pair(linear, nodes(cloud(20, 3, 1e6)), slots, OBJECTIVES["least-total"])
    assert str(caught.value) == (
        "class probe: no pairing respects all pinned nodes (look at the `node` column of the slots file)"
    )


def test_pin_of_a_node_that_takes_no_part_binds_nobody(linear, nodes, places, cloud):
    states = cloud(21, 4, 1e6)
    some = nodes(cloud(22, 4, 1e6), class_name=["probe", "probe", "probe", "hub"])
    free = pair(linear, some, places(states[:3]), OBJECTIVES["least-total"])
    pinned = pair(linear, some, places(states[:3], pinned=[3, -1, -1]), OBJECTIVES["least-total"])
    np.testing.assert_array_equal(free.slot_of, pinned.slot_of)


def test_holder_stays_at_no_cost_and_is_not_moved(linear, nodes, places, cloud):
    some = nodes(cloud(23, 3, 1e6))
    slots = places(some.state.copy(), held_by=[0, 1, 2])
    found = pair(linear, some, slots, OBJECTIVES["least-total"])
    assert found.slot_of.tolist() == [-1, -1, -1]
    assert found.value == 0.0
    assert found.gap_relative == 0.0


def test_holder_whose_slot_is_pinned_to_another_has_to_move(linear, nodes, places, cloud):
    # node 2 stands in the free slot at no cost, but node 1 may not stay in the slot that node 0 takes
    some = nodes(cloud(24, 3, 1e6) * np.repeat([1.0, 0.0], 3))
    free = some.state[2] @ linear.phi.T
    slots = places(np.stack([cloud(25, 1, 1e6)[0], free]), held_by=[1, -1], pinned=[0, -1])
    assert pair(linear, some, slots, OBJECTIVES["least-total"]).slot_of.tolist() == [0, 1, -1]


@pytest.mark.parametrize("name", NAMES)
def test_more_than_5000_of_a_class_are_refused(linear, nodes, places, name):
    many = np.zeros((5001, 6))
    with pytest.raises(CaseError) as caught:
        pair(linear, nodes(many), places(many), OBJECTIVES[name])
    assert str(caught.value) == (
        "class probe: 5001 nodes and 5001 slots are to be paired (allowed: up to 5000 of one class in this "
        "version; split the class, or price a part of it)"
    )


@pytest.mark.parametrize("name", NAMES)
def test_ties_are_broken_by_the_order_of_nodes_and_slots(linear, nodes, places, name):
    same = np.zeros((6, 6))
    slots = places(same + np.eye(6)[0] * 1e5)
    assert pair(linear, nodes(same), slots, OBJECTIVES[name]).slot_of.tolist() == [0, 1, 2, 3, 4, 5]


@pytest.mark.parametrize("name", NAMES)
def test_one_node_takes_the_one_slot(linear, nodes, places, cloud, price_of, name):
    some, slots = nodes(cloud(26, 1, 1e6)), places(cloud(27, 1, 1e6))
    found = pair(linear, some, slots, OBJECTIVES[name])
    assert found.slot_of.tolist() == [0]
    assert found.dv_m_s[0] == pytest.approx(price_of(some, slots)[0, 0], rel=1e-12)
    assert found.gap == pytest.approx(0.0, abs=1e-12)


def test_no_place_leaves_everybody_where_it_is(linear, nodes, places, cloud):
    found = pair(linear, nodes(cloud(28, 3, 1e6)), places(np.zeros((0, 6))), OBJECTIVES["least-total"])
    assert found.slot_of.tolist() == [-1, -1, -1]
    assert (found.value, found.lower_bound, found.gap_relative) == (0.0, 0.0, 0.0)


@pytest.mark.parametrize("seed", range(3))
def test_least_worst_trades_the_sum_for_the_worst(linear, nodes, places, cloud, seed):
    some, slots = nodes(cloud(seed, 30, 1e6)), places(cloud(seed + 50, 30, 1e6))
    total = pair(linear, some, slots, OBJECTIVES["least-total"])
    worst = pair(linear, some, slots, OBJECTIVES["least-worst"])
    assert total.dv_m_s.sum() <= worst.dv_m_s.sum()
    assert worst.dv_m_s.max() <= total.dv_m_s.max()


def test_least_propellant_makes_the_heavy_fly_less(linear, nodes, places, cloud):
    rng = np.random.default_rng(0)
    some = nodes(cloud(30, 40, 1e6), mass_kg=rng.uniform(3, 60, 40), isp_s=rng.choice([60.0, 220.0], 40))
    slots = places(cloud(31, 40, 1e6))
    burnt = {
        name: cost_of("least-propellant", pair(linear, some, slots, OBJECTIVES[name]).dv_m_s[:, None], some).sum()
        for name in NAMES
    }
    assert burnt["least-propellant"] == min(burnt.values())
    assert burnt["least-propellant"] < burnt["least-total"]
