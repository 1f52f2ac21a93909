"""The full lane for many nodes: nonlinear motion about a reference, impulses, output at asked times."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.dynamics.lanes import LANES, Arcs, fly_arcs, step_s
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.pool import run_blocks

__all__ = ["Flight", "fly"]


@dataclass(frozen=True, slots=True, eq=False)
class Flight:
    """States (n, m, 6) at the m asked times, NaN where a node failed; status (n,), see kernels.status."""

    state: NDArray[np.float64]
    status: NDArray[np.int64]
    step_s: float


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
    longest_step_s: float | None = None,
) -> Flight:
    """Fly nodes by the full lane (fixed steps of order 8 in deviation form, design section 3).

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
    longest_step_s : the step to use, where a caller flies parts of one swarm; None to choose it by accuracy

    Raises
    ------
    DomainError
        Wrong shapes, values not finite, times out of order or outside the flight.
    """
    y = np.asarray(states, dtype=float)
    if y.ndim != 2 or y.shape[1] != 6:
        raise DomainError(Fault("states", f"shape {y.shape}", "shape (n, 6)"))
    _finite("states", y)
    n = y.shape[0]
    times = np.atleast_1d(np.asarray(output_s, dtype=float))
    _finite("output times", times)
    if times.ndim != 1 or times.size == 0:
        raise DomainError(Fault("output times", f"shape {times.shape}", "one or more times"))
    spans = times - start_s
    forward = bool(spans[-1] >= 0.0)
    ordered = np.diff(spans, prepend=0.0)
    if not (np.all(ordered >= 0.0) if forward else np.all(ordered <= 0.0)):
        raise DomainError(Fault("output times", "they go back and forth", "times in order, away from the start"))
    beta = np.zeros(n) if excess_beta is None else np.broadcast_to(np.asarray(excess_beta, dtype=float), (n,))
    _finite("pressure", beta)
    when, dv = _impulses(n, impulse_s, dv_m_s, start_s, float(times[-1]))
    longest = longest_step_s
    if longest is None:
        reach = float(np.linalg.norm(y[:, :3], axis=1).max(initial=0.0))
        kicks = float(np.linalg.norm(dv, axis=2).sum(axis=1).max(initial=0.0))
        pace = float(np.linalg.norm(y[:, 3:], axis=1).max(initial=0.0)) + kicks
        longest = step_s(reference, reach + pace / reference.rate_rad_s, float(spans[-1]), accuracy)
    arcs = _arcs(start_s, times, when, longest, forward)
    out = np.empty((n, times.size, 6))
    status = np.zeros(n, dtype=np.int64)

    def block(first: int) -> None:
        last = min(first + LANES, n)
        kept, status[first:last] = fly_arcs(
            reference,
            y[first:last].T.copy(),
            np.ascontiguousarray(beta[first:last]),
            arcs.of(first, last),
            np.ascontiguousarray(dv[first:last].transpose(1, 2, 0)),
            times.size,
        )
        out[first:last] = kept.transpose(2, 0, 1)

    run_blocks(block, range(0, n, LANES))
    return Flight(out, status, longest)


def _finite(name: str, values: NDArray[np.float64]) -> None:
    """Refuse values that are not finite, naming the first."""
    bad = ~np.isfinite(values)
    if bad.any():
        place = tuple(int(k) for k in np.argwhere(bad)[0])
        raise DomainError(Fault(name, f"{float(values[place])!r} at {place}", "finite numbers"))


def _impulses(
    n: int, impulse_s: ArrayLike | None, dv_m_s: ArrayLike | None, start_s: float, end_s: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Check impulses; return their times (1 or n, k) and dv (n, k, 3)."""
    if impulse_s is None or dv_m_s is None:
        if (impulse_s is None) != (dv_m_s is None):
            raise DomainError(Fault("impulses", "times without dv, or dv without times", "both or neither"))
        return np.empty((1, 0)), np.zeros((n, 0, 3))
    when = np.atleast_1d(np.asarray(impulse_s, dtype=float))
    when = when[None, :] if when.ndim == 1 else when
    dv = np.asarray(dv_m_s, dtype=float)
    k = when.shape[1]
    if when.shape[0] not in (1, n) or dv.shape != (n, k, 3):
        raise DomainError(
            Fault("impulses", f"times {when.shape} and dv {dv.shape}", f"(k,) or ({n}, k), and ({n}, k, 3)")
        )
    _finite("impulse times", when)
    _finite("impulses", dv)
    low, high = min(start_s, end_s), max(start_s, end_s)
    if k and not (when.min() >= low and when.max() <= high):
        raise DomainError(
            Fault("impulse times", f"{when.min():.17g} to {when.max():.17g} s", f"{low:.17g} to {high:.17g} s")
        )
    return when, dv


def _arcs(
    start_s: float, times_s: NDArray[np.float64], when_s: NDArray[np.float64], longest_s: float, forward: bool
) -> Arcs:
    """Cut each node's flight at its impulses and at the asked times; equal steps within each arc."""
    rows, k = when_s.shape
    sign = 1.0 if forward else -1.0
    begin = np.full((rows, 1), start_s)
    events = np.concatenate([begin, when_s, np.broadcast_to(times_s, (rows, times_s.size))], axis=1)
    order = np.argsort(sign * events, axis=1, kind="stable")
    sorted_s = np.take_along_axis(events, order, axis=1)
    span = np.diff(sorted_s, axis=1, append=sorted_s[:, -1:])
    steps = np.where(span == 0.0, 0, np.ceil(np.abs(span) / longest_s)).astype(np.int64)
    size = np.divide(span, steps, out=np.zeros_like(span), where=steps > 0)
    kick = np.where((order >= 1) & (order <= k), order - 1, -1)
    keep = np.full_like(order, -1)
    # the state is kept after the arc before an event; an output that falls on impulses comes after them
    # in the stable order, at the end of an arc of no length that began with the kick
    keep[:, :-1] = np.where(order[:, 1:] > k, order[:, 1:] - k - 1, -1)
    return Arcs(steps.T, size.T, kick.T, keep.T)
