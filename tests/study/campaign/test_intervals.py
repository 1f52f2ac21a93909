"""Intervals hold the truth as often as they say; a quantile that the samples do not support is called so."""

import math

import numpy as np
import pytest

from farhold.errors import DomainError
from farhold.study.campaign.histogram import Histogram
from farhold.study.campaign.intervals import (
    grouped_mean_interval,
    mean_interval,
    quantile_interval,
    quantile_ranks,
    support_warning,
)

TRIALS = 1000
# four standard deviations of the share of TRIALS intervals at 95 %
SLACK = 4.0 * math.sqrt(0.95 * 0.05 / TRIALS)


def coverage(interval_of, truth):
    low, high = np.array([interval_of(trial) for trial in range(TRIALS)]).T
    return float(np.mean((low <= truth) & (truth <= high)))


@pytest.mark.parametrize("n", [3, 20])
def test_mean_interval_covers_as_often_as_it_says(n):
    draws = np.random.default_rng(3).normal(5.0, 2.0, (TRIALS, n))
    assert coverage(lambda trial: mean_interval(draws[trial]), 5.0) == pytest.approx(0.95, abs=SLACK)


def shared_errors(seed):
    """Twenty samples of fifty nodes; each sample's error is shared by its nodes."""
    rng = np.random.default_rng(seed)
    return rng.normal(0.0, 1.0, (TRIALS, 20, 1)) + rng.normal(0.0, 0.5, (TRIALS, 20, 50))


def test_grouped_interval_covers_where_nodes_share_errors():
    draws = shared_errors(4)
    assert coverage(lambda trial: grouped_mean_interval(draws[trial]), 0.0) == pytest.approx(0.95, abs=SLACK)


def test_interval_over_nodes_that_share_errors_is_far_too_narrow():
    draws = shared_errors(4)
    assert coverage(lambda trial: mean_interval(draws[trial].ravel()), 0.0) < 0.5


@pytest.mark.parametrize(("n", "p"), [(60, 0.5), (400, 0.95), (1500, 0.99)])
def test_quantile_interval_covers_at_least_as_often_as_it_says(n, p):
    draws = np.random.default_rng(5).rayleigh(1.0, (TRIALS, n))
    exact = math.sqrt(-2.0 * math.log1p(-p))
    assert coverage(lambda trial: quantile_interval(draws[trial], p), exact) >= 0.95 - SLACK


def binomial_cdf(k, n, p):
    return math.fsum(math.comb(n, i) * p**i * (1.0 - p) ** (n - i) for i in range(k + 1))


@pytest.mark.parametrize(("n", "p"), [(10, 0.5), (60, 0.9), (100, 0.25), (200, 0.95)])
def test_ranks_are_the_tightest_that_the_binomial_allows(n, p):
    low, high = quantile_ranks(n, p)
    assert binomial_cdf(low - 1, n, p) <= 0.025 < binomial_cdf(low, n, p)
    assert 1.0 - binomial_cdf(high - 1, n, p) <= 0.025 < 1.0 - binomial_cdf(high - 2, n, p)


def test_median_of_ten_lies_between_the_second_and_the_ninth():
    # the textbook case: 1 - 2 (1 + 10) / 2^10 = 97.9 %, the next narrower pair has 89.1 %
    assert quantile_ranks(10, 0.5) == (2, 9)


@pytest.mark.parametrize(("n", "p", "open_side"), [(5, 0.5, (True, True)), (100, 0.99, (False, True))])
def test_too_few_values_leave_a_side_open(n, p, open_side):
    found = quantile_interval(np.arange(float(n)), p)
    assert tuple(side is None for side in found) == open_side


def test_interval_of_a_histogram_holds_that_of_the_values():
    values = np.random.default_rng(6).rayleigh(1.0, 3000)
    histogram = Histogram.log(1e-4, 20.0, 0.01)
    histogram.add(values)
    low, high = quantile_interval(values, 0.95)
    wide_low, wide_high = quantile_interval(histogram, 0.95)
    assert 0.99 * low <= wide_low <= low
    assert high <= wide_high <= 1.01 * high


@pytest.mark.parametrize("empty", [np.empty(0), Histogram.linear(0.0, 1.0, 2)], ids=["array", "histogram"])
def test_no_values_bound_nothing(empty):
    assert quantile_interval(empty, 0.5) == (None, None)


def test_one_value_has_no_interval_of_its_mean():
    assert mean_interval([1.0]) == (None, None)


def test_interval_of_equal_values_is_their_value():
    assert mean_interval([2.0, 2.0, 2.0]) == (2.0, 2.0)


@pytest.mark.parametrize(("p", "needed"), [(0.99, 1000), (0.95, 200), (0.5, 20), (0.05, 200)])
def test_quantile_is_supported_by_ten_values_beyond_it(p, needed):
    assert support_warning(p, needed) is None
    assert support_warning(p, needed - 1) is not None


def test_unsupported_quantile_is_said_with_what_it_needs():
    assert support_warning(0.99, 20, "nodes") == "the 99 % quantile rests on 20 nodes; it needs about 1,000"


@pytest.mark.parametrize(
    ("call", "said"),
    [
        (lambda: mean_interval([1.0, 2.0], 1.0), r"level: got 1.0 \(allowed: between 0 and 1\)"),
        (lambda: quantile_ranks(0, 0.5), "quantile: got p = 0.5 of 0 values"),
        (lambda: quantile_ranks(9, 1.0), "quantile: got p = 1.0 of 9 values"),
    ],
)
def test_unlawful_use_is_refused(call, said):
    with pytest.raises(DomainError, match=said):
        call()
