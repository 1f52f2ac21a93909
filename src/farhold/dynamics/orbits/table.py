"""A trajectory kept as Taylor segments in extended precision: states, transition matrices, pressure responses."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_matrix, csc_matrix, hstack, identity, vstack
from scipy.sparse.linalg import SuperLU, splu

from farhold.dynamics.orbits.taylor import ORDER, Exact, Problem, flow_series, motion_series
from farhold.errors import ConvergenceError, Fault

__all__ = ["Table", "segments_for", "settle"]

_LONGEST = 2.0
_MOTION_TAIL = 1e-24
_FLOW_TAIL = 1e-20
_ENOUGH = 1e-13
_ROUNDS = 40
_LOST = 1e3
_SERVES = 1e-3
_REGULAR = 1e-14
# K of the form W = [[K, -1], [1, 0]] that the motion in rotating axes keeps, M^T W M = W
_TURN = np.array([[0.0, 2.0, 0.0], [-2.0, 0.0, 0.0], [0.0, 0.0, 0.0]])


@dataclass(frozen=True, slots=True, eq=False)
class Table:
    """A trajectory cut into m segments of equal length, nondimensional, about the geometric libration point.

    Attributes
    ----------
    problem : the problem it solves
    step : length of a segment;  closed : whether the last segment ends where the first begins
    motion (m, k, 6), flow (m, k, 6, 7) : Taylor coefficients from each segment's start
    maps : (m, 7, 7) what a deviation and a unit of beta become over each whole segment
    gap : largest difference between the end of a segment and the start of the next;  rounds : iterations
    """

    problem: Problem
    step: np.longdouble
    closed: bool
    motion: Exact
    flow: Exact
    maps: Exact
    gap: float
    rounds: int

    @property
    def length(self) -> np.longdouble:
        """Period of a closed trajectory, span of an open one."""
        return self.step * len(self.motion)

    def states(self, times: Exact) -> Exact:
        """States (q, 6) at `times` (q,)."""
        index, powers = self._locate(times)
        out: Exact = np.einsum("qn,qnc->qc", powers, self.motion[index % len(self.motion)])
        return out

    def flows(self, start: np.longdouble, times: Exact) -> Exact:
        """Matrices (q, 7, 7) from `start` to each of `times`: transition, response to beta, and 1 below."""
        index, powers = self._locate(np.concatenate([[start], times]))
        part = np.zeros((len(index), 7, 7), dtype=np.longdouble)
        part[:, :6] = np.einsum("qn,qnij->qij", powers, self.flow[index % len(self.flow)])
        part[:, 6, 6] = 1
        first = _inverse(part[0])
        out = np.empty_like(part[1:])
        chains: dict[int, Exact] = {int(index[0]): np.eye(7, dtype=np.longdouble)}
        for row, k in enumerate(index[1:].tolist()):
            if k not in chains:
                chains[k] = self._chain(int(index[0]), k)
            out[row] = part[row + 1] @ chains[k] @ first
        return out

    def monodromy(self) -> Exact:
        """Transition matrix (6, 6) over the whole table."""
        return self._product(0, len(self.maps))[:6, :6]

    def _locate(self, times: Exact) -> tuple[NDArray[np.int64], Exact]:
        """Segment of each time, counted on beyond a period, and powers of the time since its start."""
        index = np.floor(times / self.step).astype(np.int64)
        if not self.closed:
            index = np.clip(index, 0, len(self.motion) - 1)
        since = times - index * self.step
        return index, since[:, None] ** np.arange(ORDER + 1)

    def _chain(self, first: int, last: int) -> Exact:
        """Map from the start of segment `first` to that of segment `last`, either way."""
        low, high = min(first, last), max(first, last)
        turns = (high - low) // len(self.maps)
        total = self._product(low, high - turns * len(self.maps))
        if turns:
            once = self._product(high, high + len(self.maps))
            for _ in range(turns):
                total = once @ total
        return total if last >= first else _inverse(total)

    def _product(self, low: int, high: int) -> Exact:
        """Product of the maps of segments low, ..., high - 1."""
        total = np.eye(7, dtype=np.longdouble)
        for k in range(low, high):
            total = self.maps[k % len(self.maps)] @ total
        return total


def _inverse(matrix: Exact) -> Exact:
    """Inverse of a (7, 7) map by the symplectic form, which loses nothing."""
    m = matrix[:6, :6]
    k = _TURN.astype(np.longdouble)
    out = np.zeros((7, 7), dtype=np.longdouble)
    # W^-1 M^T W in blocks
    a, b, c, d = m[:3, :3].T, m[3:, :3].T, m[:3, 3:].T, m[3:, 3:].T
    out[:3, :3] = c @ k + d
    out[:3, 3:6] = -c
    out[3:6, :3] = -(a @ k + b) + k @ (c @ k + d)
    out[3:6, 3:6] = a - k @ c
    out[:6, 6] = -out[:6, :6] @ matrix[:6, 6]
    out[6, 6] = 1
    return out


def segments_for(problem: Problem, samples: NDArray[np.float64], span: float) -> int:
    """Number of segments over `span` for which the series about the `samples` (q, 6) have converged."""
    motion = motion_series(problem, samples.astype(np.longdouble))
    flow = flow_series(problem, motion)
    step = _LONGEST
    for series, tail in ((motion, _MOTION_TAIL), (flow, _FLOW_TAIL)):
        for n in (ORDER - 1, ORDER):
            size = float(np.abs(series[:, n]).max())
            step = min(step, (tail / max(size, 1e-300)) ** (1.0 / n))
    return max(2, int(np.ceil(span / step)))


def settle(
    problem: Problem,
    nodes: Exact,
    step: float,
    *,
    closed: bool,
    step_free: bool = False,
    held: tuple[int, ...] = (),
) -> Table:
    """Make a table of the trajectory nearest to the given segment starts, by multiple shooting.

    Newton in extended precision with the least change of nodes at each round, so that the trajectory need be
    known no better than roughly: errors do not grow along it. The derivatives are kept while they serve.

    Parameters
    ----------
    nodes : (m, 6) starts of the segments;  step : their length
    closed : the last segment is to end at the first node;  step_free : the period may change
    held : components of the first node that stay as they are

    Raises
    ------
    ConvergenceError
        The gaps between segments stay open.
    """
    x, h = nodes.astype(np.longdouble), np.longdouble(step)
    best, last, kept, worse, rounds = np.inf, np.inf, (x, h), 0, 0
    solve: SuperLU | None = None
    while rounds < _ROUNDS:
        rounds += 1
        motion = motion_series(problem, x)
        powers = h ** np.arange(ORDER + 1)
        miss = np.einsum("n,bnc->bc", powers, motion) - np.roll(x, -1, axis=0)
        if not closed:
            miss = miss[:-1]
        gap = float(np.abs(miss).max())
        if gap < best:
            best, kept, worse = gap, (x, h), 0
        else:
            worse += 1
        if not np.isfinite(gap) or gap > _LOST or worse > (0 if best < _ENOUGH else 6) or best == 0.0:
            break
        if solve is None or (gap > _SERVES * last and gap > _ENOUGH):
            pace = np.einsum("n,bnc->bc", powers[:-1] * np.arange(1, ORDER + 1), motion[:, 1:]).astype(float)
            flow = flow_series(problem, motion.astype(float))
            maps = np.einsum("n,bnij->bij", powers.astype(float), flow[..., :6])
            solve = _least_change(maps, pace if step_free else None, closed, held)
        last = gap
        right = np.zeros(solve.shape[0])
        right[-miss.size - len(held) :][: miss.size] = -miss.astype(float).ravel()
        change = solve.solve(right)
        x = x + change[: x.size].reshape(x.shape)
        h = h + (change[x.size] if step_free else 0.0)
    if not best < _ENOUGH:
        raise ConvergenceError(
            Fault(
                "reference",
                f"no trajectory of this size was found: segments stay {best:.1e} apart",
                hint="ask for a smaller one or a shorter span",
            )
        )
    x, h = kept
    motion = motion_series(problem, x)
    flow = flow_series(problem, motion)
    maps7 = np.zeros((len(x), 7, 7), dtype=np.longdouble)
    maps7[:, :6] = np.einsum("n,bnij->bij", h ** np.arange(ORDER + 1), flow)
    maps7[:, 6, 6] = 1
    return Table(problem, h, closed, motion, flow, maps7, best, rounds)


def _least_change(
    maps: NDArray[np.float64], pace: NDArray[np.float64] | None, closed: bool, held: tuple[int, ...]
) -> SuperLU:
    """Factor the system for the smallest change of nodes that closes the gaps to first order.

    Unknowns: nodes, the step where `pace` is given, then a multiplier for each gap and each of `held`. The
    small diagonal keeps the system regular: on a closed path the Jacobi constant makes one gap redundant.
    """
    m = len(maps)
    count = m if closed else m - 1
    rows, width = 6 * count, 6 * m
    block = 6 * np.arange(count)[:, None, None]
    r, c = np.arange(6)[None, :, None], np.arange(6)[None, None, :]
    i = [(block + r + 0 * c).ravel(), np.arange(rows)]
    j = [(block + 0 * r + c).ravel(), (np.arange(rows) + 6) % width]
    v = [maps[:count].ravel(), -np.ones(rows)]
    if pace is not None:
        i, j, v = [*i, np.arange(rows)], [*j, np.full(rows, width)], [*v, pace[:count].ravel()]
        width += 1
    i, j, v = [*i, rows + np.arange(len(held))], [*j, np.array(held, dtype=int)], [*v, np.ones(len(held))]
    rows += len(held)
    jacobian = coo_matrix((np.concatenate(v), (np.concatenate(i), np.concatenate(j))), shape=(rows, width))
    top = hstack([identity(width), jacobian.T])
    below = hstack([jacobian, -_REGULAR * identity(rows)])
    return splu(csc_matrix(vstack([top, below])))
