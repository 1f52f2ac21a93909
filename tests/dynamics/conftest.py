"""An independent flight: absolute states by Taylor series in thirty digits, and their difference."""

import mpmath
import numpy as np
import pytest

from farhold.dynamics.circular import lightness

mp = mpmath.MPContext()
mp.dps = 30
ORDER = 28
ALLOWED = mp.mpf(10) ** -26
ANGLES = {"L1": 0, "L2": 0, "L4": 1, "L5": -1}


def series(state, mu, beta, order=ORDER):
    """Taylor coefficients (order + 1, 6) of the motion, by the recurrences of products and powers."""
    c = [[value] for value in state]
    mass = [(1 - mu) * (1 - beta), mu]
    place = [-mu, 1 - mu]
    square = [[], []]
    power = [[], []]
    for k in range(order):
        pull = [mp.mpf(0)] * 3
        for p in (0, 1):
            away = [c[0][0] - place[p], *c[0][1:]]
            parts = (away, c[1], c[2])
            square[p].append(sum(mp.fdot(q[: k + 1], q[k::-1]) for q in parts))
            s, w = square[p], power[p]
            if k == 0:
                w.append(s[0] ** (-mp.mpf(3) / 2))
            else:
                weights = [(-mp.mpf(3) / 2 * (k - j) - j) * s[k - j] for j in range(k)]
                w.append(mp.fdot(weights, w[:k]) / (k * s[0]))
            for axis in range(3):
                pull[axis] += mass[p] * mp.fdot(parts[axis][: k + 1], w[k::-1])
        rate = [
            2 * c[4][k] + c[0][k] - pull[0],
            -2 * c[3][k] + c[1][k] - pull[1],
            -pull[2],
        ]
        for axis in range(3):
            c[axis].append(c[axis + 3][k] / (k + 1))
            c[axis + 3].append(rate[axis] / (k + 1))
    return c


def flown(state, times, mu, beta):
    """States at the nondimensional times, the first of which is that of `state`."""
    out, now = [list(state)], times[0]
    state = list(state)
    for end in times[1:]:
        while now != end:
            c = series(state, mu, beta)
            last = max(abs(row[-1]) for row in c)
            size = (ALLOWED / last) ** (mp.mpf(1) / ORDER) if last else abs(end - now)
            h = min(size, abs(end - now)) * (1 if end > now else -1)
            powers = [h**k for k in range(ORDER + 1)]
            state = [mp.fdot(row, powers) for row in c]
            now = end if abs(end - now) <= size else now + h
        out.append(list(state))
    return out


def equilibrium_place(point, mu, beta):
    """Place of the displaced point to all digits: closed form, or the root of the balance."""
    pull = (1 - mu) * (1 - beta)
    if point in ("L4", "L5"):
        r1 = mp.cbrt(1 - beta)
        x = r1 * r1 / 2
        y = mp.sqrt(r1 * r1 - x * x)
        return [x - mu, y if point == "L4" else -y, mp.mpf(0)]
    side = -1 if point == "L1" else 1

    def balance(g):
        return 1 - mu + side * g - pull / (1 + side * g) ** 2 - side * mu / g**2

    gamma = mp.findroot(balance, mp.cbrt(mu / 3))
    return [1 - mu + side * gamma, mp.mpf(0), mp.mpf(0)]


class Truth:
    """A reference in thirty digits; deviations go in and come out in SI, rotating axes."""

    def __init__(self, reference):
        system = reference.system
        gm1, gm2, self.length = (mp.mpf(x) for x in (system.gm1_m3_s2, system.gm2_m3_s2, system.length_m))
        self.mu = gm2 / (gm1 + gm2)
        self.rate = mp.sqrt((gm1 + gm2) / self.length**3)
        self.beta = mp.mpf(lightness(reference.pressure_area_m2_kg))
        self.place = equilibrium_place(reference.point, self.mu, self.beta)
        angle = ANGLES[reference.point] * mp.pi / 3
        self.c, self.s = mp.cos(angle), mp.sin(angle)

    def absolute(self, deviation):
        """Nondimensional barycentric state of a deviation (6,)."""
        d = [mp.mpf(float(v)) / self.length for v in deviation]
        d[3:] = [v / self.rate for v in d[3:]]
        turned = []
        for k in (0, 3):
            turned += [self.c * d[k] - self.s * d[k + 1], self.s * d[k] + self.c * d[k + 1], d[k + 2]]
        return [turned[k] + (self.place[k] if k < 3 else 0) for k in range(6)]

    def deviation(self, state):
        """Deviation (6,) of a nondimensional barycentric state."""
        d = [state[k] - (self.place[k] if k < 3 else 0) for k in range(6)]
        turned = []
        for k, unit in ((0, self.length), (3, self.length * self.rate)):
            turned += [
                unit * (self.c * d[k] + self.s * d[k + 1]),
                unit * (self.c * d[k + 1] - self.s * d[k]),
                unit * d[k + 2],
            ]
        return [float(v) for v in turned]

    def fly(self, deviation, times_s, excess_beta=0.0):
        """Deviations (m, 6) at the times, starting at 0."""
        times = [mp.mpf(0)] + [mp.mpf(float(t)) * self.rate for t in times_s]
        states = flown(self.absolute(deviation), times, self.mu, self.beta + mp.mpf(excess_beta))
        return np.array([self.deviation(state) for state in states[1:]])

    def jacobi_excess(self, deviations):
        """Jacobi constants of deviations (m, 6) less that of the reference at rest, (m,)."""
        base = self._jacobi([*self.place, 0, 0, 0])
        return np.array([float(self._jacobi(self.absolute(d)) - base) for d in deviations])

    def _jacobi(self, s):
        r1 = mp.sqrt((s[0] + self.mu) ** 2 + s[1] ** 2 + s[2] ** 2)
        r2 = mp.sqrt((s[0] - 1 + self.mu) ** 2 + s[1] ** 2 + s[2] ** 2)
        pull = (1 - self.mu) * (1 - self.beta)
        return s[0] ** 2 + s[1] ** 2 + 2 * pull / r1 + 2 * self.mu / r2 - s[3] ** 2 - s[4] ** 2 - s[5] ** 2


@pytest.fixture(scope="session")
def truth():
    """Makes the thirty-digit form of a reference: truth(reference).fly(deviation, times_s)."""
    return Truth
