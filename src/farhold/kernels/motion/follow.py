"""One node at a time with adaptive steps: for paths that come near a primary, where tables and fixed steps end."""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.motion.coefficients import E3, E5, A, B, C
from farhold.kernels.motion.deviation import acceleration, locate
from farhold.kernels.status import HIT_PRIMARY, NOT_FINITE, OK, TOO_MANY_STEPS

__all__ = ["follow"]

_STAGES = C.size
_MOST_STEPS = 200_000


@kernel
def _slope(y, t, db, track, start, cell, d, gm1, gm2, n, R, K):
    """Write the derivative (6, 1) of the deviation y (6, 1) at time t (1,) into K (6, 1)."""
    locate(track, start, cell, t, gm1, gm2, d, R)
    acceleration(y, R, n, db, K[3:])
    K[0, 0], K[1, 0], K[2, 0] = y[3, 0], y[4, 0], y[5, 0]


@kernel
def _closer(y, R, close):
    """Whether the node at y (6, 1) lies within the radius of either body."""
    a = (y[0, 0] + R[0, 0]) ** 2 + (y[1, 0] + R[1, 0]) ** 2 + (y[2, 0] + R[2, 0]) ** 2
    b = (y[0, 0] + R[3, 0]) ** 2 + (y[1, 0] + R[4, 0]) ** 2 + (y[2, 0] + R[5, 0]) ** 2
    return a < close[0] ** 2 or b < close[1] ** 2


@kernel
def _arc(
    y,
    t0,
    span,
    db,
    track,
    start,
    cell,
    d,
    gm1,
    gm2,
    n,
    close,
    rtol,
    atol,
    R,
    K,
    new,
    size,
):
    """Follow one arc of `span` seconds; returns (status, steps, last step size)."""
    t = np.array([t0])
    when = np.empty(1)
    done = 0.0
    steps = 0
    sign = 1.0 if span >= 0.0 else -1.0
    _slope(y, t, db, track, start, cell, d, gm1, gm2, n, R, K[0])
    while done < abs(span):
        last = size >= abs(span) - done
        h = sign * (abs(span) - done if last else size)
        for s in range(1, _STAGES + 1):
            for i in range(6):
                total = 0.0
                for j in range(s):
                    total += (B[j] if s == _STAGES else A[s, j]) * K[j, i, 0]
                new[i, 0] = y[i, 0] + h * total
            if s < _STAGES:
                when[0] = t[0] + C[s] * h
                _slope(new, when, db, track, start, cell, d, gm1, gm2, n, R, K[s])
        e3 = 0.0
        e5 = 0.0
        for i in range(6):
            a = 0.0
            b = 0.0
            for j in range(_STAGES):
                a += E3[j] * K[j, i, 0]
                b += E5[j] * K[j, i, 0]
            limit = atol * (1.0 if i < 3 else n) + rtol * max(abs(y[i, 0]), abs(new[i, 0]))
            e3 += (a / limit) ** 2
            e5 += (b / limit) ** 2
        error = 0.0 if e5 == 0.0 else abs(h) * e5 / np.sqrt((e5 + 0.01 * e3) * 6.0)
        steps += 1
        if not np.isfinite(error):
            return NOT_FINITE, steps, size
        factor = 6.0 if error == 0.0 else min(6.0, max(0.2, 0.9 * error**-0.125))
        if error <= 1.0:
            done = abs(span) if last else done + abs(h)
            t[0] = t0 + sign * done
            y[:] = new
            _slope(y, t, db, track, start, cell, d, gm1, gm2, n, R, K[0])
            if _closer(y, R, close):
                return HIT_PRIMARY, steps, size
            size = max(size, abs(h) * factor) if last else abs(h) * factor
        else:
            size = abs(h) * min(1.0, factor)
        if steps > _MOST_STEPS or size < 1e-9:
            return TOO_MANY_STEPS, steps, size
    return OK, steps, size


@kernel
def follow(
    y,
    db,
    t0,
    span,
    kick,
    dv,
    keep,
    out,
    track,
    start,
    cell,
    d,
    gm1,
    gm2,
    n,
    close,
    rtol,
    atol,
):
    """Fly one node through s arcs by adaptive steps of order 8 in deviation form.

    y : (6, 1) deviation, advanced in place;  db : (1,);  t0 : float [s];  span : (s,) lengths of arcs [s]
    kick, keep : (s,) int, as in deviation.fly_own;  dv : (k, 3) [m/s];  out : (m, 6), rows kept
    track, start, cell, d, gm1, gm2 : see deviation.locate;  n : float;  close : (2,) radii [m]
    rtol, atol : float, tolerance per step, relative and [m] (velocities: atol n)
    Returns the status.  Source: Hairer, Norsett, Wanner 1993, DOP853, on Encke's deviation.
    """
    R = np.empty((11, 1))
    K = np.empty((_STAGES, 6, 1))
    new = np.empty((6, 1))
    t = t0
    size = 3600.0
    for arc in range(span.size):
        if kick[arc] >= 0:
            for c in range(3):
                y[3 + c, 0] += dv[kick[arc], c]
        status, _, size = _arc(
            y,
            t,
            span[arc],
            db,
            track,
            start,
            cell,
            d,
            gm1,
            gm2,
            n,
            close,
            rtol,
            atol,
            R,
            K,
            new,
            size,
        )
        if status != OK:
            return status
        t += span[arc]
        if keep[arc] >= 0:
            for c in range(6):
                out[keep[arc], c] = y[c, 0]
    return OK
