"""A checked request to fly nodes, and its cut into legs and blocks."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.dynamics.lanes.accuracy import LANES
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.kernels.motion.totals import totals
from farhold.pool import threads

__all__ = ["Asked", "Legs", "blocks", "checked", "legs_of", "own_arcs", "pieces"]

_PIECES = 4

_FARTHEST_M = 1e14


@dataclass(frozen=True, slots=True, eq=False)
class Asked:
    """A checked request: states (n, 6), pressure (n,), times (m,), impulse times (1 or n, k), dv (n, k, 3).

    `total_m_s` is the sum of impulses of each node, (n,). `own` says that impulse times are each node's own, also
    where there is but one node.
    """

    states: NDArray[np.float64]
    excess_beta: NDArray[np.float64]
    start_s: float
    output_s: NDArray[np.float64]
    impulse_s: NDArray[np.float64]
    dv_m_s: NDArray[np.float64]
    total_m_s: NDArray[np.float64]
    own: bool = False

    def reach_m(self, reference: Reference) -> float:
        """Largest distance at the start, with what speed, impulses and pressure come to in 1/n of time.

        Raises DomainError where that is farther than any motion about a libration point [m].
        """
        with np.errstate(over="ignore"):
            speed = float(np.linalg.norm(self.states[:, 3:], axis=1).max(initial=0.0))
            far = float(np.linalg.norm(self.states[:, :3], axis=1).max(initial=0.0))
        rate = reference.rate_rad_s
        push = float(np.linalg.norm(reference.pressure_field(np.zeros((1, 3)), self.start_s)))
        pushed = push * float(np.abs(self.excess_beta).max(initial=0.0)) / rate**2
        reach = far + (speed + float(self.total_m_s.max(initial=0.0))) / rate + pushed
        if reach > _FARTHEST_M:
            got = f"with their speeds, impulses and pressure they reach {reach:.3g} m"
            raise DomainError(Fault("states", got, f"up to {_FARTHEST_M:g} m"))
        return reach

    def part(self, rows: NDArray[np.int64]) -> Asked:
        """Return the request for some of the nodes."""
        when = self.impulse_s if len(self.impulse_s) == 1 else self.impulse_s[rows]
        return Asked(
            self.states[rows],
            self.excess_beta[rows],
            self.start_s,
            self.output_s,
            when,
            self.dv_m_s[rows],
            self.total_m_s[rows],
            self.own,
        )


def checked(
    states: ArrayLike,
    output_s: ArrayLike,
    start_s: float,
    excess_beta: ArrayLike | None,
    impulse_s: ArrayLike | None,
    dv_m_s: ArrayLike | None,
) -> Asked:
    """Check a request; see :func:`fly`."""
    y = np.asarray(states, dtype=float)
    if y.ndim != 2 or y.shape[1] != 6:
        raise DomainError(Fault("states", f"shape {y.shape}", "shape (n, 6)"))
    _finite("states", y)
    n = y.shape[0]
    times = np.atleast_1d(np.asarray(output_s, dtype=float))
    if times.ndim != 1 or times.size == 0:
        raise DomainError(Fault("output times", f"shape {times.shape}", "one or more times"))
    _finite("output times", times)
    spans = times - start_s
    ordered = np.diff(spans, prepend=0.0)
    if not (np.all(ordered >= 0.0) or np.all(ordered <= 0.0)):
        raise DomainError(
            Fault(
                "output times",
                "they go back and forth",
                "times in order, away from the start",
            )
        )
    beta = np.zeros(n) if excess_beta is None else np.broadcast_to(np.asarray(excess_beta, dtype=float), (n,))
    _finite("pressure", beta)
    when, dv = _impulses(n, impulse_s, dv_m_s, start_s, float(times[-1]))
    total = totals(dv)
    if not np.isfinite(total).all():
        _finite("impulses", dv)
    own = len(when) > 1 or (n == 1 and np.ndim(impulse_s if impulse_s is not None else ()) == 2)
    return Asked(y, beta, float(start_s), times, when, dv, total, own)


def _finite(name: str, values: NDArray[np.float64]) -> None:
    """Refuse values that are not finite, naming the first."""
    bad = ~np.isfinite(values)
    if bad.any():
        place = tuple(int(k) for k in np.argwhere(bad)[0])
        raise DomainError(Fault(name, f"{float(values[place])!r} at {place}", "finite numbers"))


def _impulses(
    n: int,
    impulse_s: ArrayLike | None,
    dv_m_s: ArrayLike | None,
    start_s: float,
    end_s: float,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Check impulses; return their times (1 or n, k) and dv (n, k, 3)."""
    if impulse_s is None or dv_m_s is None:
        if (impulse_s is None) != (dv_m_s is None):
            raise DomainError(
                Fault(
                    "impulses",
                    "times without dv, or dv without times",
                    "both or neither",
                )
            )
        return np.empty((1, 0)), np.zeros((n, 0, 3))
    when = np.atleast_1d(np.asarray(impulse_s, dtype=float))
    when = when[None, :] if when.ndim == 1 else when
    # kernels are compiled once more for arrays that may not be written
    dv = np.require(dv_m_s, float, ("C", "W"))
    k = when.shape[1]
    if when.shape[0] not in (1, n) or dv.shape != (n, k, 3):
        raise DomainError(
            Fault(
                "impulses",
                f"times {when.shape} and dv {dv.shape}",
                f"(k,) or ({n}, k), and ({n}, k, 3)",
            )
        )
    _finite("impulse times", when)
    low, high = min(start_s, end_s), max(start_s, end_s)
    if k and not (when.min() >= low and when.max() <= high):
        raise DomainError(
            Fault(
                "impulse times",
                f"{float(when.min())!r} to {float(when.max())!r} s",
                f"{low:g} to {high:g} s",
            )
        )
    return when, dv


