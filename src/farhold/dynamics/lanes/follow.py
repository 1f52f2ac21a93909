"""Nodes that leave where tables and fixed steps hold, followed one by one with adaptive steps."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from farhold.constants import EARTH_RADIUS, SUN_RADIUS
from farhold.dynamics.lanes.arcs import reference_track
from farhold.dynamics.lanes.request import Asked, own_arcs
from farhold.dynamics.trajectory import Reference
from farhold.kernels.motion.follow import follow
from farhold.pool import run_blocks

__all__ = ["follow_nodes"]

_RTOL = 1e-13
_ATOL_M = 1e-6


def follow_nodes(
    reference: Reference,
    asked: Asked,
    lost: NDArray[np.int64],
    out: NDArray[np.float64],
    status: NDArray[np.int64],
) -> None:
    """Follow the nodes `lost` one by one with adaptive steps, up to where they meet a body."""
    end = float(asked.output_s[-1])
    series, start, cell, across = reference_track(reference, asked.start_s, end)
    gm_sun, gm_bare, gm_earth = reference.gm_m3_s2
    radii = np.array([SUN_RADIUS.value, EARTH_RADIUS.value])

    def one(node: int) -> None:
        size, kick, keep = own_arcs(asked, slice(node, node + 1))
        out[node] = np.nan
        status[node] = follow(
            asked.states[node].reshape(6, 1).copy(),
            asked.excess_beta[node : node + 1].copy(),
            asked.start_s,
            np.ascontiguousarray(size[0]),
            np.ascontiguousarray(kick[0]),
            np.ascontiguousarray(asked.dv_m_s[node]) if asked.dv_m_s.shape[1] else np.zeros((1, 3)),
            np.ascontiguousarray(keep[0]),
            out[node],
            series,
            start,
            cell,
            across,
            np.array([gm_sun, gm_bare]),
            gm_earth,
            reference.rate_rad_s,
            radii,
            _RTOL,
            _ATOL_M,
        )

    run_blocks(one, [int(node) for node in lost])
