"""Analytic starts: Richardson's third-order halo, and the linear modes of a libration point."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.dynamics.circular import libration_point
from farhold.errors import ConvergenceError, Fault

__all__ = ["Richardson", "linear_mode"]


@dataclass(frozen=True, slots=True)
class Richardson:
    """Constants of the third-order expansion about a collinear point, with radiation pressure.

    Lengths are in units of `gamma`, the distance from the displaced point to the nearer primary (the Sun at
    L3); x points along the line from the Sun to the Earth, times are in units of 1/n.

    Source: Richardson 1980, Celestial Mechanics 22, 241 (from memory); the constants of his table are tested.
    Pressure enters through c2, c3, c4 alone, as it only weakens the Sun's pull.
    """

    point: str
    gamma: float
    x_point: float
    c2: float
    c3: float
    c4: float
    rate: float
    k: float
    delta: float
    a: dict[str, float]

    @classmethod
    def about(cls, point: str, mu: float, beta: float = 0.0) -> Richardson:
        """Compute the constants for "L1", "L2" or "L3"."""
        x = float(libration_point(point, mu, beta)[0])
        r1, r2 = abs(x + mu), abs(x - 1.0 + mu)
        gamma = r1 if point == "L3" else r2
        sun, earth = (1.0 - mu) * (1.0 - beta), mu
        # the pull of a primary on the side s: (-s)^n at distance r (s = 1 on the side of growing x)
        s1, s2 = (1.0 if point == "L3" else -1.0), (-1.0 if point == "L2" else 1.0)
        c2, c3, c4 = (
            (sun * s1**n * (gamma / r1) ** (n + 1) + earth * s2**n * (gamma / r2) ** (n + 1)) / gamma**3
            for n in (2, 3, 4)
        )
        rate = math.sqrt(0.5 * (2.0 - c2 + math.sqrt(9.0 * c2 * c2 - 8.0 * c2)))
        k = (rate**2 + 1.0 + 2.0 * c2) / (2.0 * rate)
        return cls(point, gamma, x, c2, c3, c4, rate, k, rate**2 - c2, _constants(c2, c3, c4, rate, k))

    def ax_of(self, az: float) -> float:
        """In-plane amplitude along x of the halo of amplitude `az`, both in units of gamma.

        Raises
        ------
        ConvergenceError
            The expansion has no halo of that amplitude.
        """
        square = -(self.a["l2"] * az**2 + self.delta) / self.a["l1"]
        if not square > 0.0:
            raise ConvergenceError(Fault("reference.az", f"there is no halo of this amplitude at {self.point}"))
        return math.sqrt(square)

    def frequency(self, ax: float, az: float) -> float:
        """Frequency of the orbit, in units of n."""
        return self.rate * (1.0 + self.a["s1"] * ax**2 + self.a["s2"] * az**2)

    def state(self, ax: float, az: float, angle: float) -> NDArray[np.float64]:
        """Barycentric synodic state (6,) of the orbit at `angle`; northern halo where az > 0."""
        a, w = self.a, self.frequency(ax, az)
        c, s = [math.cos(n * angle) for n in range(4)], [math.sin(n * angle) for n in range(4)]
        x1, x2, x3 = -ax, a["a23"] * ax**2 - a["a24"] * az**2, a["a31"] * ax**3 - a["a32"] * ax * az**2
        y1, y2, y3 = self.k * ax, a["b21"] * ax**2 - a["b22"] * az**2, a["b31"] * ax**3 - a["b32"] * ax * az**2
        z1, z2, z3 = az, a["d21"] * ax * az, a["d32"] * az * ax**2 - a["d31"] * az**3
        place = [
            a["a21"] * ax**2 + a["a22"] * az**2 + x1 * c[1] + x2 * c[2] + x3 * c[3],
            y1 * s[1] + y2 * s[2] + y3 * s[3],
            z1 * c[1] + z2 * (c[2] - 3.0) + z3 * c[3],
        ]
        pace = [
            -w * (x1 * s[1] + 2.0 * x2 * s[2] + 3.0 * x3 * s[3]),
            w * (y1 * c[1] + 2.0 * y2 * c[2] + 3.0 * y3 * c[3]),
            -w * (z1 * s[1] + 2.0 * z2 * s[2] + 3.0 * z3 * s[3]),
        ]
        state = self.gamma * np.array(place + pace)
        state[0] += self.x_point
        return state


def _constants(c2: float, c3: float, c4: float, w: float, k: float) -> dict[str, float]:
    """Richardson's coefficients by his names."""
    d1 = 3.0 * w**2 / k * (k * (6.0 * w**2 - 1.0) - 2.0 * w)
    d2 = 8.0 * w**2 / k * (k * (11.0 * w**2 - 1.0) - 2.0 * w)
    a21 = 3.0 * c3 * (k**2 - 2.0) / (4.0 * (1.0 + 2.0 * c2))
    a22 = 3.0 * c3 / (4.0 * (1.0 + 2.0 * c2))
    a23 = -3.0 * c3 * w / (4.0 * k * d1) * (3.0 * k**3 * w - 6.0 * k * (k - w) + 4.0)
    a24 = -3.0 * c3 * w / (4.0 * k * d1) * (2.0 + 3.0 * k * w)
    b21 = -3.0 * c3 * w / (2.0 * d1) * (3.0 * k * w - 4.0)
    b22 = 3.0 * c3 * w / d1
    d21 = -c3 / (2.0 * w**2)
    p, q = 9.0 * w**2 + 1.0 - c2, 9.0 * w**2 + 1.0 + 2.0 * c2
    e1 = 4.0 * c3 * (k * a23 - b21) + k * c4 * (4.0 + k**2)
    e2 = 3.0 * c3 * (2.0 * a23 - k * b21) + c4 * (2.0 + 3.0 * k**2)
    e3 = 4.0 * c3 * (k * a24 - b22) + k * c4
    e4 = c3 * (k * b22 + d21 - 2.0 * a24) - c4
    common = 1.0 / (2.0 * w * (w * (1.0 + k**2) - 2.0 * k))
    s1 = 1.5 * c3 * (2.0 * a21 * (k**2 - 2.0) - a23 * (k**2 + 2.0) - 2.0 * k * b21)
    s1 = common * (s1 - 0.375 * c4 * (3.0 * k**4 - 8.0 * k**2 + 8.0))
    s2 = 1.5 * c3 * (2.0 * a22 * (k**2 - 2.0) + a24 * (k**2 + 2.0) + 2.0 * k * b22 + 5.0 * d21)
    s2 = common * (s2 + 0.375 * c4 * (12.0 - k**2))
    a1 = -1.5 * c3 * (2.0 * a21 + a23 + 5.0 * d21) - 0.375 * c4 * (12.0 - k**2)
    a2 = 1.5 * c3 * (a24 - 2.0 * a22) + 1.125 * c4
    return {
        "a21": a21,
        "a22": a22,
        "a23": a23,
        "a24": a24,
        "a31": -9.0 * w / (4.0 * d2) * e1 + p / (2.0 * d2) * e2,
        "a32": -(9.0 * w / 4.0 * e3 + 1.5 * p * e4) / d2,
        "b21": b21,
        "b22": b22,
        "b31": 3.0 / (8.0 * d2) * (-8.0 * w * e2 + q * e1),
        "b32": (9.0 * w * e4 + 0.375 * q * e3) / d2,
        "d21": d21,
        "d31": 3.0 / (64.0 * w**2) * (4.0 * c3 * a24 + c4),
        "d32": 3.0 / (64.0 * w**2) * (4.0 * c3 * (a23 - d21) + c4 * (4.0 + k**2)),
        "s1": s1,
        "s2": s2,
        "l1": a1 + 2.0 * w**2 * s1,
        "l2": a2 + 2.0 * w**2 * s2,
    }


def linear_mode(matrix: NDArray[np.float64], rank: int) -> tuple[float, NDArray[np.complex128]]:
    """Frequency and complex shape (6,), with T of 1, of an in-plane oscillation; rank 0 is the slowest."""
    planar = np.ix_([0, 1, 3, 4], [0, 1, 3, 4])
    values, vectors = np.linalg.eig(matrix[planar])
    turning = np.flatnonzero(values.imag > 1e-9)
    chosen = turning[np.argsort(values[turning].imag)][rank]
    shape = np.zeros(6, dtype=complex)
    shape[[0, 1, 3, 4]] = vectors[:, chosen] / vectors[1, chosen]
    return float(values[chosen].imag), shape
