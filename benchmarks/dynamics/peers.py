"""General integrators flying the same nodes: absolute states, and deviations, in the rotating frame.

All take and return nondimensional states (n, 6) and fly from time 0 to `end`.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numba import njit
from scipy.integrate import solve_ivp

from farhold.kernels.motion.coefficients import E3, E5, A, B, C

STAGES = C.size


def rates(_: float, y: np.ndarray, mu: float) -> np.ndarray:
    """Time derivative of n states laid out (6 n,), component by component."""
    x, yy, z, u, v, w = s = y.reshape(6, -1)
    a, b = x + mu, x + (mu - 1.0)
    t = yy * yy + z * z
    p = (1.0 - mu) / (a * a + t) ** 1.5
    q = mu / (b * b + t) ** 1.5
    out = np.empty_like(s)
    out[0], out[1], out[2] = u, v, w
    out[3] = 2.0 * v + x - p * a - q * b
    out[4] = -2.0 * u + yy - (p + q) * yy
    out[5] = -(p + q) * z
    return out.ravel()


def scipy_each(states: np.ndarray, end: float, mu: float, tolerance: float) -> np.ndarray:
    """SciPy's DOP853, one call per node."""
    return np.array([scipy_vector(state[None], end, mu, tolerance, single)[0] for state in states])


def scipy_each_array(states: np.ndarray, end: float, mu: float, tolerance: float) -> np.ndarray:
    """As `scipy_each`, with the rates of one state computed on arrays, as they are mostly written."""
    return np.array([scipy_vector(state[None], end, mu, tolerance)[0] for state in states])


def single(_: float, y: np.ndarray, mu: float) -> list[float]:
    """As `rates`, of one state in plain floats, which is quicker than arrays of one."""
    x, yy, z, u, v, w = y.tolist()
    a, b = x + mu, x + (mu - 1.0)
    t = yy * yy + z * z
    p = (1.0 - mu) / (a * a + t) ** 1.5
    q = mu / (b * b + t) ** 1.5
    return [u, v, w, 2.0 * v + x - p * a - q * b, -2.0 * u + yy - (p + q) * yy, -(p + q) * z]


def scipy_vector(
    states: np.ndarray, end: float, mu: float, tolerance: float, of: Callable[..., Any] = rates
) -> np.ndarray:
    """SciPy's DOP853 on all nodes as one vector."""
    flown = solve_ivp(
        of, (0.0, end), states.T.ravel(), method="DOP853", rtol=tolerance, atol=tolerance, args=(mu,), t_eval=[end]
    )
    return flown.y[:, -1].reshape(6, -1).T


@njit(error_model="numpy", fastmath={"contract", "nsz", "arcp"})
def _rate(y, mu, out):
    a, b = y[0] + mu, y[0] + (mu - 1.0)
    t = y[1] * y[1] + y[2] * y[2]
    r = a * a + t
    p = (1.0 - mu) / (r * np.sqrt(r))
    r = b * b + t
    q = mu / (r * np.sqrt(r))
    out[0], out[1], out[2] = y[3], y[4], y[5]
    out[3] = 2.0 * y[4] + y[0] - p * a - q * b
    out[4] = -2.0 * y[3] + y[1] - (p + q) * y[1]
    out[5] = -(p + q) * y[2]


@njit(error_model="numpy", fastmath={"contract", "nsz", "arcp"})
def numba_each(states, end, mu, tolerance):
    """Plain DOP853 with adaptive steps, compiled, one node after the other."""
    result = np.empty_like(states)
    K = np.empty((STAGES, 6))
    new = np.empty(6)
    for node in range(len(states)):
        y = states[node].copy()
        _rate(y, mu, K[0])
        now, h = 0.0, 0.05
        while now < end:
            h = min(h, end - now)
            for s in range(1, STAGES):
                for i in range(6):
                    total = 0.0
                    for j in range(s):
                        total += A[s, j] * K[j, i]
                    new[i] = y[i] + h * total
                _rate(new, mu, K[s])
            e3 = e5 = 0.0
            for i in range(6):
                total = a = b = 0.0
                for j in range(STAGES):
                    total += B[j] * K[j, i]
                    a += E3[j] * K[j, i]
                    b += E5[j] * K[j, i]
                new[i] = y[i] + h * total
                scale = tolerance * (1.0 + max(abs(y[i]), abs(new[i])))
                e3 += (a / scale) ** 2
                e5 += (b / scale) ** 2
            error = h * e5 / np.sqrt(max((e5 + 0.01 * e3) * 6.0, 1e-300))
            if error <= 1.0:
                now += h
                y[:] = new
                _rate(y, mu, K[0])
            h *= min(6.0, max(0.2, 0.9 * max(error, 1e-10) ** -0.125))
        result[node] = y
    return result


