"""Arcs of each node's own: the fixed step that an accuracy asks for, and the flight of blocks of nodes."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from farhold.dynamics.lanes.accuracy import (
    LANES,
    LONGEST_S,
    NEAR,
    SETTLED,
    SHORTEST_S,
    allowed_m,
    probe_states,
    rounded,
)
from farhold.dynamics.lanes.arcs import Track, reference_track
from farhold.dynamics.lanes.request import Asked, blocks, own_arcs
from farhold.dynamics.trajectory import Reference
from farhold.kernels.motion.deviation import fly_own
from farhold.pool import run_blocks

__all__ = ["fly_own_nodes", "own_step"]


def own_step(
    reference: Reference, radius_m: float, start_s: float, span_s: float, accuracy: str
) -> tuple[float, bool]:
    """Longest fixed step of order 8 that keeps the position error within what `accuracy` allows [s].

    Also whether that is so: False where rounding, amplified by the motion, is beyond the accuracy asked.

    Arguments as :func:`scheme_for`; found by halving on the same probes.
    """
    radius, span = rounded(radius_m, span_s, accuracy)
    begin = 0.0 if reference.autonomous else start_s
    exact = span if reference.span_s is None else span_s
    return _own_step(reference, radius, begin, exact, accuracy)


@lru_cache(maxsize=256)
def _own_step(
    reference: Reference, radius_m: float, start_s: float, span_s: float, accuracy: str
) -> tuple[float, bool]:
    """Halve the step until flights with it and with half of it agree on the probes, or rounding forbids it."""
    count = max(1, math.ceil(abs(span_s) / LONGEST_S))
    coarse = _own_probed(reference, radius_m, start_s, span_s, count)
    before = math.inf
    while True:
        fine = _own_probed(reference, radius_m, start_s, span_s, 2 * count)
        size = np.linalg.norm(fine, axis=1)
        counts = np.isfinite(size)
        with np.errstate(invalid="ignore"):
            error = np.linalg.norm(fine - coarse, axis=1)
        step = abs(span_s) / count
        worst = float(np.max((error / (0.5 * allowed_m(accuracy, size)))[counts], initial=0.0))
        if worst <= 1.0:
            return step, True
        # order 8 gains 256 times by halving; where it gains less than 4, rounding is all that is left
        rounding = worst > 0.25 * before and bool(np.all((error <= SETTLED * size)[counts]))
        if rounding or step < SHORTEST_S:
            return step, False
        before = worst
        count *= 2
        coarse = fine


def _own_probed(
    reference: Reference, radius_m: float, start_s: float, span_s: float, count: int
) -> NDArray[np.float64]:
    """Places (12, 3) of the probes after the span in `count` fixed steps; NaN where they come near a body."""
    probes = probe_states(radius_m, reference.rate_rad_s)
    n = len(probes)
    one = np.ones((1, n), dtype=np.int64)
    out, status = _fly_block(
        reference,
        reference_track(reference, start_s, start_s + span_s),
        start_s,
        probes,
        np.zeros(n),
        count * one,
        np.full((1, n), span_s / count),
        -one,
        np.zeros((n, 0, 3)),
        0 * one,
        1,
    )
    return np.where((status == 0)[:, None], out[:, 0, :3], np.nan)


def _fly_block(
    reference: Reference,
    track: Track,
    start_s: float,
    states: NDArray[np.float64],
    excess_beta: NDArray[np.float64],
    steps: NDArray[np.int64],
    size_s: NDArray[np.float64],
    kick: NDArray[np.int64],
    dv_m_s: NDArray[np.float64],
    keep: NDArray[np.int64],
    kept: int,
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Fly one block of states (w, 6) through arcs (s, w) of their own; see kernels.motion.deviation.fly_own.

    Returns the kept states (w, kept, 6) and the status (w,). Blocks are padded to one width.
    """
    width = len(states)

    def padded(values: NDArray[np.float64] | NDArray[np.int64], fill: float = 0) -> NDArray[np.float64]:
        wide = np.full((*values.shape[:-1], LANES), fill, dtype=values.dtype)
        wide[..., :width] = values
        return wide

    out = np.zeros((kept, 6, LANES))
    status = np.zeros(LANES, dtype=np.int64)
    gm_sun, gm_bare, gm_earth = reference.gm_m3_s2
    series, start, cell, across = track
    fly_own(
        padded(states.T),
        padded(excess_beta),
        np.full(LANES, start_s),
        padded(steps),
        padded(size_s),
        padded(kick, -1),
        np.ascontiguousarray(dv_m_s),
        padded(keep, -1),
        out,
        series,
        start,
        cell,
        across,
        np.array([gm_sun, gm_bare]),
        gm_earth,
        reference.rate_rad_s,
        NEAR,
        status,
    )
    return out[:, :, :width].transpose(2, 0, 1), status[:width]


def fly_own_nodes(
    reference: Reference,
    asked: Asked,
    radius_m: float,
    accuracy: str,
    out: NDArray[np.float64],
    status: NDArray[np.int64],
) -> tuple[float, bool]:
    """Fly all nodes through arcs of their own; returns the longest step and whether the accuracy is kept."""
    span = float(asked.output_s[-1]) - asked.start_s
    longest, kept = own_step(reference, radius_m, asked.start_s, span, accuracy)
    track = reference_track(reference, asked.start_s, float(asked.output_s[-1]))

    def block(part: slice) -> None:
        size, kick, keep = own_arcs(asked, part)
        steps = np.where(size == 0.0, 0, np.ceil(np.abs(size) / longest - 1e-9)).astype(np.int64)
        steps = np.where(size != 0.0, np.maximum(steps, 1), 0)
        step = np.divide(size, steps, out=np.zeros_like(size), where=steps > 0)
        out[part], status[part] = _fly_block(
            reference,
            track,
            asked.start_s,
            asked.states[part],
            asked.excess_beta[part],
            steps.T,
            step.T,
            kick.T,
            asked.dv_m_s[part],
            keep.T,
            asked.output_s.size,
        )

    run_blocks(block, blocks(len(asked.states)))
    return longest, kept
