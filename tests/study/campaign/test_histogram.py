"""Streaming histograms: exact counts, brackets that hold the quantile, merging in any order, no number lost."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from farhold.errors import DomainError
from farhold.study.campaign.histogram import Histogram

MAKERS = {
    "log": lambda: Histogram.log(1e-3, 1e3, 0.01),
    "linear": lambda: Histogram.linear(-50.0, 200.0, 1000),
}
NUMBERS = st.lists(st.floats(-1e5, 1e5), min_size=1, max_size=60)


def state(histogram):
    return histogram.counts.tolist(), histogram.minimum, histogram.maximum


@pytest.mark.parametrize("kind", MAKERS)
@given(values=NUMBERS, p=st.floats(0.0, 1.0))
def test_bracket_holds_the_quantile(kind, values, p):
    histogram = MAKERS[kind]()
    histogram.add(values)
    found = histogram.quantile(p)
    exact = np.quantile(values, p, method="inverted_cdf")
    assert found.low <= exact <= found.high
    assert found.low <= found.value <= found.high


@pytest.mark.parametrize("kind", MAKERS)
@given(values=NUMBERS, cut=st.integers(0, 60))
def test_parts_merged_in_any_order_equal_the_whole(kind, values, cut):
    whole, first, second, back = (MAKERS[kind]() for _ in range(4))
    whole.add(values)
    first.add(values[:cut])
    second.add(values[cut:])
    back.add_arrays(second.to_arrays("x"), "x")
    back.merge(first)
    first.merge(second)
    assert state(first) == state(back) == state(whole)


@given(values=st.lists(st.floats(1e-3, 999.0), min_size=1, max_size=60), p=st.floats(0.0, 1.0))
def test_bracket_is_no_wider_than_the_stated_resolution(values, p):
    histogram = Histogram.log(1e-3, 1e3, 0.01)
    histogram.add(values)
    found = histogram.quantile(p)
    assert found.high - found.low <= 0.01 * found.low


@pytest.mark.parametrize("p", [0.05, 0.5, 0.95, 0.99])
def test_quantile_of_rayleigh_meets_its_closed_form(p):
    n = 400_000
    histogram = Histogram.log(1e-4, 20.0, 0.002)
    rng = np.random.default_rng(11)
    for _ in range(4):
        histogram.add(rng.rayleigh(1.0, n // 4))
    exact = math.sqrt(-2.0 * math.log1p(-p))
    density = exact * math.exp(-0.5 * exact**2)
    # four standard deviations of the sample's quantile, and half a bin
    allowed = 4.0 * math.sqrt(p * (1.0 - p) / n) / density + 0.001 * exact
    assert histogram.quantile(p).value == pytest.approx(exact, abs=allowed)


@pytest.mark.parametrize("kind", MAKERS)
@pytest.mark.parametrize("value", [0.0, -0.0, 5e-324, 1e-3, 1.0, 1e3, 200.0, -50.0, math.inf, -math.inf, 1e300])
def test_every_number_is_counted_once_and_the_extremes_are_exact(kind, value):
    histogram = MAKERS[kind]()
    histogram.add(value)
    assert histogram.count == 1
    assert histogram.quantile(0.0).value == histogram.quantile(1.0).value == value


@pytest.mark.parametrize("kind", MAKERS)
def test_edge_belongs_to_the_bin_above_it(kind):
    histogram = MAKERS[kind]()
    histogram.add(histogram.edges)
    assert histogram.counts.tolist() == [0, *[1] * (histogram.edges.size - 1), 1]


@given(low=st.floats(-1e6, 1e6), width=st.floats(1e-3, 1e6), bins=st.integers(1, 999), seed=st.integers(0, 99))
def test_linear_bins_are_those_of_a_search_among_the_edges(low, width, bins, seed):
    histogram = Histogram.linear(low, low + width, bins)
    edges = histogram.edges
    near = np.concatenate([edges, np.nextafter(edges, np.inf), np.nextafter(edges, -np.inf)])
    values = np.concatenate([near, np.random.default_rng(seed).uniform(low - width, low + 2 * width, 200)])
    histogram.add(values)
    places = np.searchsorted(edges, values, side="right")
    assert histogram.counts.tolist() == np.bincount(places, minlength=bins + 2).tolist()


def test_bins_cover_what_was_asked():
    histogram = Histogram.log(0.3, 70.0, 0.05)
    assert histogram.edges[0] <= 0.3 < histogram.edges[1]
    assert histogram.edges[-2] <= 70.0 < histogram.edges[-1]


def test_no_value_counts_nothing():
    histogram = Histogram.linear(0.0, 1.0, 4)
    histogram.add(np.empty((0, 3)))
    assert histogram.count == 0
    with pytest.raises(DomainError, match="quantile: no value was added"):
        histogram.quantile(0.5)


@pytest.mark.parametrize(
    ("call", "said"),
    [
        (lambda h: h.add([1.0, math.nan]), "histogram: got a value that is not a number"),
        (lambda h: h.merge(Histogram.linear(0.0, 1.0, 5)), "histogram: the bins differ"),
        (lambda h: h.quantile(1.5), r"quantile: got 1.5 \(allowed: 0 to 1\)"),
        (lambda h: h.at_rank(0), "histogram: got rank 0"),
        (lambda _: Histogram.log(0.0, 1.0), "histogram: got bins from 0.0 to 1.0"),
        (lambda _: Histogram.log(1.0, 2.0, 0.0), "histogram: got resolution 0.0"),
        (lambda _: Histogram.linear(1.0, 0.0, 3), "histogram: got 3 bins from 1.0 to 0.0"),
    ],
)
def test_unlawful_use_is_refused(call, said):
    histogram = Histogram.linear(0.0, 1.0, 4)
    with pytest.raises(DomainError, match=said):
        call(histogram)
    assert histogram.count == 0
