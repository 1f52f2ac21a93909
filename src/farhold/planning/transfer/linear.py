"""Two-impulse transfers on the linear map, and where that map is singular."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S
from farhold.dynamics.trajectory import Reference

__all__ = ["LinearTransfer", "good_windows"]

_SINGULAR_BELOW = 0.6
_NEGLIGIBLE_M = 1e-3


@dataclass(frozen=True, slots=True, eq=False)
class LinearTransfer:
    """The linear map of one departure and arrival time, for all nodes and slots.

    With Phi the transition matrix and s the response to pressure, the price of node i for slot j is
    ``|a_j - u_i| + |b_j - w_i|``: distances between images of slots and of nodes.

    Attributes
    ----------
    phi : (6, 6);  response : (6,) deviation per unit of beta
    depart_s, arrive_s : times
    own_time_s : one over the fastest oscillation rate of the reference, scale of the singularity test
    """

    phi: NDArray[np.float64]
    response: NDArray[np.float64]
    depart_s: float
    arrive_s: float
    own_time_s: float

    @classmethod
    def between(cls, reference: Reference, depart_s: float, arrive_s: float) -> LinearTransfer:
        """Build the map of `reference` from `depart_s` to `arrive_s`."""
        return cls(
            reference.transition(depart_s, arrive_s),
            reference.pressure_response(depart_s, arrive_s),
            depart_s,
            arrive_s,
            1.0 / reference.fastest_rate_1_s(),
        )

    def _drift(self, states: NDArray[np.float64], excess_beta: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return where nodes (n, 6) would be at arrival had they no velocity: (n, 6)."""
        return states[:, :3] @ self.phi[:, :3].T + excess_beta[:, None] * self.response

    def nodes(
        self, states: NDArray[np.float64], excess_beta: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Images u, w (n, 3) of nodes with states (n, 6) [m/s]."""
        drift = self._drift(states, excess_beta)
        needed = _solve(self.phi[:3, 3:], drift[:, :3])
        return needed + states[:, 3:], needed @ self.phi[3:, 3:].T - drift[:, 3:]

    def slots(self, targets: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Images a, b (m, 3) of slots with states (m, 6) at arrival [m/s]."""
        a = _solve(self.phi[:3, 3:], targets[:, :3])
        return a, a @ self.phi[3:, 3:].T - targets[:, 3:]

    def impulses(
        self, states: NDArray[np.float64], targets: NDArray[np.float64], excess_beta: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Departure and arrival impulses (n, 3), (n, 3) of node k to target k [m/s]."""
        u, w = self.nodes(states, excess_beta)
        a, b = self.slots(targets)
        return a - u, w - b

    def singular(
        self, states: NDArray[np.float64], targets: NDArray[np.float64], excess_beta: NDArray[np.float64]
    ) -> NDArray[np.bool_]:
        """Whether the way of node k to target k lies along a direction that is singular at this time, (n,).

        The way is the miss at arrival of a node that makes no impulse. A direction is singular where a
        singular value of the position-by-velocity block, divided by min(T, 1/w), is below 0.6; it matters
        where the way has more than 1 mm along it. w is the fastest oscillation rate of the reference: n at
        L3, L4 and L5, about 2 n at L1 and L2.
        """
        left, values, _ = np.linalg.svd(self.phi[:3, 3:])
        weak = values / self._scale_s < _SINGULAR_BELOW
        way = targets[:, :3] - self._drift(states, excess_beta)[:, :3] - states[:, 3:] @ self.phi[:3, 3:].T
        touched: NDArray[np.bool_] = (np.abs(way @ left[:, weak]) > _NEGLIGIBLE_M).any(axis=1)
        return touched

    @property
    def _scale_s(self) -> float:
        return min(abs(self.arrive_s - self.depart_s), self.own_time_s)

    @property
    def worst_ratio(self) -> float:
        """Least singular value of the position-by-velocity block over min(T, 1/w)."""
        return _least_value(self.phi) / self._scale_s

    def remainder_m_s(
        self, reference: Reference, states: NDArray[np.float64], targets: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Conservative size (n,) of what the linear map leaves out of each price [m/s].

        The quadratic part of the attraction at distance d is at most 3 GM d2/rho4 per primary (second
        derivative of GM/r2); it acts over the transfer, is passed on by the transition matrix to the arrival,
        and is met by both impulses.
        """
        span = abs(self.arrive_s - self.depart_s)
        reach = np.maximum(np.linalg.norm(states[:, :3], axis=1), np.linalg.norm(targets[:, :3], axis=1))
        moments = np.linspace(self.depart_s, self.arrive_s, 1 if reference.autonomous else 9)
        r1, r2 = (np.linalg.norm(ways, axis=1).min() for ways in reference.primaries_at(moments))
        gm_sun, _, gm_earth = reference.gm_m3_s2
        curvature = 3.0 * (gm_sun / r1**4 + gm_earth / r2**4)
        inverse = np.linalg.inv(self.phi[:3, 3:])
        spread = np.linalg.norm(self.phi[:3, 3:], 2) * np.linalg.norm(inverse, 2)
        spread += np.linalg.norm(self.phi[3:, 3:], 2) * spread + np.linalg.norm(self.phi[3:, 3:], 2)
        size: NDArray[np.float64] = curvature * reach**2 * span * spread
        return size


def _solve(matrix: NDArray[np.float64], rows: NDArray[np.float64]) -> NDArray[np.float64]:
    """Solve `matrix` x = row for each of the (n, 3) rows."""
    return np.asarray(np.linalg.solve(matrix, rows.T).T, dtype=np.float64)


def _least_value(phi: NDArray[np.float64]) -> float:
    """Least singular value of the position-by-velocity block of `phi` (6, 6) [s]."""
    return float(np.linalg.svd(phi[:3, 3:], compute_uv=False)[-1])


def good_windows(reference: Reference, depart_s: float, longest_days: int = 400) -> list[tuple[int, int]]:
    """Whole-day transfer times, as closed ranges, at which no direction is singular.

    For periodic and equilibrium references the answer holds at the departure given.
    """
    own_time_s = 1.0 / reference.fastest_rate_1_s()
    if reference.span_s is not None:
        longest_days = min(longest_days, int((reference.span_s[1] - depart_s) // DAY_S))
    good = []
    for day in range(1, longest_days + 1):
        span_s = day * DAY_S
        least = _least_value(reference.transition(depart_s, depart_s + span_s))
        if least / min(span_s, own_time_s) >= _SINGULAR_BELOW:
            good.append(day)
    ranges: list[tuple[int, int]] = []
    for day in good:
        if ranges and ranges[-1][1] == day - 1:
            ranges[-1] = (ranges[-1][0], day)
        else:
            ranges.append((day, day))
    return ranges
