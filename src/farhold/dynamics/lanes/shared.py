"""Shared arcs: the scheme that an accuracy asks for, and the flight of all nodes through one set of tables."""

from __future__ import annotations

import contextlib
import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from farhold.dynamics.lanes.accuracy import (
    ACCURACIES,
    LANES,
    LONGEST_S,
    NEAR,
    SETTLED,
    SHORTEST_S,
    allowed_m,
    probe_states,
    rounded,
)
from farhold.dynamics.lanes.arcs import ArcTables, stacked
from farhold.dynamics.lanes.request import Asked, Legs, legs_of, pieces
from farhold.dynamics.trajectory import Reference
from farhold.kernels.motion.collocate import NEAR_LIMIT, SERIES_LIMIT, fly_many
from farhold.kernels.status import OK, OUTSIDE_TABLES
from farhold.pool import run_blocks

__all__ = ["Scheme", "fly_shared_nodes", "scheme_for"]

_SERIES_FROM_M = 5e10
# nodes and sweeps, cheapest first
_CHOICES = ((2, 2), (3, 2), (4, 2), (5, 2), (6, 2), (4, 3), (5, 3), (6, 3), (5, 4), (6, 6))
_GIVEN_UP_BEYOND = 30.0
_LOOKS = 12


@dataclass(frozen=True, slots=True)
class Scheme:
    """Longest arc [s], nodes an arc, sweeps, and the change of place in the last sweep that is still sound [m].

    `closed` says that the remainder takes its closed form, beyond the reach of series. `accurate` is False
    where rounding, amplified by the motion, is beyond the accuracy asked.
    """

    longest_s: float
    nodes: int
    sweeps: int
    settled_m: float
    closed: bool
    accurate: bool = True


@dataclass(frozen=True, slots=True, eq=False)
class Shared:
    """Arcs that all nodes of a flight share.

    Attributes
    ----------
    tables, index : tables of the distinct arcs, and which one each of the s arcs uses
    kick, keep : (s,) row of the impulses before, and of the output after the arc, -1 for none
    longest_s : length of the longest arc
    """

    tables: ArcTables
    index: NDArray[np.int64]
    kick: NDArray[np.int64]
    keep: NDArray[np.int64]
    longest_s: float


