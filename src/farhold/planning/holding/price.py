"""The continuous price of holding slots: the acceleration to be made up for, integrated over the window."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.frames import turn_about_n
from farhold.dynamics.trajectory import Reference

__all__ = ["holding_m_s", "holding_m_s_yr"]

_PANEL_S = 30.0 * DAY_S
_POINTS = 8


def holding_m_s(
    reference: Reference,
    rule: NDArray[np.str_],
    position_m: NDArray[np.float64],
    at_s: float,
    from_s: float,
    to_s: float,
    excess_beta: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Price (n,) of holding n slots from `from_s` to `to_s` [m/s].

    |g + (beta_node - beta_ref) p| integrated over the actual window, by Gauss-Legendre on panels of 30 d or
    less; g is gradient plus centrifugal for `rotating`, gradient alone for `inertial`, zero for `natural`.

    Parameters
    ----------
    rule : (n,) "rotating", "inertial" or "natural"
    position_m : (n, 3) places at `at_s`, rotating axes [m]
    at_s : the time of `position_m`
    excess_beta : (n,) pressure over gravity of each node beyond the reference's
    """
    price = np.zeros(len(position_m))
    if to_s <= from_s:
        return price
    for kind in np.unique(rule):
        rows = np.flatnonzero(rule == kind)
        beta = excess_beta[rows, None]
        steady = reference.autonomous and kind != "inertial"
        for moment, weight in [(at_s, to_s - from_s)] if steady else _quadrature(from_s, to_s):
            place = position_m[rows]
            if kind == "inertial":
                place = place @ turn_about_n(-reference.rate_rad_s * (moment - at_s)).T
            pull = reference.field(place, str(kind), moment) + beta * reference.pressure_field(place, moment)
            price[rows] += weight * np.linalg.norm(pull, axis=1)
    return price


def holding_m_s_yr(
    reference: Reference,
    rule: NDArray[np.str_],
    position_m: NDArray[np.float64],
    at_s: float,
    excess_beta: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Price (n,) of holding for the year from `at_s` [m/s per year]; see :func:`holding_m_s`.

    Where the reference ends within the year, the mean up to its end counts.
    """
    end = at_s + YEAR_S
    if reference.span_s is not None and at_s < reference.span_s[1] < end:
        end = reference.span_s[1]
    return holding_m_s(reference, rule, position_m, at_s, at_s, end, excess_beta) * (YEAR_S / (end - at_s))


def _quadrature(from_s: float, to_s: float) -> list[tuple[float, float]]:
    """Return Gauss-Legendre moments and weights on equal panels."""
    panels = max(1, int(np.ceil((to_s - from_s) / _PANEL_S)))
    nodes, weights = np.polynomial.legendre.leggauss(_POINTS)
    half = 0.5 * (to_s - from_s) / panels
    middles = from_s + half * (2.0 * np.arange(panels) + 1.0)
    return [
        (float(middle + half * node), float(half * weight))
        for middle in middles
        for node, weight in zip(nodes, weights, strict=True)
    ]
