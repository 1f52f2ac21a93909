"""Taylor maps of the deviation motion over any span, to third order in deviation and pressure."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from farhold.dynamics.lanes.arcs import table
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.kernels.motion.maps import carry

__all__ = ["ORDERS", "TERMS_OF", "TaylorMap", "map_between"]

ORDERS = (1, 2, 3)
TERMS_OF = {1: 7, 2: 35, 3: 119}
_NODES = 8
_ARC_RAD = 0.3


@dataclass(frozen=True, slots=True, eq=False)
class TaylorMap:
    """The map of deviations from one time to another.

    Attributes
    ----------
    from_s, to_s : times, seconds from the reference's epoch
    terms : (119, 6) SI coefficients over the monomials of (R, T, N, rates, beta beyond the reference's): 7 of
        degree one, 28 of degree two, 84 of degree three, each degree in lexical order
    """

    from_s: float
    to_s: float
    terms: NDArray[np.float64]

    @property
    def linear(self) -> NDArray[np.float64]:
        """The transition matrix (6, 6)."""
        return np.ascontiguousarray(self.terms[:6].T)

    def covariance(self, covariance: NDArray[np.float64]) -> NDArray[np.float64]:
        """Carry covariances (..., 6, 6) of the deviation by the linear part."""
        carried: NDArray[np.float64] = self.linear @ covariance @ self.linear.T
        return carried


@lru_cache(maxsize=1)
def _monomials() -> list[tuple[int, ...]]:
    """Variables of each monomial, in the order of the coefficients."""
    return [chosen for degree in ORDERS for chosen in itertools.combinations_with_replacement(range(7), degree)]


@lru_cache(maxsize=1)
def _pairs() -> NDArray[np.int64]:
    """All products of two monomials that stay within the third degree: (p, 3) places."""
    names = _monomials()
    place = {name: k for k, name in enumerate(names)}
    rows = [
        (i, j, place[tuple(sorted(a + b))])
        for i, a in enumerate(names)
        for j, b in enumerate(names)
        if len(a) + len(b) <= ORDERS[-1]
    ]
    return np.array(rows, dtype=np.int64)


@lru_cache(maxsize=4096)
def _map(reference: Reference, from_s: float, span_s: float) -> NDArray[np.float64]:
    """Coefficients (119, 6) over a span, in scaled arithmetic turned back to SI."""
    fastest = max(reference.fastest_rate_1_s(), reference.unstable_rate_1_s())
    count = max(1, math.ceil(abs(span_s) * fastest / _ARC_RAD))
    step = span_s / count
    y = np.zeros((6, TERMS_OF[3]))
    y[np.arange(6), np.arange(6)] = 1.0
    gm_sun, gm_bare, gm_earth = reference.gm_m3_s2
    gm1 = np.array([gm_sun, gm_bare])
    for k in range(count):
        begin = 0.0 if reference.autonomous else from_s + k * step
        t = table(reference, begin, step, _NODES)
        carry(
            y,
            t.phi,
            t.response,
            t.places,
            t.pushes,
            t.inner,
            t.outer,
            t.r1,
            t.r2,
            gm1,
            gm_earth,
            _pairs(),
        )
    return np.ascontiguousarray(y.T)


def map_between(reference: Reference, from_s: float, to_s: float) -> TaylorMap:
    """Map of `reference` from `from_s` to `to_s` (either order), to third order.

    Made by flying polynomials through the full lane's arcs; a truncated polynomial algebra, see Berz 1999,
    Modern Map Methods in Particle Beam Physics, ch. 2 (from memory).

    Raises
    ------
    DomainError
        Times that are not finite or outside the reference's span.
    """
    if not (math.isfinite(from_s) and math.isfinite(to_s)):
        raise DomainError(Fault("map", f"from {from_s!r} to {to_s!r} s", "finite times"))
    begin = 0.0 if reference.autonomous else float(from_s)
    return TaylorMap(float(from_s), float(to_s), _map(reference, begin, float(to_s) - float(from_s)))
