"""Taylor series in time of absolute motion about a libration point, in extended precision, many starts at once.

Everything is nondimensional, in R, T, N about the geometric libration point. NumPy's long double carries the
arithmetic: 64 bits of mantissa on x86, 113 on 64-bit Arm Linux, no more than double elsewhere.

Sources: automatic differentiation of powers and products, Jorba and Zou 2005, Experimental Mathematics 14, 99;
the variational equations are those of Szebehely 1967, section 1.9.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.dynamics.circular import libration_point
from farhold.dynamics.frames import axes_angle_rad, turn_about_n

__all__ = ["ORDER", "Exact", "Problem", "flow_series", "motion_series"]

Exact = NDArray[np.longdouble]

ORDER = 30
_CORIOLIS = np.array([[0.0, 2.0, 0.0], [-2.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
_ROOT_3 = np.sqrt(np.longdouble(3.0))


@dataclass(frozen=True, slots=True)
class Problem:
    """The circular problem seen from a libration point, with the pressure that the reference carries.

    `point` is "L1" to "L5", `mu` the mass ratio, `beta` radiation pressure over gravity.
    """

    point: str
    mu: float
    beta: float

    @property
    def offsets(self) -> Exact:
        """Vectors (2, 3) from Sun and from Earth-Moon barycentre to the geometric libration point."""
        place = libration_point(self.point, self.mu).astype(np.longdouble)
        mu = np.longdouble(self.mu)
        east = np.array([1, 0, 0], dtype=np.longdouble)
        return np.stack([self._turn(place + mu * east), self._turn(place + (mu - 1) * east)])

    @property
    def centre(self) -> Exact:
        """Vector (3,) from the barycentre to the geometric libration point."""
        return self._turn(libration_point(self.point, self.mu).astype(np.longdouble))

    @property
    def strengths(self) -> Exact:
        """Pull (2,) of Sun, less pressure, and of Earth and Moon."""
        mu = np.longdouble(self.mu)
        return np.array([(1 - mu) * (1 - np.longdouble(self.beta)), mu])

    def from_synodic(self, state: NDArray[np.float64]) -> NDArray[np.float64]:
        """Turn a barycentric synodic state (6,) into one in R, T, N about the point."""
        turn = turn_about_n(-axes_angle_rad(self.point))
        place = state[:3] - libration_point(self.point, self.mu)
        return np.concatenate([turn @ place, turn @ state[3:]])

    def to_synodic(self, state: NDArray[np.float64]) -> NDArray[np.float64]:
        """Turn a state (6,) in R, T, N about the point into a barycentric synodic one."""
        turn = turn_about_n(axes_angle_rad(self.point))
        return np.concatenate([turn @ state[:3] + libration_point(self.point, self.mu), turn @ state[3:]])

    def _turn(self, vector: Exact) -> Exact:
        """Turn a synodic vector into R, T, N."""
        c, s = {
            "L3": (np.longdouble(-1), np.longdouble(0)),
            "L4": (np.longdouble(0.5), _ROOT_3 / 2),
            "L5": (np.longdouble(0.5), -_ROOT_3 / 2),
        }.get(self.point, (np.longdouble(1), np.longdouble(0)))
        x, y, z = vector
        return np.array([c * x + s * y, c * y - s * x, z])


def motion_series(problem: Problem, states: Exact, order: int = ORDER) -> Exact:
    """Taylor coefficients (b, order + 1, 6) in time of the motions that start from `states` (b, 6)."""
    b = len(states)
    out = np.zeros((b, order + 1, 6), dtype=np.longdouble)
    out[:, 0] = states
    # rho runs over start, primary, axis, order; the powers and products below are Cauchy sums over the order
    rho = np.zeros((b, 2, 3, order + 1), dtype=np.longdouble)
    rho[..., 0] = problem.offsets + states[:, None, :3]
    square = np.zeros((b, 2, order + 1), dtype=np.longdouble)
    pull = np.zeros_like(square)
    strength = -problem.strengths
    centre = problem.centre
    for n in range(order):
        square[..., n] = np.einsum("bicj,bicj->bi", rho[..., : n + 1], rho[..., n::-1])
        _next_power(square, pull, n, -1.5)
        force = np.einsum("i,bij,bicj->bc", strength, pull[..., : n + 1], rho[..., n::-1])
        v = out[:, n, 3:]
        force += v @ _CORIOLIS.T
        force[:, :2] += out[:, n, :2]
        if n == 0:
            force[:, :2] += centre[:2]
        out[:, n + 1, :3] = v / (n + 1)
        out[:, n + 1, 3:] = force / (n + 1)
        rho[..., n + 1] = out[:, n + 1, None, :3]
    return out


def flow_series(problem: Problem, motion: Exact) -> Exact:
    """Taylor coefficients (b, k, 6, 7) of the transition matrix and of the response to a unit of beta.

    `motion` (b, k, 6) is what :func:`motion_series` gave; both begin at its start. The arithmetic is that of
    its type.
    """
    b, count, _ = motion.shape
    exact = motion.dtype
    strengths = problem.strengths.astype(exact)
    rho = np.repeat(np.moveaxis(motion[:, :, :3], 1, 2)[:, None], 2, axis=1)
    rho[..., 0] += problem.offsets.astype(exact)
    square = np.zeros((b, 2, count), dtype=exact)
    pull, slope = np.zeros_like(square), np.zeros_like(square)
    outer = np.zeros((b, 2, 3, 3, count), dtype=exact)
    gradient = np.zeros((b, 3, 3, count), dtype=exact)
    push = np.zeros((b, 3, count), dtype=exact)
    for n in range(count):
        outer[..., n] = np.einsum("bicj,bidj->bicd", rho[..., : n + 1], rho[..., n::-1])
        square[..., n] = np.trace(outer[..., n], axis1=2, axis2=3)
        _next_power(square, pull, n, -1.5)
        _next_power(square, slope, n, -2.5)
        force = np.einsum("i,bij,bicdj->bcd", 3 * strengths, slope[..., : n + 1], outer[..., n::-1])
        gradient[..., n] = force - (pull[..., n] @ strengths)[:, None, None] * np.eye(3)
        push[..., n] = np.einsum("bj,bcj->bc", pull[:, 0, : n + 1], rho[:, 0, :, n::-1])
    gradient[..., 0] += np.diag([1.0, 1.0, 0.0])
    push *= (1 - np.longdouble(problem.mu)).astype(exact)
    out = np.zeros((b, count, 6, 7), dtype=exact)
    out[:, 0, :, :6] = np.eye(6)
    for n in range(count - 1):
        v = out[:, n, 3:]
        force = np.einsum("bcdj,bjde->bce", gradient[..., n::-1], out[:, : n + 1, :3])
        force += np.einsum("cd,bde->bce", _CORIOLIS, v)
        force[..., 6] += push[..., n]
        out[:, n + 1, :3] = v / (n + 1)
        out[:, n + 1, 3:] = force / (n + 1)
    return out


def _next_power(base: Exact, power: Exact | NDArray[np.float64], n: int, exponent: float) -> None:
    """Write coefficient n of base**exponent into `power`, given those before and base up to n, (..., order)."""
    if n == 0:
        power[..., 0] = base[..., 0] ** exponent
        return
    j = np.arange(n)
    weight = (exponent * n - j * (exponent + 1.0)).astype(base.dtype)
    total = np.einsum("j,...j,...j->...", weight, base[..., n:0:-1], power[..., :n])
    power[..., n] = total / (n * base[..., 0])