def fly_shared_block(
    reference: Reference,
    shared: Shared,
    sweeps: int,
    closed: bool,
    states: NDArray[np.float64],
    excess_beta: NDArray[np.float64],
    dv_m_s: NDArray[np.float64],
    kept: int,
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Fly n states (n, 6) with impulses (n, k, 3).

    Returns the kept states (n, kept, 6), the change of place in the last sweep (n,) [m], the largest |q| (n,).
    Blocks are padded to one width, so that a node takes the same instructions wherever it stands.
    """
    n = len(states)
    out = np.empty((n, kept, 6))
    moved, far = np.empty(n), np.empty(n)
    gm_sun, gm_bare, gm_earth = reference.gm_m3_s2
    t = shared.tables
    fly_many(
        np.ascontiguousarray(states),
        np.ascontiguousarray(excess_beta),
        LANES,
        shared.index,
        t.phi,
        t.response,
        t.places,
        t.pushes,
        t.inner,
        t.outer,
        t.r1,
        t.r2,
        np.array([gm_sun, gm_bare]),
        gm_earth,
        closed,
        sweeps,
        shared.kick,
        np.ascontiguousarray(dv_m_s),
        shared.keep,
        out,
        moved,
        far,
    )
    return out, np.sqrt(moved), far


def scheme_for(
    reference: Reference,
    radius_m: float,
    start_s: float,
    span_s: float,
    gap_s: float,
    accuracy: str,
) -> Scheme:
    """Cheapest scheme that keeps the position error within what `accuracy` allows.

    Parameters
    ----------
    radius_m : largest distance (or speed over rate) of any node from the reference
    start_s, span_s : start and length of the flight
    gap_s : longest time between impulses or outputs: arcs need not be longer
    accuracy : "draft", "default" or "fine": 1 m, 1 mm, 10 micrometres after a year at 1000 km; scaled up with
        the distance reached where that is beyond the 40,000 km of that case

    Raises
    ------
    DomainError
        Unknown accuracy.
    """
    radius, span = rounded(radius_m, span_s, accuracy)
    cap = LONGEST_S * 2.0 ** -math.floor(math.log2(LONGEST_S / min(max(gap_s, 3600.0), LONGEST_S)))
    begin = 0.0 if reference.autonomous else start_s
    exact = span if reference.span_s is None else span_s
    return _scheme(reference, radius, begin, exact, cap, accuracy)


@lru_cache(maxsize=512)
def _scheme(
    reference: Reference,
    radius_m: float,
    start_s: float,
    span_s: float,
    cap_s: float,
    accuracy: str,
) -> Scheme:
    """Choose by series, which are quicker, where the Earth is far and they hold for all probes."""
    if np.linalg.norm(reference.primaries_m(start_s)[1]) > _SERIES_FROM_M:
        with contextlib.suppress(_BeyondSeriesError):
            return _searched(reference, radius_m, start_s, span_s, cap_s, accuracy, False)
    return _searched(reference, radius_m, start_s, span_s, cap_s, accuracy, True)


class _BeyondSeriesError(Exception):
    """A probe went where the series do not hold."""


def _searched(
    reference: Reference,
    radius_m: float,
    start_s: float,
    span_s: float,
    cap_s: float,
    accuracy: str,
    closed: bool,
) -> Scheme:
    """Try arcs from the longest down; for each the cheapest nodes and sweeps that agree with arcs of half.

    Probes are compared at several times, up to where they come near a body. Where halving no longer brings
    the best choice nearer, rounding is all that is left and the search ends.
    """
    best: tuple[float, Scheme] | None = None
    length = cap_s
    before = math.inf
    while True:
        count = max(1, math.ceil(abs(span_s) / length - 1e-9))
        truth, _ = _probed(reference, radius_m, start_s, span_s, count, 2, *_CHOICES[-1], closed)
        size = np.linalg.norm(truth, axis=2)
        counts = np.isfinite(size)
        allowed = 0.5 * allowed_m(accuracy, size)
        error = np.full(size.shape, np.inf)
        for nodes, sweeps in _CHOICES:
            cost = _cost(nodes, sweeps, length)
            if best is not None and cost >= best[0]:
                break
            got, moved = _probed(reference, radius_m, start_s, span_s, count, 1, nodes, sweeps, closed)
            error = np.where(np.isfinite(got).all(axis=2), np.linalg.norm(got - truth, axis=2), np.inf)
            if np.all((error <= allowed)[counts]):
                # lanes whose last sweep still moved them much more than any sound probe are not trusted
                sound = moved[counts.all(axis=1)]
                settled = max(_GIVEN_UP_BEYOND * float(sound.max(initial=0.0)), ACCURACIES[accuracy])
                best = (cost, Scheme(length, nodes, sweeps, settled, closed))
                break
        if best is not None and _cost(*_CHOICES[0], length / 2.0) >= best[0]:
            return best[1]
        worst = float(np.max((error / allowed)[counts], initial=0.0))
        rounding = worst > 0.25 * before and bool(np.all((error <= SETTLED * size)[counts]))
        if rounding or length / 2.0 < SHORTEST_S:
            if best is not None:
                return best[1]
            return Scheme(length, *_CHOICES[-1], ACCURACIES[accuracy], closed, accurate=False)
        before = worst
        length /= 2.0


def _cost(nodes: int, sweeps: int, length_s: float) -> float:
    """Work of a scheme per second of flight, in samples of the remainder."""
    return nodes * (0.4 + sweeps + 0.3 * nodes * (sweeps - 1)) / length_s


def _probed(
    reference: Reference,
    radius_m: float,
    start_s: float,
    span_s: float,
    count: int,
    split: int,
    nodes: int,
    sweeps: int,
    closed: bool,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Places (12, t, 3) of the probes at t times of the span, NaN from where they come near a body.

    Flown in `count` equal arcs, each split in `split`. Also their change of place in the last sweep (12,) [m].
    """
    arcs = count * split
    step = span_s / arcs
    looks = np.unique(np.linspace(0, count, _LOOKS + 1).astype(np.int64)[1:]) * split - 1
    tables, index = stacked(reference, [start_s + k * step for k in range(arcs)], [step] * arcs, nodes)
    keep = np.full(arcs, -1)
    keep[looks] = np.arange(looks.size)
    shared = Shared(tables, index, np.full(arcs, -1), keep, abs(step))
    probes = probe_states(radius_m, reference.rate_rad_s)
    none = np.zeros((len(probes), 0, 3))
    with np.errstate(all="ignore"):
        out, moved, far = fly_shared_block(
            reference, shared, sweeps, closed, probes, np.zeros(len(probes)), none, looks.size
        )
    if not closed and (far > SERIES_LIMIT).any():
        raise _BeyondSeriesError
    times = start_s + (looks + 1) * step
    lost = _near_a_body(reference, out[..., :3], times.astype(float)) & (far > NEAR_LIMIT)[:, None]
    # a probe that is near at one look was already on its way there at the one before
    gone = np.logical_or.accumulate(
        lost | np.roll(lost, -1, axis=1) * (np.arange(looks.size) < looks.size - 1), axis=1
    )
    return np.where(gone[..., None], np.nan, out[..., :3]), moved


def _near_a_body(
    reference: Reference, place_m: NDArray[np.float64], times_s: NDArray[np.float64]
) -> NDArray[np.bool_]:
    """Whether places (n, t, 3) lie nearer to a body than half as far as the reference does, or not at all."""
    near: NDArray[np.bool_] = np.logical_not(np.isfinite(place_m).all(axis=2))
    for way in reference.primaries_at(times_s):
        with np.errstate(invalid="ignore", over="ignore"):
            near |= np.linalg.norm(place_m + way, axis=2) < NEAR * np.linalg.norm(way, axis=1)
    return near


def _shared_arcs(reference: Reference, legs: Legs, scheme: Scheme) -> Shared:
    """Cut legs into equal arcs that are short enough, and make their tables."""
    begin: list[float] = []
    length: list[float] = []
    kick: list[int] = []
    keep: list[int] = []
    for start, whole, first, last in zip(legs.begin_s, legs.span_s, legs.kick, legs.keep, strict=True):
        count = max(1, math.ceil(abs(whole) / scheme.longest_s - 1e-9))
        begin += [start + i * (whole / count) for i in range(count)]
        length += [whole / count] * count
        kick += [int(first), *[-1] * (count - 1)]
        keep += [*[-1] * (count - 1), int(last)]
    tables, index = stacked(reference, begin, length, scheme.nodes)
    return Shared(
        tables,
        index,
        np.array(kick, dtype=np.int64),
        np.array(keep, dtype=np.int64),
        float(np.abs(length).max()),
    )


def fly_shared_nodes(
    reference: Reference,
    asked: Asked,
    radius_m: float,
    accuracy: str,
    out: NDArray[np.float64],
    status: NDArray[np.int64],
) -> tuple[float, bool]:
    """Fly all nodes through the arcs they share; returns the longest arc and whether the accuracy is kept."""
    legs = legs_of(asked)
    if not legs.span_s:
        legs.put(
            out,
            slice(0, len(asked.states)),
            asked.states,
            np.empty((len(asked.states), 0, 6)),
        )
        return 0.0, True
    gap = float(np.abs(legs.span_s).max())
    span = float(asked.output_s[-1]) - asked.start_s
    scheme = scheme_for(reference, radius_m, asked.start_s, span, gap, accuracy)
    shared = _shared_arcs(reference, legs, scheme)

    limit = NEAR_LIMIT if scheme.closed else SERIES_LIMIT

    def block(part: slice) -> None:
        states = asked.states[part]
        got, moved, far = fly_shared_block(
            reference,
            shared,
            scheme.sweeps,
            scheme.closed,
            states,
            asked.excess_beta[part],
            legs.dv_m_s[part],
            legs.kept,
        )
        sound = (moved <= scheme.settled_m) & (far <= limit) & np.isfinite(got).all(axis=(1, 2))
        status[part] = np.where(sound, OK, OUTSIDE_TABLES)
        legs.put(out, part, states, got)

    run_blocks(block, pieces(len(asked.states)))
    return shared.longest_s, scheme.accurate
