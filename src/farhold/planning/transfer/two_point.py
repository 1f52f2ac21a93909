"""Two-point transfers of many nodes at once, on the full lane."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.dynamics.propagate import fly
from farhold.dynamics.trajectory import Reference
from farhold.planning.transfer.linear import LinearTransfer
from farhold.watch import SILENT, Watch

__all__ = ["CONVERGED", "FAILED", "MISSED", "SINGULAR", "STATUS_WORDS", "TwoPointPlan", "two_point"]

CONVERGED, SINGULAR, MISSED, FAILED = 0, 1, 2, 3
STATUS_WORDS = (
    "done",
    "the transfer time is singular for this node",
    "the iteration did not reach the slot",
    "the path meets the Sun or the Earth, or is not finite",
)
_WANTED_M = 1e-3
_ALLOWED_M = 0.1
_SLOW = 0.2
_ITERATIONS = 16
_PROBE_M_S = 1e-4

_Arrival = Callable[[NDArray[np.int64], NDArray[np.float64]], NDArray[np.float64]]


@dataclass(frozen=True, slots=True, eq=False)
class TwoPointPlan:
    """Impulses of n transfers, rotating axes at departure and at arrival.

    Attributes
    ----------
    dv_depart_m_s, dv_arrive_m_s : (n, 3), NaN where there is no solution
    miss_m : (n,) distance from the slot at arrival when flown on the full lane
    status : (n,) int, index into STATUS_WORDS
    """

    dv_depart_m_s: NDArray[np.float64]
    dv_arrive_m_s: NDArray[np.float64]
    miss_m: NDArray[np.float64]
    status: NDArray[np.int64]

    @property
    def total_m_s(self) -> NDArray[np.float64]:
        """Sum of both impulses per node, (n,)."""
        total: NDArray[np.float64] = np.linalg.norm(self.dv_depart_m_s, axis=1) + np.linalg.norm(
            self.dv_arrive_m_s, axis=1
        )
        return total


def two_point(
    reference: Reference,
    states: NDArray[np.float64],
    targets: NDArray[np.float64],
    depart_s: float,
    arrive_s: float,
    *,
    excess_beta: NDArray[np.float64],
    accuracy: str = "default",
    watch: Watch = SILENT,
) -> TwoPointPlan:
    """Join states to targets by two impulses each, Newton on the full lane in one batch.

    Parameters
    ----------
    states : (n, 6) at departure before the impulse, rotating axes [m], [m/s]
    targets : (n, 6) at arrival after the impulse
    depart_s, arrive_s : times, arrive_s > depart_s
    excess_beta : (n,) pressure over gravity beyond the reference's

    Returns
    -------
    TwoPointPlan; nodes whose way is singular at this time are not flown and carry the status SINGULAR.

    The first guess is the linear map; its Jacobian serves until it stops paying, then each node gets its own
    by differences. The miss is that of the flight with the impulses returned.
    """
    n = len(states)
    linear = LinearTransfer.between(reference, depart_s, arrive_s)
    status = np.where(linear.singular(states, targets, excess_beta), SINGULAR, MISSED).astype(np.int64)
    depart = np.full((n, 3), np.nan)
    arrive = np.full((n, 3), np.nan)
    miss_m = np.full(n, np.nan)
    todo = np.flatnonzero(status == MISSED)
    depart[todo] = linear.impulses(states[todo], targets[todo], excess_beta[todo])[0]
    arrival = _arrival_of(reference, states, targets, depart_s, arrive_s, excess_beta, accuracy)
    inverse = np.broadcast_to(np.linalg.inv(linear.phi[:3, 3:]), (n, 3, 3)).copy()
    before = np.full(n, np.inf)
    watch.stage("flying the transfers", int(todo.size))
    for iteration in range(_ITERATIONS):
        if todo.size == 0:
            break
        end = arrival(todo, depart[todo])
        error = end[:, :3] - targets[todo, :3]
        size = np.linalg.norm(error, axis=1)
        miss_m[todo] = size
        arrive[todo] = targets[todo, 3:] - end[:, 3:]
        lost = ~np.isfinite(size)
        status[todo[lost]] = FAILED
        left = ~lost & (size > _WANTED_M)
        slow = left & (size > _SLOW * before[todo])
        inverse[todo[slow]] = _own_inverse(arrival, todo[slow], depart, end[slow])
        before[todo] = size
        watch.advance(int(todo.size - left.sum()))
        todo = todo[left]
        if iteration < _ITERATIONS - 1:
            depart[todo] -= np.einsum("nij,nj->ni", inverse[todo], error[left])
    status[(status == MISSED) & (miss_m <= _ALLOWED_M)] = CONVERGED
    bad = status != CONVERGED
    depart[bad] = np.nan
    arrive[bad] = np.nan
    return TwoPointPlan(depart, arrive, miss_m, status)


def _arrival_of(
    reference: Reference,
    states: NDArray[np.float64],
    targets: NDArray[np.float64],
    depart_s: float,
    arrive_s: float,
    excess_beta: NDArray[np.float64],
    accuracy: str,
) -> _Arrival:
    """Return the function that flies rows of `states` with departure impulses (k, 3) and gives their ends."""
    reach = max(
        float(np.linalg.norm(states[:, :3], axis=1).max(initial=0.0)),
        float(np.linalg.norm(targets[:, :3], axis=1).max(initial=0.0)),
    )
    push = float(np.linalg.norm(reference.pressure_field(np.zeros((1, 3)), depart_s)))
    reach += push * float(np.abs(excess_beta).max(initial=0.0)) / reference.rate_rad_s**2

    def arrival(rows: NDArray[np.int64], dv_m_s: NDArray[np.float64]) -> NDArray[np.float64]:
        begin = states[rows].copy()
        begin[:, 3:] += dv_m_s
        flown = fly(
            reference,
            begin,
            [arrive_s],
            start_s=depart_s,
            excess_beta=excess_beta[rows],
            accuracy=accuracy,
            radius_m=2.0 * reach,
        )
        return flown.state[:, 0]

    return arrival


def _own_inverse(
    arrival: _Arrival, rows: NDArray[np.int64], depart: NDArray[np.float64], end: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Invert the change of arrival by departure impulse of each row, by differences: (k, 3, 3)."""
    if rows.size == 0:
        return np.empty((0, 3, 3))
    columns = [
        (arrival(rows, depart[rows] + _PROBE_M_S * axis)[:, :3] - end[:, :3]) / _PROBE_M_S for axis in np.eye(3)
    ]
    return np.linalg.inv(np.stack(columns, axis=2))