def blocks(n: int) -> Iterable[slice]:
    """Cut n nodes into blocks of one lane width."""
    return [slice(first, min(first + LANES, n)) for first in range(0, n, LANES)]


def pieces(n: int) -> Iterable[slice]:
    """Cut n nodes into pieces of whole blocks, some for each thread."""
    size = LANES * max(1, -(-n // (LANES * _PIECES * threads())))
    return [slice(first, min(first + size, n)) for first in range(0, n, size)]


def _merged(
    when_s: NDArray[np.float64], dv_m_s: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Add up impulses (n, k, 3) that fall on one time, so that each of the times (k,) occurs once."""
    times, place = np.unique(when_s, return_inverse=True)
    if times.size == when_s.size:
        return when_s, dv_m_s
    total = np.zeros((dv_m_s.shape[0], times.size, 3))
    for k, row in enumerate(place):
        total[:, row] += dv_m_s[:, k]
    return times, total


@dataclass(frozen=True, slots=True, eq=False)
class Legs:
    """The flight between the times at which all nodes are kicked or kept.

    Attributes
    ----------
    begin_s, span_s : start and signed length of each leg
    kick, keep : (s,) row of the impulses before, and of the kept states after each leg, -1 for none
    kept : number of rows kept
    dv_m_s : (n, k, 3) impulses, those of one time added up
    output : per asked time the row kept, -1 for the start, and the impulse of that time, -1 for none
    """

    begin_s: list[float]
    span_s: list[float]
    kick: NDArray[np.int64]
    keep: NDArray[np.int64]
    kept: int
    dv_m_s: NDArray[np.float64]
    output: list[tuple[int, int]]

    def put(
        self,
        out: NDArray[np.float64],
        part: slice,
        states: NDArray[np.float64],
        got: NDArray[np.float64],
    ) -> None:
        """Write the asked states of one block from what was kept (w, kept, 6), after the impulses of the time."""
        for m, (row, impulse) in enumerate(self.output):
            out[part, m] = states if row < 0 else got[:, row]
            if impulse >= 0:
                out[part, m, 3:] += self.dv_m_s[part, impulse]


def legs_of(asked: Asked) -> Legs:
    """Cut a flight with shared impulses into legs."""
    sign = 1.0 if asked.output_s[-1] >= asked.start_s else -1.0
    kicks, dv = _merged(asked.impulse_s[0], asked.dv_m_s)
    events = np.unique(np.concatenate([[asked.start_s], kicks, asked.output_s]) * sign) * sign
    kick_at = {float(t): k for k, t in enumerate(kicks)}
    rows = np.unique(asked.output_s * sign) * sign
    keep_at = {float(t): k for k, t in enumerate(rows[rows != asked.start_s])}
    return Legs(
        events[:-1].tolist(),
        np.diff(events).tolist(),
        np.array([kick_at.get(float(t), -1) for t in events[:-1]], dtype=np.int64),
        np.array([keep_at.get(float(t), -1) for t in events[1:]], dtype=np.int64),
        len(keep_at),
        dv,
        [(keep_at.get(float(t), -1), kick_at.get(float(t), -1)) for t in asked.output_s],
    )


def own_arcs(asked: Asked, part: slice) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.int64]]:
    """Cut each node's flight at its impulses and at the asked times: lengths, kicks, kept rows, each (w, s)."""
    when = asked.impulse_s[part] if len(asked.impulse_s) > 1 else asked.impulse_s
    width, k = len(asked.states[part]), when.shape[1]
    sign = 1.0 if asked.output_s[-1] >= asked.start_s else -1.0
    events = np.concatenate(
        [
            np.full((width, 1), asked.start_s),
            np.broadcast_to(when, (width, k)),
            np.broadcast_to(asked.output_s, (width, asked.output_s.size)),
        ],
        axis=1,
    )
    # a stable order puts an output that falls on an impulse behind it
    order = np.argsort(sign * events, axis=1, kind="stable")
    sorted_s = np.take_along_axis(events, order, axis=1)
    size = np.diff(sorted_s, axis=1, append=sorted_s[:, -1:])
    kick = np.where((order >= 1) & (order <= k), order - 1, -1)
    keep = np.full_like(order, -1)
    keep[:, :-1] = np.where(order[:, 1:] > k, order[:, 1:] - k - 1, -1)
    return size, kick, keep
