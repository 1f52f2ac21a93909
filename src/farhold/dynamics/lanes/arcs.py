"""Tables of the shared arcs: linear flow, and its integrals against the interpolation of the remainder."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from farhold.dynamics.trajectory import Reference

__all__ = ["ArcTables", "Track", "reference_track", "stacked", "table"]

Track = tuple[NDArray[np.float64], float, float, NDArray[np.float64]]

_SUB = 6
_CELL_S = 2.0 * 86400.0
_DEGREE = 15


@dataclass(frozen=True, slots=True, eq=False)
class ArcTables:
    """Tables of t arcs with k Gauss-Legendre nodes each, SI; see kernels.motion.collocate.fly_shared."""

    phi: NDArray[np.float64]
    response: NDArray[np.float64]
    places: NDArray[np.float64]
    pushes: NDArray[np.float64]
    inner: NDArray[np.float64]
    outer: NDArray[np.float64]
    r1: NDArray[np.float64]
    r2: NDArray[np.float64]


def stacked(
    reference: Reference, begin_s: list[float], span_s: list[float], nodes: int
) -> tuple[ArcTables, NDArray[np.int64]]:
    """Tables of the arcs from `begin_s` over `span_s`, each kept once, and which one each arc uses (s,)."""
    place: dict[tuple[float, float], int] = {}
    index = np.empty(len(span_s), dtype=np.int64)
    found: list[ArcTables] = []
    for k, (begin, span) in enumerate(zip(begin_s, span_s, strict=True)):
        key = (0.0 if reference.autonomous else begin, span)
        if key not in place:
            place[key] = len(found)
            found.append(table(reference, key[0], span, nodes))
        index[k] = place[key]
    return (
        ArcTables(*(np.stack([getattr(one, name) for one in found]) for name in ArcTables.__dataclass_fields__)),
        index,
    )


@lru_cache(maxsize=4096)
def table(reference: Reference, begin_s: float, span_s: float, nodes: int) -> ArcTables:
    """Tables of the one arc from `begin_s` over `span_s` (either sign), without a leading axis.

    The integral of Phi(t, tau) B l_m(tau) up to each node and to the end is Phi(t, 0) times that of
    Phi(tau, 0)^-1 B l_m(tau), by Gauss rules between neighbouring nodes.
    """
    x, _ = np.polynomial.legendre.leggauss(nodes)
    gx, gw = np.polynomial.legendre.leggauss(_SUB)
    ends = np.concatenate([0.5 * (x + 1.0), [1.0]])
    starts = np.concatenate([[0.0], ends[:-1]])
    inner_x = (starts[:, None] + 0.5 * (gx + 1.0) * (ends - starts)[:, None]).ravel()
    inner_w = (0.5 * gw * (ends - starts)[:, None]).ravel() * span_s
    times = np.concatenate([inner_x, ends])
    order = np.argsort(times)
    back = np.argsort(order)
    rho1, rho2, phi, response = (values[back] for values in reference.arc_motion(begin_s, times[order] * span_s))
    rate = reference.rate_rad_s
    scale = np.array([1.0, 1.0, 1.0, rate, rate, rate])
    even = phi / scale[:, None] * scale
    pull = np.linalg.inv(even)[: inner_x.size, :, 3:] / rate
    basis = np.stack([_lagrange(0.5 * (x + 1.0), m, inner_x) for m in range(nodes)], axis=1)
    pieces = inner_w[:, None, None, None] * basis[:, :, None, None] * pull[:, None]
    sums = np.cumsum(pieces.reshape(nodes + 1, _SUB, nodes, 6, 3).sum(axis=1), axis=0)
    flow = even[inner_x.size :]
    carried = np.einsum("kab,kmbc->kmac", flow, sums) * scale[:, None]
    at_nodes = slice(inner_x.size, inner_x.size + nodes)
    return ArcTables(
        phi[-1],
        response[-1],
        np.ascontiguousarray(phi[at_nodes, :3]),
        np.ascontiguousarray(response[at_nodes, :3]),
        np.ascontiguousarray(carried[:nodes, :, :3]),
        np.ascontiguousarray(carried[nodes]),
        np.ascontiguousarray(rho1[at_nodes]),
        np.ascontiguousarray(rho2[at_nodes]),
    )


def _lagrange(points: NDArray[np.float64], m: int, at: NDArray[np.float64]) -> NDArray[np.float64]:
    """Value at `at` of the polynomial that is 1 at point m and 0 at the others."""
    others = np.delete(points, m)
    value: NDArray[np.float64] = np.prod((at[:, None] - others) / (points[m] - others), axis=1)
    return value


@lru_cache(maxsize=64)
def reference_track(reference: Reference, from_s: float, to_s: float) -> Track:
    """Chebyshev series of the way from the Sun to the reference over a span.

    Returns
    -------
    (cells, 3, degree + 1) [m], start [s], cell length [s], and the vector (3,) from the Sun to the Earth-Moon
    barycentre, all in rotating axes. One constant cell where the reference stands still.
    """
    sun, earth = reference.primaries_m(from_s)
    if reference.autonomous or from_s == to_s:
        return np.ascontiguousarray(sun.reshape(1, 3, 1)), from_s, 1.0, sun - earth
    low, high = min(from_s, to_s), max(from_s, to_s)
    cells = max(1, int(np.ceil((high - low) / _CELL_S)))
    cell = (high - low) / cells
    x = np.cos(np.pi * (np.arange(_DEGREE + 1) + 0.5) / (_DEGREE + 1))
    times = low + cell * (np.arange(cells)[:, None] + 0.5 * (x + 1.0))
    values = reference.primaries_at(times.ravel())[0].reshape(cells, _DEGREE + 1, 3)
    series = np.polynomial.chebyshev.chebvander(x, _DEGREE) * (2.0 / (_DEGREE + 1))
    series[:, 0] *= 0.5
    return (
        np.ascontiguousarray(np.einsum("xj,cxa->caj", series, values)),
        low,
        cell,
        sun - earth,
    )
