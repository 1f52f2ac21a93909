"""Adaptive integration of absolute trajectories: references, published orbits, arrivals."""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.motion.coefficients import E3, E5, A, B, C
from farhold.kernels.motion.three_body import derivative
from farhold.kernels.status import NOT_FINITE, OK, TOO_MANY_STEPS

__all__ = ["dop853"]

_STAGES = C.size
_SAFETY = 0.9
_SHRINK = 0.2
_GROW = 6.0
_MOST_STEPS = 2_000_000


@kernel
def _attempt(y, h, mu, beta, K, new):
    """Take one trial step from `y`, whose derivative is in K[0]; write the 8th-order state into `new`."""
    n = y.size
    for s in range(1, _STAGES):
        for i in range(n):
            total = 0.0
            for j in range(s):
                total += A[s, j] * K[j, i]
            new[i] = y[i] + h * total
        derivative(new, mu, beta, K[s])
    for i in range(n):
        total = 0.0
        for j in range(_STAGES):
            total += B[j] * K[j, i]
        new[i] = y[i] + h * total


@kernel
def _error(y, new, h, rtol, atol, K):
    """Return the scaled error of a trial step (Hairer, Norsett, Wanner 1993, eq. II.10.17)."""
    n = y.size
    e3 = 0.0
    e5 = 0.0
    for i in range(n):
        a = 0.0
        b = 0.0
        for j in range(_STAGES):
            a += E3[j] * K[j, i]
            b += E5[j] * K[j, i]
        scale = atol + rtol * max(abs(y[i]), abs(new[i]))
        e3 += (a / scale) ** 2
        e5 += (b / scale) ** 2
    if e5 == 0.0:
        return 0.0
    return abs(h) * e5 / np.sqrt((e5 + 0.01 * e3) * n)


@kernel
def dop853(y0, t, mu, beta, rtol, atol, out):
    """Integrate the three-body problem from t[0] through the times t[1:] by steps cut at each of them.

    y0 : (6,) or (42,) state, see three_body.derivative;  t : (k,) monotonic times
    rtol, atol : float, tolerances per step;  out : (k, y0.size), row 0 becomes y0
    Returns (status, steps).  Source: Hairer, Norsett, Wanner 1993, DOP853.
    """
    n = y0.size
    y = y0.copy()
    new = np.empty(n)
    K = np.empty((_STAGES, n))
    out[0] = y
    derivative(y, mu, beta, K[0])
    sign = 1.0 if t[-1] >= t[0] else -1.0
    speed = 0.0
    for i in range(n):
        speed = max(speed, abs(K[0, i]) / (atol + rtol * abs(y[i])))
    size = 0.01 / speed if speed > 0.0 else 1e-6
    size = max(size * 1e6**0.125, 1e-9)
    steps = 0
    for k in range(1, t.size):
        now = t[k - 1]
        while (t[k] - now) * sign > 0.0:
            left = abs(t[k] - now)
            last = size >= left
            step = left if last else size
            h = sign * step
            _attempt(y, h, mu, beta, K, new)
            error = _error(y, new, h, rtol, atol, K)
            steps += 1
            if not np.isfinite(error):
                return NOT_FINITE, steps
            if error <= 1.0:
                now = t[k] if last else now + h
                y[:] = new
                derivative(y, mu, beta, K[0])
            factor = _GROW if error == 0.0 else min(_GROW, max(_SHRINK, _SAFETY * error**-0.125))
            if error > 1.0:
                size = step * min(1.0, factor)
            elif not last or factor < 1.0:
                size = step * factor
            else:
                size = max(size, step * factor)
            if steps > _MOST_STEPS or size < 1e-15 * (1.0 + abs(now)):
                return TOO_MANY_STEPS, steps
        out[k] = y
    return OK, steps
