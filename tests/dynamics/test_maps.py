"""Taylor maps against thirty digits, against the transition matrix, and against each other."""

import itertools

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S
from farhold.dynamics.fast import fly_fast
from farhold.dynamics.maps import ORDERS, TERMS_OF, map_between
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.errors import DomainError

NAMES = [name for degree in ORDERS for name in itertools.combinations_with_replacement(range(7), degree)]
DEGREE = np.array([len(name) for name in NAMES])


@pytest.fixture(scope="module")
def halo(ref_l4):
    return make_reference(
        "halo", point="L2", epoch=ref_l4.epoch, pressure_area_m2_kg=0.0, family="north", az_m=2e8
    )


def part_of(taylor, z, degree):
    """The terms of one degree of a map at deviation and pressure z (7,), summed one by one, (6,)."""
    products = np.array([np.prod(np.asarray(z)[list(name)]) for name in NAMES])
    chosen = degree == DEGREE
    return products[chosen] @ taylor.terms[chosen]


def unit(reference, seed, radius_m):
    """Deviation and pressure (7,) of a size of `radius_m`, in a direction of its own."""
    rate = reference.rate_rad_s
    push = np.linalg.norm(reference.pressure_field(np.zeros((1, 3)))) / rate**2
    z = np.random.default_rng(seed).normal(size=7)
    return radius_m * z / np.linalg.norm(z) * [1.0, 1.0, 1.0, rate, rate, rate, 1.0 / push]


def test_terms_are_those_of_three_degrees_in_seven_variables():
    assert [TERMS_OF[order] for order in ORDERS] == [np.sum(order >= DEGREE) for order in ORDERS]


# step of the differences: large against the digits that a double leaves, small against the primaries' distance
STEPS = {"L4": 5e8, "L1": 5e6, "L2": 5e6}


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize(("point", "days"), [("L4", 30.0), ("L4", -200.0), ("L1", 20.0), ("L2", 30.0)])
def test_each_degree_is_that_of_differences_in_thirty_digits(equilibrium, truth, point, days, seed):
    # along a random direction: even and odd parts at one and two steps, and what is left is two degrees higher
    reference = equilibrium(point, pressure_area_m2_kg=0.026)
    exact = truth(reference)
    z = unit(reference, seed, STEPS[point])
    ends = {k: exact.fly(k * z[:6], [days * DAY_S], k * z[6])[0] for k in (-2, -1, 1, 2)}
    even = {k: 0.5 * (ends[k] + ends[-k]) for k in (1, 2)}
    odd = {k: 0.5 * (ends[k] - ends[-k]) for k in (1, 2)}
    second = (16.0 * even[1] - even[2]) / 12.0
    third = (odd[2] - 2.0 * odd[1]) / 6.0
    first = odd[1] - third
    taylor = map_between(reference, 0.0, days * DAY_S)
    for degree, theirs in ((1, first), (2, second), (3, third)):
        ours = part_of(taylor, z, degree)
        for part in (slice(0, 3), slice(3, 6)):
            assert ours[part] == pytest.approx(theirs[part], abs=2e-3 * np.linalg.norm(theirs[part]))


@pytest.mark.parametrize("days", [0.0, 3.0, -50.0, 180.0])
@pytest.mark.parametrize("point", ["L1", "L3", "L4"])
def test_linear_part_is_the_transition_matrix(equilibrium, point, days):
    reference = equilibrium(point, pressure_area_m2_kg=0.026)
    taylor = map_between(reference, 0.0, days * DAY_S)
    unit_of = np.repeat([1.0, reference.rate_rad_s], 3)
    matrix = reference.transition(0.0, days * DAY_S) * unit_of / unit_of[:, None]
    ours = taylor.linear * unit_of / unit_of[:, None]
    assert ours == pytest.approx(matrix, abs=1e-11 * np.abs(matrix).max())
    response = reference.pressure_response(0.0, days * DAY_S) / unit_of
    assert taylor.terms[6] / unit_of == pytest.approx(response, abs=1e-10 * np.abs(response).max())


@pytest.mark.parametrize(("from_days", "to_days"), [(0.0, 40.0), (25.0, 90.0), (90.0, 25.0)])
def test_linear_part_about_a_halo_is_its_transition_matrix(halo, from_days, to_days):
    taylor = map_between(halo, from_days * DAY_S, to_days * DAY_S)
    unit_of = np.repeat([1.0, halo.rate_rad_s], 3)
    matrix = halo.transition(from_days * DAY_S, to_days * DAY_S) * unit_of / unit_of[:, None]
    ours = taylor.linear * unit_of / unit_of[:, None]
    assert ours == pytest.approx(matrix, abs=1e-9 * np.abs(matrix).max())


def at(taylor, z, order):
    """The map of one order at z (7,): the z of its end."""
    return np.append(sum(part_of(taylor, z, degree) for degree in range(1, order + 1)), z[6])


