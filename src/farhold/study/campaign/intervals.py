"""How sure a mean or a quantile is, and whether there are samples enough to speak of it at all."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from scipy import stats

from farhold.errors import DomainError, Fault
from farhold.study.campaign.histogram import Histogram

__all__ = ["grouped_mean_interval", "mean_interval", "quantile_interval", "quantile_ranks", "support_warning"]

Interval = tuple[float | None, float | None]


def _check_level(level: float) -> None:
    if not 0.0 < level < 1.0:
        raise DomainError(Fault("level", f"got {level!r}", "between 0 and 1"))


def mean_interval(values: Any, level: float = 0.95) -> Interval:
    """Interval of the mean of independent values.

    Parameters
    ----------
    values : (n,) independent of each other
    level : share of such intervals that hold the true mean

    Returns
    -------
    (float, float) or (None, None)
        None for fewer than two values.

    Raises
    ------
    DomainError
        The level is not between 0 and 1.

    Notes
    -----
    Mean plus and minus Student's t times the sample's deviation over the root of n (Student 1908): exact for
    normal values, and by the central limit theorem right for many of any kind.
    """
    _check_level(level)
    array = np.asarray(values, dtype=np.float64).reshape(-1)
    if array.size < 2:
        return None, None
    mean = float(array.mean())
    half = float(stats.t.ppf(0.5 + 0.5 * level, array.size - 1) * array.std(ddof=1) / math.sqrt(array.size))
    return mean - half, mean + half


def grouped_mean_interval(values: Any, level: float = 0.95) -> Interval:
    """Interval of the mean over samples whose nodes share errors: only whole samples are independent.

    Parameters
    ----------
    values : (samples, nodes)
    level : as in :func:`mean_interval`
    """
    return mean_interval(np.asarray(values, dtype=np.float64).mean(axis=1), level)


def quantile_ranks(n: int, p: float, level: float = 0.95) -> tuple[int | None, int | None]:
    """Ranks (1 is the least) whose values hold the `p` quantile between them; None where n is too small.

    Notes
    -----
    The number of values below the quantile is binomial (n, p), whatever the values' distribution; each side
    is left out with at most half of 1 - level (David and Nagaraja, Order Statistics, 3rd ed., section 7.1).

    Raises
    ------
    DomainError
        `n`, `p` or the level is out of range.
    """
    _check_level(level)
    if not n >= 1 or not 0.0 < p < 1.0:
        raise DomainError(Fault("quantile", f"got p = {p!r} of {n!r} values", "0 < p < 1, one value or more"))
    tail = 0.5 * (1.0 - level)
    below = int(stats.binom.ppf(tail, n, p))
    # x_(r) exceeds the quantile when fewer than r values lie below it
    while below > 0 and stats.binom.cdf(below - 1, n, p) > tail:
        below -= 1
    above = int(stats.binom.ppf(1.0 - tail, n, p)) + 1
    while above <= n and stats.binom.sf(above - 1, n, p) > tail:
        above += 1
    return (below if below >= 1 else None), (above if above <= n else None)


def quantile_interval(values: Any, p: float, level: float = 0.95) -> Interval:
    """Interval of the `p` quantile by order statistics.

    Where nodes share errors, values of one sample are not independent: take each sample's own quantile and
    :func:`mean_interval` over those instead.

    Parameters
    ----------
    values : array or Histogram of independent values; of a histogram the outer edges of the bins are taken
    p : between 0 and 1
    level : share of such intervals that hold the true quantile

    Returns
    -------
    (float or None, float or None)
        None on a side that the number of values cannot bound.
    """
    if isinstance(values, Histogram):
        if values.count == 0:
            return None, None
        low, high = quantile_ranks(values.count, p, level)
        return (
            None if low is None else values.at_rank(low).low,
            None if high is None else values.at_rank(high).high,
        )
    array = np.sort(np.asarray(values, dtype=np.float64).reshape(-1))
    if array.size == 0:
        return None, None
    low, high = quantile_ranks(array.size, p, level)
    return (None if low is None else float(array[low - 1])), (None if high is None else float(array[high - 1]))


def support_warning(p: float, n: int, what: str = "samples") -> str | None:
    """Say that `n` values do not support the `p` quantile; None where they do.

    Notes
    -----
    Ten values beyond the quantile are asked for, n (1 - p) >= 10: its standing is then known to a third.
    """
    tail = min(p, 1.0 - p)
    if not tail > 0.0:
        return None
    needed = math.ceil(10.0 / tail * (1.0 - 1e-12))
    if n >= needed:
        return None
    return f"the {100.0 * p:g} % quantile rests on {n:,} {what}; it needs about {needed:,}"
