"""Differential correction of periodic orbits, and continuation along their families.

Symmetric orbits cross the plane of R and N squarely twice (Howell 1984, Celestial Mechanics 32, 53); families
are followed by pseudo-arclength (Keller 1977, from memory). States are barycentric synodic here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.dynamics.absolute import propagate
from farhold.errors import ConvergenceError, Fault

__all__ = ["Family", "OutOfFamilyError", "correct", "planar_rows", "spatial_rows"]

Rows = Callable[[NDArray[np.float64]], tuple[NDArray[np.float64], NDArray[np.float64]]]

_CONVERGED = 2e-14
_GOOD = 1e-11
_ROUNDS = 15
_STEPS = 150
_LEAST_STEP = 2e-3


@dataclass(frozen=True, slots=True)
class Family:
    """A family of orbits: `rows` of unknowns that vanish on it, one fewer than unknowns.

    Attributes
    ----------
    rows : gives residuals (c,) and their derivatives (c, c + 1)
    scale : (c + 1,) sizes of the unknowns
    """

    rows: Rows
    scale: NDArray[np.float64]

    def member(self, guess: ArrayLike, fixed: int | None = None) -> NDArray[np.float64]:
        """Correct `guess` (c + 1,), holding one unknown where asked, else by the least change."""
        row = None if fixed is None else np.eye(len(self.scale))[fixed]
        return correct(self.rows, np.array(guess, dtype=float), self.scale, row)

    def reach(self, start: NDArray[np.float64], grows: int, gauge: int, target: float) -> NDArray[np.float64]:
        """Follow the family from `start`, first along growing unknown `grows`, until unknown `gauge` is `target`.

        Raises
        ------
        ConvergenceError
            The family turns back or ends before; the message gives the values met.
        """
        u = start
        way = self._tangent(u)
        way *= np.sign(way[grows]) or 1.0
        ds, met = 0.1, [u[gauge]]
        for _ in range(_STEPS):
            try:
                ahead = correct(self.rows, u + ds * way * self.scale, self.scale, way / self.scale)
                onward = self._tangent(ahead)
                if abs(onward @ way) < 0.7 or np.linalg.norm((ahead - u) / self.scale) > 1.5 * ds:
                    raise ConvergenceError(Fault("reference", "the correction left the family"))
            except ConvergenceError:
                ds *= 0.5
                if ds < _LEAST_STEP:
                    break
                continue
            if (ahead[gauge] - target) * (u[gauge] - target) <= 0.0:
                share = (target - u[gauge]) / (ahead[gauge] - u[gauge])
                guess = u + share * (ahead - u)
                guess[gauge] = target
                return self.member(guess, gauge)
            onward *= np.sign(onward @ way) or 1.0
            ds = min(1.5 * ds, 0.4) if onward @ way > 0.95 else max(0.5 * ds, _LEAST_STEP)
            u, way = ahead, onward
            met.append(u[gauge])
            if gauge == grows and met[-1] < met[-2]:
                break
        raise OutOfFamilyError(min(met), max(met))

    def _tangent(self, u: NDArray[np.float64]) -> NDArray[np.float64]:
        """Direction (c + 1,) of the family at `u`, in units of the scale, of length 1."""
        _, jacobian = self.rows(u)
        way: NDArray[np.float64] = np.linalg.svd(jacobian * self.scale)[2][-1]
        return way


class OutOfFamilyError(ConvergenceError):
    """The family does not hold what was asked; `least` and `most` are the ends of what it was seen to hold."""

    def __init__(self, least: float, most: float) -> None:
        self.least, self.most = least, most
        super().__init__(Fault("reference", f"the family was met from {least:.6g} to {most:.6g} only"))


def correct(
    rows: Rows, guess: NDArray[np.float64], scale: NDArray[np.float64], held: NDArray[np.float64] | None = None
) -> NDArray[np.float64]:
    """Newton by least change, until the residuals are at rounding; along `held` (unknowns,) nothing moves.

    Raises
    ------
    ConvergenceError
        The residuals stay above 1e-11.
    """
    u, best, kept, worse = guess.copy(), np.inf, guess, 0
    for _ in range(_ROUNDS):
        residual, jacobian = rows(u)
        size = float(np.abs(residual).max())
        if size < best:
            best, kept, worse = size, u.copy(), 0
        else:
            worse += 1
        if best < _CONVERGED or worse > (1 if best < _GOOD else 4) or not np.isfinite(size):
            break
        matrix, right = jacobian * scale, -residual
        if held is not None:
            along = held * scale
            matrix = np.vstack([matrix, along / np.linalg.norm(along)])
            right = np.append(right, 0.0)
        u = u + scale * np.linalg.lstsq(matrix, right, rcond=1e-13)[0]
    if not best < _GOOD:
        raise ConvergenceError(Fault("reference", f"the correction stays at {best:.1e}"))
    return kept


def _flown(start: list[float], times: list[float], mu: float, beta: float) -> tuple[Any, Any, Any]:
    """States, transition matrices and rates of change at `times`, which begin at 0."""
    if not (np.diff(times) > 0.0).all():
        raise ConvergenceError(Fault("reference", f"the correction asks for times {times}"))
    path = propagate(start, times, mu, beta, with_transition=True)
    assert path.transition is not None
    return path.state, path.transition, np.array([_rate(s, mu, beta) for s in path.state])


def _rate(state: NDArray[np.float64], mu: float, beta: float) -> NDArray[np.float64]:
    """Rate of change (6,) of a synodic state."""
    x, y, z, vx, vy, vz = state
    p1 = (1.0 - mu) * (1.0 - beta) / np.sqrt((x + mu) ** 2 + y * y + z * z) ** 3
    p2 = mu / np.sqrt((x + mu - 1.0) ** 2 + y * y + z * z) ** 3
    ax = 2.0 * vy + x - p1 * (x + mu) - p2 * (x + mu - 1.0)
    return np.array([vx, vy, vz, ax, -2.0 * vx + y - (p1 + p2) * y, -(p1 + p2) * z])


def _keep_off(state: NDArray[np.float64], mu: float) -> None:
    """Refuse orbits that cross the plane within a hundredth of the Hill radius of the secondary."""
    if np.hypot(state[0] - 1.0 + mu, state[2]) < 0.01 * (mu / 3.0) ** (1.0 / 3.0):
        raise ConvergenceError(Fault("reference", "the orbit meets the smaller primary"))


def spatial_rows(mu: float, beta: float = 0.0) -> Rows:
    """Rows of symmetric orbits in space; unknowns x, z, vy at a square crossing and half the period."""

    def rows(u: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        state, phi, pace = _flown([u[0], 0.0, u[1], 0.0, u[2], 0.0], [0.0, u[3]], mu, beta)
        ends = [1, 3, 5]
        _keep_off(state[-1], mu)
        return state[-1, ends], np.column_stack([phi[-1][np.ix_(ends, [0, 2, 4])], pace[-1, ends]])

    return rows


def planar_rows(mu: float, beta: float = 0.0) -> Rows:
    """Rows of symmetric orbits in the plane.

    Unknowns are x and vy at a square crossing, half the period, and time and size of the turning point in y.
    """

    def rows(u: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        x, vy, half, turn, height = u
        state, phi, pace = _flown([x, 0.0, 0.0, 0.0, vy, 0.0], [0.0, turn, half], mu, beta)
        _keep_off(state[2], mu)
        jacobian = np.zeros((4, 5))
        jacobian[:2, :2] = phi[2][np.ix_([1, 3], [0, 4])]
        jacobian[:2, 2] = pace[2, [1, 3]]
        jacobian[2:, :2] = phi[1][np.ix_([4, 1], [0, 4])]
        jacobian[2:, 3] = pace[1, [4, 1]]
        sign = 1.0 if state[1, 1] >= 0.0 else -1.0
        jacobian[3] *= sign
        jacobian[3, 4] = -1.0
        return np.array([state[2, 1], state[2, 3], state[1, 4], abs(state[1, 1]) - height]), jacobian

    return rows
