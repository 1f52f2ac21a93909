"""Linear flow about the reference, driven by constant accelerations and by the pull at turning slots."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S
from farhold.dynamics.attraction import plant
from farhold.dynamics.frames import turn_about_n
from farhold.dynamics.trajectory import Reference

__all__ = ["Flow", "flow", "slot_turn"]

_PANEL_S = 10.0 * DAY_S
_POINTS = 6


@dataclass(frozen=True, slots=True, eq=False)
class Flow:
    """Motion of deviations from a slot to p later times, rotating axes, SI.

    Attributes
    ----------
    state : (p, 6, 6) per deviation now
    steady : (p, 6, 3) per acceleration that stays constant in rotating axes
    slot : (p, 6, 3) per place of the slot now, for slots whose pull is taken as linear in their place
    """

    state: NDArray[np.float64]
    steady: NDArray[np.float64]
    slot: NDArray[np.float64]


def slot_turn(reference: Reference, rule: str, span_s: float) -> NDArray[np.float64]:
    """Matrix (3, 3) that carries a slot's place over `span_s`: slots of rule `inertial` turn by -n about N."""
    return turn_about_n(-reference.rate_rad_s * span_s) if rule == "inertial" else np.eye(3)


@lru_cache(maxsize=4096)
def flow(reference: Reference, rule: str, from_s: float, taus_s: tuple[float, ...]) -> Flow:
    """Flow from `from_s` to `from_s` + each of the rising `taus_s`, about slots under `rule`.

    The pull at a slot is its place times the gradient at the reference, with the centrifugal part for
    `rotating` and nothing for `natural` slots; integrals by Gauss-Legendre rules on panels of at most 10 d.
    """
    edges = [0.0]
    for tau in taus_s:
        panels = max(1, int(np.ceil((tau - edges[-1]) / _PANEL_S)))
        edges += np.linspace(edges[-1], tau, panels + 1)[1:].tolist()
    bounds = np.array(edges)
    x, w = np.polynomial.legendre.leggauss(_POINTS)
    half = 0.5 * np.diff(bounds)
    inner = (bounds[:-1, None] + half[:, None] * (x + 1.0)).ravel()
    weight = (half[:, None] * w).ravel()
    times = np.concatenate([inner, np.asarray(taus_s)])
    order = np.argsort(times, kind="stable")
    back = np.argsort(order)
    begin = 0.0 if reference.autonomous else from_s
    sun, earth, phi, _ = (values[back] for values in reference.arc_motion(begin, times[order]))
    rate = reference.rate_rad_s
    scale = np.array([1.0, 1.0, 1.0, rate, rate, rate])
    pull = np.linalg.inv(phi / scale[:, None] * scale)[: inner.size, :, 3:] / rate * weight[:, None, None]
    driven = np.stack(
        [
            _slot_pull(reference, rule, (sun[k], earth[k])) @ slot_turn(reference, rule, float(inner[k]))
            for k in range(inner.size)
        ]
    )
    upto = np.searchsorted(inner, np.asarray(taus_s))
    ends = phi[inner.size :]
    even = ends / scale[:, None] * scale
    steady = np.cumsum(pull, axis=0)[upto - 1]
    slot = np.cumsum(pull @ driven, axis=0)[upto - 1]
    return Flow(
        np.ascontiguousarray(ends),
        np.ascontiguousarray((even @ steady) * scale[:, None]),
        np.ascontiguousarray((even @ slot) * scale[:, None]),
    )


def _slot_pull(
    reference: Reference, rule: str, primaries_m: tuple[NDArray[np.float64], NDArray[np.float64]]
) -> NDArray[np.float64]:
    """Acceleration (3, 3) per place of a slot kept under `rule` [1/s2]."""
    if rule == "natural":
        return np.zeros((3, 3))
    gm_sun, _, gm_earth = reference.gm_m3_s2
    rate = reference.rate_rad_s
    gradient = plant(primaries_m, (gm_sun, gm_earth), rate)[3:, :3] * rate**2
    if rule == "inertial":
        gradient -= rate**2 * np.diag([1.0, 1.0, 0.0])
    return gradient
