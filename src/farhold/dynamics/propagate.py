"""The full lane for many nodes: nonlinear motion about a reference, impulses, output at asked times."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.dynamics.lanes.accuracy import known
from farhold.dynamics.lanes.follow import follow_nodes
from farhold.dynamics.lanes.own import fly_own_nodes
from farhold.dynamics.lanes.request import checked
from farhold.dynamics.lanes.shared import fly_shared_nodes
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.kernels.status import OUTSIDE_TABLES

__all__ = ["Flight", "fly"]


@dataclass(frozen=True, slots=True, eq=False)
class Flight:
    """States (n, m, 6) at the m asked times, NaN where a node failed; status (n,), see kernels.status.

    `step_s` is the longest arc or step that the flight was cut into. `accurate` is False where rounding, amplified
    by the motion, kept the probes from the accuracy asked: the paths are then possible ones, not the only ones.
    """

    state: NDArray[np.float64]
    status: NDArray[np.int64]
    step_s: float
    accurate: bool


def fly(
    reference: Reference,
    states: ArrayLike,
    output_s: ArrayLike,
    *,
    start_s: float = 0.0,
    excess_beta: ArrayLike | None = None,
    impulse_s: ArrayLike | None = None,
    dv_m_s: ArrayLike | None = None,
    accuracy: str = "default",
    radius_m: float | None = None,
) -> Flight:
    """Fly nodes by the full lane (design section 3).

    Impulses that all nodes share cut the flight into shared arcs, flown by collocation about the exact linear
    flow; impulses at times of each node's own are flown by fixed steps of order 8 in deviation form. Nodes that
    leave where either holds, such as one that falls to the Earth, are followed one by one with adaptive steps.

    Parameters
    ----------
    states : (n, 6) deviations at `start_s`, rotating axes [m], [m/s]
    output_s : (m,) monotonic times, all on one side of `start_s`; the state at the time of an impulse is the
        one after it
    start_s : time of `states`, seconds from the reference's epoch
    excess_beta : (n,) pressure over gravity beyond the reference's; None for none
    impulse_s : (k,) or (n, k) times within the flight; None for none
    dv_m_s : (n, k, 3) impulses, rotating axes [m/s]
    accuracy : "draft", "default" or "fine"
    radius_m : distance that the accuracy is set up for, where a caller flies parts of one swarm; None: that of
        the nodes flown, with their speeds, impulses and pressure

    Raises
    ------
    DomainError
        Wrong shapes, values not finite or too far, times out of order, outside the flight or the reference's
        span; an unknown accuracy.
    """
    asked = checked(states, output_s, start_s, excess_beta, impulse_s, dv_m_s)
    known(accuracy)
    n, m = len(asked.states), asked.output_s.size
    radius = asked.reach_m(reference) if radius_m is None else radius_m
    if not 0.0 <= radius < math.inf:
        raise DomainError(Fault("radius", f"got {radius!r} m", "0 m or more, finite"))
    out = np.empty((n, m, 6))
    status = np.zeros(n, dtype=np.int64)
    lane = fly_own_nodes if asked.own else fly_shared_nodes
    longest, accurate = lane(reference, asked, radius, accuracy, out, status)
    lost = np.flatnonzero(status == OUTSIDE_TABLES)
    if lost.size:
        follow_nodes(reference, asked, lost, out, status)
    return Flight(out, status, longest, accurate)