@pytest.mark.parametrize("order", ORDERS)
@pytest.mark.parametrize("point", ["L1", "L4"])
def test_maps_in_a_row_are_the_map_of_the_whole_to_their_order(equilibrium, point, order):
    # what they differ by is of the next degree: half the size, 2^(p+1) times less
    reference = equilibrium(point)
    times = [0.0, 25.0 * DAY_S, 60.0 * DAY_S]
    first, second = (map_between(reference, *pair) for pair in itertools.pairwise(times))
    whole = map_between(reference, times[0], times[2])
    sizes = []
    for radius in (1.0, 0.5):
        z = unit(reference, 3, radius * 10.0 * STEPS[point])
        sizes.append(np.linalg.norm((at(second, at(first, z, order), order) - at(whole, z, order))[:3]))
    if order == 1:
        assert sizes[0] < 1e-11 * np.linalg.norm(at(whole, z, 1)[:3])
    else:
        assert sizes[0] / sizes[1] == pytest.approx(2.0 ** (order + 1), rel=0.15)


def errors_m(reference, states, days, order, excess_beta=None):
    """Largest position error of the map among nodes, against the full lane at its finest."""
    full = fly(reference, states, [days * DAY_S], excess_beta=excess_beta, accuracy="fine").state
    mine = fly_fast(reference, states, [days * DAY_S], order=order, excess_beta=excess_beta).state
    return np.linalg.norm((mine - full)[..., :3], axis=2).max()


def sphere(n, radius_m, seed=5):
    place = np.random.default_rng(seed).normal(size=(n, 3))
    return np.hstack([radius_m * place / np.linalg.norm(place, axis=1)[:, None], np.zeros((n, 3))])


TABLE = [
    (1, 7.0, 0.13),
    (1, 30.0, 2.8),
    (1, 180.0, 1.0e3),
    (1, 365.0, 5.5e3),
    (2, 30.0, 3e-5),
    (2, 180.0, 0.067),
    (2, 365.0, 0.50),
]


@pytest.mark.parametrize(("order", "days", "size_m"), TABLE)
def test_map_error_at_l4_has_the_size_in_the_design(ref_l4, order, days, size_m):
    # nodes at rest on a sphere of 1000 km; the table names a magnitude, not a direction
    assert size_m / 4.0 < errors_m(ref_l4, sphere(60, 1e6), days, order) < 4.0 * size_m


def test_second_order_is_out_by_no_more_than_micrometres_in_a_week(ref_l4):
    # the table's 1e-6 m is below what even the finest full lane promises
    assert errors_m(ref_l4, sphere(60, 1e6), 7.0, 2) < 1e-5


@pytest.mark.parametrize("order", ORDERS)
@pytest.mark.parametrize(("point", "radius_m", "days"), [("L4", 2e9, 60.0), ("L1", 1e7, 30.0), ("L2", 1e7, -30.0)])
def test_error_grows_as_the_next_power_of_the_radius(equilibrium, order, point, radius_m, days):
    reference = equilibrium(point)
    whole, half = (errors_m(reference, sphere(8, share * radius_m), days, order) for share in (1.0, 0.5))
    assert whole / half == pytest.approx(2.0 ** (order + 1), rel=0.1)


@pytest.mark.parametrize("order", ORDERS)
def test_error_of_pressure_grows_as_its_next_power(ref_l4, order):
    # pressures up to a tenth of gravity, as of sails
    beta = np.array([1.0, -0.7])
    still = np.zeros((2, 6))
    whole, half = (errors_m(ref_l4, still, 60.0, order, share * 0.1 * beta) for share in (1.0, 0.5))
    assert whole / half == pytest.approx(2.0 ** (order + 1), rel=0.15)


SWARMS = [("L4", 1e6, 365.25), ("L4", 2e7, 90.0), ("L1", 1e5, 60.0)]


@pytest.mark.parametrize(("point", "radius_m", "days"), SWARMS)
def test_higher_order_is_better(equilibrium, point, radius_m, days):
    reference = equilibrium(point)
    beta = np.random.default_rng(2).normal(0.0, 1e-6, 20)
    errors = [errors_m(reference, sphere(20, radius_m), days, order, beta) for order in ORDERS]
    assert errors[0] > 10.0 * errors[1] > 100.0 * errors[2]


@pytest.mark.parametrize("days", [60.0, -60.0])
def test_map_about_a_halo_is_the_full_lane(halo, days):
    # 10 km; fine there is a micrometre or so
    assert errors_m(halo, sphere(6, 1e4), days, 3) < 1e-4


def test_covariance_is_carried_by_the_linear_part(ref_l4):
    taylor = map_between(ref_l4, 0.0, 40.0 * DAY_S)
    root = np.random.default_rng(1).normal(size=(3, 6, 6))
    given = root @ root.transpose(0, 2, 1)
    carried = taylor.covariance(given)
    assert carried[1] == pytest.approx(taylor.linear @ given[1] @ taylor.linear.T)
    assert taylor.covariance(given[1]) == pytest.approx(carried[1])


@pytest.mark.parametrize("times", [(np.nan, 1.0), (0.0, np.inf)])
def test_times_that_are_not_finite_are_refused(ref_l4, times):
    with pytest.raises(DomainError, match="finite times"):
        map_between(ref_l4, *times)
