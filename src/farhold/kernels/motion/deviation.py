"""The full lane: motion of many nodes relative to a reference, in rotating axes, without cancellation.

Lanes are nodes. Arrays are laid out component by component, lane last, so that each loop over lanes is one
straight run that the compiler turns into vector instructions.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.motion.coefficients import A, B, C
from farhold.kernels.status import HIT_PRIMARY, NOT_FINITE, OK

__all__ = ["acceleration", "fly_block"]

_STAGES = C.size


@kernel
def acceleration(S, r1, r2, gm1, gm2, n, db, out):
    """Write the acceleration of the deviation of each lane, in rotating axes, into `out`.

    S : (6, w) deviation (R, T, N, and rates) [m], [m/s];  out : (3, w) [m/s2]
    r1, r2 : (3,) from Sun and from Earth-Moon barycentre to the reference [m]
    gm1 : (2,) the Sun's GM less the reference's pressure, and the bare one [m3/s2];  gm2 : float [m3/s2]
    n : float, rate of the axes about N [rad/s];  db : (w,) pressure over gravity beyond the reference's
    Source: Encke's form, Battin, An Introduction to the Mathematics and Methods of Astrodynamics, 1999,
    section 8.4; design formula F(q) = q (3 + 3 q + q2) / ((1+q)^(3/2) + (1+q)^3).
    """
    ax, ay, az = r1[0], r1[1], r1[2]
    bx, by, bz = r2[0], r2[1], r2[2]
    a2 = 1.0 / (ax * ax + ay * ay + az * az)
    b2 = 1.0 / (bx * bx + by * by + bz * bz)
    a3 = a2 * np.sqrt(a2)
    b3 = b2 * np.sqrt(b2)
    ka = gm1[0] * a3
    kp = gm1[1] * a3
    kb = gm2 * b3
    n2 = n * n
    for i in range(S.shape[1]):
        x, y, z = S[0, i], S[1, i], S[2, i]
        q = (x * (x + 2.0 * ax) + y * (y + 2.0 * ay) + z * (z + 2.0 * az)) * a2
        u = 1.0 + q
        w = u * np.sqrt(u)
        f = q * (3.0 + q * (3.0 + q)) / (w + w * w)
        g = 1.0 - f
        push = kp * db[i] * g
        ca = push - ka * g
        fa = push + ka * f
        q = (x * (x + 2.0 * bx) + y * (y + 2.0 * by) + z * (z + 2.0 * bz)) * b2
        u = 1.0 + q
        w = u * np.sqrt(u)
        f = q * (3.0 + q * (3.0 + q)) / (w + w * w)
        c = ca - kb * (1.0 - f)
        fb = kb * f
        out[0, i] = c * x + fa * ax + fb * bx + n2 * x + 2.0 * n * S[4, i]
        out[1, i] = c * y + fa * ay + fb * by + n2 * y - 2.0 * n * S[3, i]
        out[2, i] = c * z + fa * az + fb * bz


@kernel
def _step(Y, h, r1, r2, gm1, gm2, n, db, V, K, S):
    """Advance each lane by its own step `h`, order 8; work space V, K (stages, 3, w) and S (6, w)."""
    lanes = Y.shape[1]
    for s in range(_STAGES):
        for c in range(6):
            for i in range(lanes):
                S[c, i] = 0.0
        for j in range(s):
            a = A[s, j]
            if a != 0.0:
                for c in range(3):
                    for i in range(lanes):
                        S[c, i] += a * V[j, c, i]
                        S[c + 3, i] += a * K[j, c, i]
        for c in range(6):
            for i in range(lanes):
                S[c, i] = Y[c, i] + h[i] * S[c, i]
        for c in range(3):
            for i in range(lanes):
                V[s, c, i] = S[c + 3, i]
        acceleration(S, r1, r2, gm1, gm2, n, db, K[s])
    for c in range(3):
        for i in range(lanes):
            S[c, i] = 0.0
            S[c + 3, i] = 0.0
        for j in range(_STAGES):
            b = B[j]
            if b != 0.0:
                for i in range(lanes):
                    S[c, i] += b * V[j, c, i]
                    S[c + 3, i] += b * K[j, c, i]
        for i in range(lanes):
            Y[c, i] += h[i] * S[c, i]
            Y[c + 3, i] += h[i] * S[c + 3, i]


@kernel
def _inspect(Y, r1, r2, close, status):
    """Mark lanes that are no longer finite or have come within the bodies' radii `close` (2,) [m]."""
    for i in range(Y.shape[1]):
        if status[i] != OK:
            continue
        a = (Y[0, i] + r1[0]) ** 2 + (Y[1, i] + r1[1]) ** 2 + (Y[2, i] + r1[2]) ** 2
        b = (Y[0, i] + r2[0]) ** 2 + (Y[1, i] + r2[1]) ** 2 + (Y[2, i] + r2[2]) ** 2
        if not np.isfinite(a + Y[3, i] + Y[4, i] + Y[5, i]):
            status[i] = NOT_FINITE
        elif a < close[0] ** 2 or b < close[1] ** 2:
            status[i] = HIT_PRIMARY


@kernel
def fly_block(Y, db, steps, size, kick, dv, keep, out, r1, r2, gm1, gm2, n, close, status):
    """Fly one block of lanes through s arcs; impulses act before an arc, states are kept after it.

    Y : (6, w) deviations, advanced in place;  db : (w,) pressure beyond the reference's
    steps : (s, w) int, steps of each lane in each arc;  size : (s, w) their lengths [s], sign gives direction
    kick : (s, w) int, which row of `dv` acts at the arc's start, -1 for none;  dv : (k, 3, w) [m/s]
    keep : (s, w) int, which row of `out` the state after the arc goes to, -1 for none;  out : (m, 6, w)
    close : (2,) radii of the bodies [m];  status : (w,) int
    A lane that needs fewer steps than its neighbours stands still (step 0), so no lane depends on another.
    """
    lanes = Y.shape[1]
    V = np.empty((_STAGES, 3, lanes))
    K = np.empty((_STAGES, 3, lanes))
    S = np.empty((6, lanes))
    h = np.empty(lanes)
    for arc in range(steps.shape[0]):
        most = 0
        for i in range(lanes):
            most = max(most, steps[arc, i])
            row = kick[arc, i]
            if row >= 0:
                for c in range(3):
                    Y[3 + c, i] += dv[row, c, i]
        for step in range(most):
            for i in range(lanes):
                h[i] = size[arc, i] if step < steps[arc, i] else 0.0
            _step(Y, h, r1, r2, gm1, gm2, n, db, V, K, S)
            _inspect(Y, r1, r2, close, status)
        for i in range(lanes):
            row = keep[arc, i]
            if row >= 0:
                for c in range(6):
                    out[row, c, i] = Y[c, i] if status[i] == OK else np.nan
