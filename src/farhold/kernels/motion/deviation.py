"""The full lane on arcs of each node's own: fixed steps of order 8 in deviation form, many nodes abreast.

Lanes are nodes. Arrays are laid out component by component, lane last, so that each loop over lanes is one
straight run that the compiler turns into vector instructions.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.motion.coefficients import A, B, C
from farhold.kernels.status import OK, OUTSIDE_TABLES

__all__ = ["acceleration", "fly_own", "locate"]

_STAGES = C.size
# Nystroem form of the same method: places need the accelerations of the stages only, not their velocities
_AA = A @ A
_BA = B @ A


@kernel
def locate(track, start, cell, t, gm1, gm2, d, R):
    """Write where the reference is at the time of each lane, and what depends on that alone, into `R`.

    track : (cells, 3, degree + 1) Chebyshev series of the way from the Sun to the reference [m], cells of
    `cell` seconds from `start`;  t : (w,) times [s];  d : (3,) from the Sun to the Earth-Moon barycentre [m]
    gm1 : (2,) the Sun's GM less the reference's pressure, and bare;  gm2 : float [m3/s2]
    R : (11, w): Sun to reference (3), Earth-Moon to reference (3), 1/rho2 and GM/rho3 of the Sun, its bare
    GM/rho3, 1/rho2 and GM/rho3 of the Earth-Moon barycentre
    """
    cells = track.shape[0]
    top = track.shape[2] - 1
    for i in range(t.size):
        at = (t[i] - start) / cell
        k = min(max(int(np.floor(at)), 0), cells - 1)
        x = 2.0 * (at - k) - 1.0
        for c in range(3):
            b1 = 0.0
            b2 = 0.0
            for j in range(top, 0, -1):
                b0 = 2.0 * x * b1 - b2 + track[k, c, j]
                b2 = b1
                b1 = b0
            R[c, i] = x * b1 - b2 + track[k, c, 0]
            R[3 + c, i] = R[c, i] - d[c]
        a2 = 1.0 / (R[0, i] ** 2 + R[1, i] ** 2 + R[2, i] ** 2)
        b2 = 1.0 / (R[3, i] ** 2 + R[4, i] ** 2 + R[5, i] ** 2)
        a3 = a2 * np.sqrt(a2)
        R[6, i] = a2
        R[7, i] = gm1[0] * a3
        R[8, i] = gm1[1] * a3
        R[9, i] = b2
        R[10, i] = gm2 * b2 * np.sqrt(b2)


@kernel
def acceleration(S, R, n, db, out):
    """Write the acceleration of the deviation of each lane, in rotating axes, into `out`.

    S : (6, w) deviation (R, T, N, and rates) [m], [m/s];  R : (11, w) see `locate`;  out : (3, w) [m/s2]
    n : float, rate of the axes about N [rad/s];  db : (w,) pressure over gravity beyond the reference's
    Source: Encke's form, Battin, An Introduction to the Mathematics and Methods of Astrodynamics, 1999,
    section 8.4: F(q) = q (3 + 3 q + q2) / (u^(3/2) + u^3), without cancellation;
    u = 1 + q by the sum itself, which keeps its digits next to a body, where q is near -1.
    """
    n2 = n * n
    for i in range(S.shape[1]):
        x, y, z = S[0, i], S[1, i], S[2, i]
        ax, ay, az, bx, by, bz = R[0, i], R[1, i], R[2, i], R[3, i], R[4, i], R[5, i]
        d2 = x * x + y * y + z * z
        q = (d2 + 2.0 * (x * ax + y * ay + z * az)) * R[6, i]
        u = ((x + ax) ** 2 + (y + ay) ** 2 + (z + az) ** 2) * R[6, i]
        w = u * np.sqrt(u)
        f = q * (3.0 + q * (3.0 + q)) / (w + w * w)
        g = 1.0 - f
        push = R[8, i] * db[i] * g
        c = push - R[7, i] * g
        fa = push + R[7, i] * f
        q = (d2 + 2.0 * (x * bx + y * by + z * bz)) * R[9, i]
        u = ((x + bx) ** 2 + (y + by) ** 2 + (z + bz) ** 2) * R[9, i]
        w = u * np.sqrt(u)
        f = q * (3.0 + q * (3.0 + q)) / (w + w * w)
        c -= R[10, i] * (1.0 - f)
        fb = R[10, i] * f
        out[0, i] = c * x + fa * ax + fb * bx + n2 * x + 2.0 * n * S[4, i]
        out[1, i] = c * y + fa * ay + fb * by + n2 * y - 2.0 * n * S[3, i]
        out[2, i] = c * z + fa * az + fb * bz


@kernel
def _step(Y, h, t, track, start, cell, gm1, gm2, d, n, db, K, S, R, when):
    """Advance each lane by its own step `h` from its own time `t`, order 8; K (stages, 3, w), S (6, w)."""
    lanes = Y.shape[1]
    for s in range(_STAGES):
        for c in range(6):
            for i in range(lanes):
                S[c, i] = 0.0
        for j in range(s):
            a = A[s, j]
            aa = _AA[s, j]
            for c in range(3):
                for i in range(lanes):
                    S[c, i] += aa * K[j, c, i]
                    S[c + 3, i] += a * K[j, c, i]
        for c in range(3):
            for i in range(lanes):
                S[c, i] = Y[c, i] + h[i] * (C[s] * Y[c + 3, i] + h[i] * S[c, i])
                S[c + 3, i] = Y[c + 3, i] + h[i] * S[c + 3, i]
        if track.shape[2] > 1:
            for i in range(lanes):
                when[i] = t[i] + C[s] * h[i]
            locate(track, start, cell, when, gm1, gm2, d, R)
        acceleration(S, R, n, db, K[s])
    for c in range(6):
        for i in range(lanes):
            S[c, i] = 0.0
    for j in range(_STAGES):
        b = B[j]
        ba = _BA[j]
        for c in range(3):
            for i in range(lanes):
                S[c, i] += ba * K[j, c, i]
                S[c + 3, i] += b * K[j, c, i]
    for c in range(3):
        for i in range(lanes):
            Y[c, i] += h[i] * (Y[c + 3, i] + h[i] * S[c, i])
            Y[c + 3, i] += h[i] * S[c + 3, i]


@kernel
def _inspect(Y, R, near, status):
    """Mark lanes that are no longer finite, or nearer to a body than `near` times the reference is."""
    for i in range(Y.shape[1]):
        a = (Y[0, i] + R[0, i]) ** 2 + (Y[1, i] + R[1, i]) ** 2 + (Y[2, i] + R[2, i]) ** 2
        b = (Y[0, i] + R[3, i]) ** 2 + (Y[1, i] + R[4, i]) ** 2 + (Y[2, i] + R[5, i]) ** 2
        sound = a * R[6, i] >= near * near and b * R[9, i] >= near * near
        if not (sound and np.isfinite(a + Y[3, i] + Y[4, i] + Y[5, i])):
            status[i] = OUTSIDE_TABLES


@kernel
def fly_own(
    Y,
    db,
    t,
    steps,
    size,
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
    near,
    status,
):
    """Fly one block of lanes, each through its own s arcs; impulses act before an arc, states are kept after.

    Y : (6, w) deviations, advanced in place;  db : (w,) pressure beyond the reference's;  t : (w,) times [s]
    steps : (s, w) int, steps of each lane in each arc;  size : (s, w) their lengths [s], sign gives direction
    kick : (s, w) int, which impulse acts at the arc's start, -1 for none;  dv : (up to w, k, 3)
    keep : (s, w) int, which row of `out` the state after the arc goes to, -1 for none;  out : (m, 6, w)
    track, start, cell, d, gm1, gm2 : see `locate`;  n : float [rad/s]
    near : float, share of the reference's distance to a body within which fixed steps are not trusted
    status : (w,) int, OUTSIDE_TABLES for lanes that came so near
    Lanes go through their arcs independently; one that is done stands still (step 0).
    """
    lanes = Y.shape[1]
    arcs = steps.shape[0]
    K = np.empty((_STAGES, 3, lanes))
    S = np.empty((6, lanes))
    R = np.empty((11, lanes))
    h = np.empty(lanes)
    when = t.copy()
    at = np.full(lanes, -1)
    left = np.zeros(lanes, dtype=np.int64)
    locate(track, start, cell, when, gm1, gm2, d, R)
    _inspect(Y, R, near, status)
    busy = lanes > 0
    while busy:
        busy = False
        for i in range(lanes):
            while left[i] == 0 and at[i] < arcs:
                if at[i] >= 0 and keep[at[i], i] >= 0:
                    for c in range(6):
                        out[keep[at[i], i], c, i] = Y[c, i] if status[i] == OK else np.nan
                at[i] += 1
                if at[i] < arcs:
                    left[i] = steps[at[i], i]
                    row = kick[at[i], i]
                    if row >= 0:
                        for c in range(3):
                            Y[3 + c, i] += dv[i, row, c]
            h[i] = 0.0
            if left[i] > 0:
                h[i] = size[at[i], i]
                left[i] -= 1
                busy = True
        if busy:
            _step(Y, h, t, track, start, cell, gm1, gm2, d, n, db, K, S, R, when)
            for i in range(lanes):
                t[i] += h[i]
            _inspect(Y, R, near, status)