def _pull(mass: Any, away: list[Any]) -> list[Any]:
    """Attraction at `away` from a body, as expressions."""
    r2 = away[0] * away[0] + away[1] * away[1] + away[2] * away[2]
    k = mass * r2**-1.5
    return [-k * x for x in away]


def _rest(hy: Any, mass: Any, rho: list[Any], d: list[Any]) -> list[Any]:
    """Difference of attraction between rho + d and rho, without cancellation (Battin 1999, section 8.4)."""
    rho2 = rho[0] * rho[0] + rho[1] * rho[1] + rho[2] * rho[2]
    q = sum(a * (a + 2.0 * b) for a, b in zip(d, rho, strict=True)) / rho2
    w = (1.0 + q) * hy.sqrt(1.0 + q)
    f = q * (3.0 + q * (3.0 + q)) / (w + w * w)
    k = mass * rho2**-1.5
    return [-k * (a * (1.0 - f) - b * f) for a, b in zip(d, rho, strict=True)]


def _turning(x: list[Any], force: list[Any]) -> list[Any]:
    """Rates of (x, y, z, u, v, w) under `force` in rotating axes."""
    return [x[3], x[4], x[5], 2.0 * x[4] + x[0] + force[0], -2.0 * x[3] + x[1] + force[1], force[2]]


def heyoka_absolute(
    mu: float, width: int, tolerance: float | None = None
) -> Callable[[np.ndarray, float], np.ndarray]:
    """Batch Taylor integrator on absolute states, `width` nodes abreast, called block by block."""
    import heyoka as hy

    x = hy.make_vars("x", "y", "z", "u", "v", "w")
    sun = _pull(1.0 - mu, [x[0] + mu, x[1], x[2]])
    earth = _pull(mu, [x[0] + (mu - 1.0), x[1], x[2]])
    system = list(zip(x, _turning(x, [a + b for a, b in zip(sun, earth, strict=True)]), strict=True))
    fly = _batch(hy, system, width, tolerance)
    return lambda states, end: fly(states, end)[:, :6]


def heyoka_deviation(
    mu: float, own: np.ndarray, still: bool, width: int, tolerance: float | None = None
) -> Callable[[np.ndarray, float], np.ndarray]:
    """Batch Taylor integrator on deviations; the reference `own` (6,) stands still or is flown along."""
    import heyoka as hy

    d = hy.make_vars("dx", "dy", "dz", "du", "dv", "dw")
    r = [hy.expression(float(v)) for v in own] if still else hy.make_vars("x", "y", "z", "u", "v", "w")
    sun, earth = [r[0] + mu, r[1], r[2]], [r[0] + (mu - 1.0), r[1], r[2]]
    force = [a + b for a, b in zip(_rest(hy, 1.0 - mu, sun, d[:3]), _rest(hy, mu, earth, d[:3]), strict=True)]
    system = list(zip(d, _turning(d, force), strict=True))
    if not still:
        pull = [a + b for a, b in zip(_pull(1.0 - mu, sun), _pull(mu, earth), strict=True)]
        system += list(zip(r, _turning(r, pull), strict=True))
    fly = _batch(hy, system, width, tolerance)

    def flown(states: np.ndarray, end: float) -> np.ndarray:
        full = states if still else np.concatenate([states, np.tile(own, (len(states), 1))], axis=1)
        return fly(full, end)[:, :6]

    return flown


def _batch(
    hy: Any, system: list[Any], width: int, tolerance: float | None
) -> Callable[[np.ndarray, float], np.ndarray]:
    """Make the integrator once; return what flies all nodes through it."""
    options = {"fast_math": True} if tolerance is None else {"fast_math": True, "tol": tolerance}
    ta = hy.taylor_adaptive_batch(system, np.zeros((len(system), width)), **options)

    def flown(states: np.ndarray, end: float) -> np.ndarray:
        out = np.empty_like(states)
        ends = np.full(width, end)
        for first in range(0, len(states), width):
            part = states[first : first + width]
            ta.set_time(0.0)
            ta.state[:, : len(part)] = part.T
            ta.propagate_until(ends)
            out[first : first + width] = ta.state[:, : len(part)].T
        return out

    return flown
