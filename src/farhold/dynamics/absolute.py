"""Absolute trajectories in the circular model, by the adaptive integrator; their transition matrices."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.errors import ConvergenceError, DomainError, Fault
from farhold.kernels.motion.integrate import dop853
from farhold.kernels.status import OK, meaning

__all__ = ["Trajectory", "jacobi_constant", "propagate", "two_point"]


@dataclass(frozen=True, slots=True, eq=False)
class Trajectory:
    """States (k, 6) at the asked times, nondimensional; transition matrices (k, 6, 6) or None; steps."""

    state: NDArray[np.float64]
    transition: NDArray[np.float64] | None
    steps: int


def propagate(
    state: ArrayLike,
    times: ArrayLike,
    mu: float,
    beta: float = 0.0,
    *,
    with_transition: bool = False,
    tolerance: float = 1e-14,
) -> Trajectory:
    """Integrate an absolute state in the barycentric rotating frame (DOP853, Hairer et al. 1993).

    Parameters
    ----------
    state : (6,) nondimensional position and velocity at times[0]
    times : (k,) monotonic nondimensional times, k >= 2, forwards or backwards
    mu, beta : mass ratio; radiation pressure over gravity of the primary
    with_transition : also integrate the 36 variational equations
    tolerance : relative and absolute error allowed per step

    Raises
    ------
    DomainError
        Wrong shapes, times not monotonic, values not finite.
    ConvergenceError
        The path meets a primary or the step size vanishes.
    """
    y0 = np.ascontiguousarray(state, dtype=float)
    t = np.ascontiguousarray(times, dtype=float)
    if y0.shape != (6,) or not np.isfinite(y0).all():
        raise DomainError(Fault("state", f"got {y0!r}", "six finite numbers"))
    gaps = np.diff(t)
    if t.ndim != 1 or t.size < 2 or not ((gaps >= 0).all() or (gaps <= 0).all()):
        raise DomainError(Fault("times", f"got {t!r}", "two or more monotonic times"))
    full = np.concatenate([y0, np.eye(6).ravel()]) if with_transition else y0
    out = np.full((t.size, full.size), np.nan)
    status, steps = dop853(full, t, float(mu), float(beta), tolerance, tolerance, out)
    if status != OK:
        raise ConvergenceError(Fault("absolute trajectory", f"{meaning(status)} after {steps} steps"))
    transition = out[:, 6:].reshape(-1, 6, 6) if with_transition else None
    return Trajectory(out[:, :6], transition, int(steps))


def jacobi_constant(state: ArrayLike, mu: float, beta: float = 0.0) -> NDArray[np.float64]:
    """Jacobi constant x2 + y2 + 2 (1-mu)(1-beta)/r1 + 2 mu/r2 - v2, without the mu (1-mu) term.

    `state` is (..., 6), nondimensional; the result is (...). Source: Szebehely 1967, section 1.5.
    """
    s = np.asarray(state, dtype=float)
    x, y, z = s[..., 0], s[..., 1], s[..., 2]
    r1 = np.sqrt((x + mu) ** 2 + y**2 + z**2)
    r2 = np.sqrt((x - 1.0 + mu) ** 2 + y**2 + z**2)
    constant: NDArray[np.float64] = (
        x**2 + y**2 + 2.0 * (1.0 - mu) * (1.0 - beta) / r1 + 2.0 * mu / r2 - (s[..., 3:] ** 2).sum(axis=-1)
    )
    return constant


def two_point(
    start: ArrayLike,
    end: ArrayLike,
    duration: float,
    velocity_guess: ArrayLike,
    mu: float,
    beta: float = 0.0,
    *,
    tolerance: float = 1e-13,
    iterations: int = 30,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Velocities that join two absolute positions in a given time, by Newton with the transition matrix.

    Parameters
    ----------
    start, end : (3,) nondimensional positions in the barycentric rotating frame
    duration : nondimensional time between them
    velocity_guess : (3,) starting velocity of the iteration, in the rotating frame
    tolerance : allowed miss, nondimensional, times the size of `end`

    Returns
    -------
    (3,), (3,) velocities at the start and at the end, rotating frame. For mu = 0 this is Lambert's problem.

    Raises
    ------
    ConvergenceError
        The miss stays above the tolerance.
    """
    r0, r1 = np.asarray(start, dtype=float), np.asarray(end, dtype=float)
    v = np.array(velocity_guess, dtype=float)
    allowed = tolerance * max(1.0, float(np.linalg.norm(r1)))
    best, worse = np.inf, 0
    for _ in range(iterations):
        flown = propagate(np.concatenate([r0, v]), [0.0, duration], mu, beta, with_transition=True)
        assert flown.transition is not None
        miss = flown.state[-1, :3] - r1
        size = float(np.linalg.norm(miss))
        if size <= allowed:
            return v, flown.state[-1, 3:].copy()
        worse = worse + 1 if size >= best else 0
        best = min(best, size)
        if worse > 6:
            break
        v = v - np.linalg.solve(flown.transition[-1, :3, 3:], miss)
    raise ConvergenceError(
        Fault("two-point problem", f"the miss stays at {best:.3g} of {allowed:.3g} allowed", hint="start nearer")
    )
