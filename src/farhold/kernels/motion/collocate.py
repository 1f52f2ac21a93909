"""The full lane on shared arcs: exact linear flow, nonlinear remainder by Gauss collocation.

Over one arc the deviation is y(t) = Phi(t) y0 + s(t) db + integral of Phi(t, tau) B N(y(tau), db) dtau, where N
is all that the linear motion about the reference leaves out, without cancellation: N is smaller than the
linear part by the distance over that of the primaries. N is sampled at the Gauss-Legendre nodes of the arc and
interpolated between them; a few sweeps settle the samples. Phi, s and the integrals of Phi against the
interpolating polynomials come from tables made once per arc, so a node costs some hundred operations an arc.

Sources: variation of constants; Picard iteration on collocation nodes, Clenshaw and Norton 1963, Computer
Journal 6, 88 (from memory); exponential collocation, Hochbruck and Ostermann 2010, Acta Numerica 19, 209
(from memory). Lanes are nodes, laid out last.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.motion.totals import turned

__all__ = ["NEAR_LIMIT", "SERIES_LIMIT", "fly_many", "fly_shared"]

SERIES_LIMIT = 5e-3
NEAR_LIMIT = 0.75


@kernel
def _remainders_series(T, db, ax, ay, az, k1, kp, bx, by, bz, k2, F, far):
    """Write N of each lane at places T (3, w) into F (3, w), by series in q; keep the largest |q| in `far`.

    ax, ay, az : from the Sun to the reference [m];  k1, kp : GM/rho3 less pressure, and bare [1/s2]
    bx, by, bz, k2 : the same of the Earth-Moon barycentre;  db : (w,) pressure beyond the reference's
    """
    ia = 1.0 / (ax * ax + ay * ay + az * az)
    ib = 1.0 / (bx * bx + by * by + bz * bz)
    for i in range(T.shape[1]):
        x, y, z = T[0, i], T[1, i], T[2, i]
        d2 = x * x + y * y + z * z
        u = d2 * ia
        q = u + 2.0 * ia * (x * ax + y * ay + z * az)
        g = q * q * (-1.875 + q * (2.1875 + q * (-2.4609375 + q * (2.70703125 - q * 2.9326171875))))
        f = 1.5 * q + g
        e = kp * db[i]
        c = k1 * f + e * (1.0 - f)
        r = k1 * (1.5 * u + g) - e * f
        v = d2 * ib
        p = v + 2.0 * ib * (x * bx + y * by + z * bz)
        g = p * p * (-1.875 + p * (2.1875 + p * (-2.4609375 + p * (2.70703125 - p * 2.9326171875))))
        f = 1.5 * p + g
        s = k2 * (1.5 * v + g)
        c += k2 * f
        F[0, i] = c * x + r * ax + s * bx
        F[1, i] = c * y + r * ay + s * by
        F[2, i] = c * z + r * az + s * bz
        far[i] = max(far[i], max(abs(q), abs(p)))


@kernel
def _remainders_closed(T, db, ax, ay, az, k1, kp, bx, by, bz, k2, F, far):
    """As `_remainders_series`, in closed form: at any distance, for a square root and a division per body.

    Here `far` keeps the largest 1 - (r/rho)2 of the two: 1 at a body itself.
    """
    ia = 1.0 / (ax * ax + ay * ay + az * az)
    ib = 1.0 / (bx * bx + by * by + bz * bz)
    for i in range(T.shape[1]):
        x, y, z = T[0, i], T[1, i], T[2, i]
        d2 = x * x + y * y + z * z
        p = 2.0 * ia * (x * ax + y * ay + z * az)
        q = d2 * ia + p
        near = -q
        o = 1.0 + q
        w = o * np.sqrt(o)
        f = q * (3.0 + q * (3.0 + q)) / (w + w * w)
        e = kp * db[i]
        c = k1 * f + e * (1.0 - f)
        r = k1 * (f - 1.5 * p) - e * f
        p = 2.0 * ib * (x * bx + y * by + z * bz)
        q = d2 * ib + p
        o = 1.0 + q
        w = o * np.sqrt(o)
        f = q * (3.0 + q * (3.0 + q)) / (w + w * w)
        s = k2 * (f - 1.5 * p)
        c += k2 * f
        F[0, i] = c * x + r * ax + s * bx
        F[1, i] = c * y + r * ay + s * by
        F[2, i] = c * z + r * az + s * bz
        far[i] = max(far[i], max(near, -q))


@kernel
def _linear(M, s, Y, db, out):
    """Write out = M Y + s db, M (m, 6), Y (6, w), s (m,), out (m, w)."""
    for c in range(M.shape[0]):
        a0, a1, a2, a3, a4, a5, b = (
            M[c, 0],
            M[c, 1],
            M[c, 2],
            M[c, 3],
            M[c, 4],
            M[c, 5],
            s[c],
        )
        for i in range(Y.shape[1]):
            out[c, i] = (
                a0 * Y[0, i] + a1 * Y[1, i] + a2 * Y[2, i] + a3 * Y[3, i] + a4 * Y[4, i] + a5 * Y[5, i] + b * db[i]
            )


@kernel
def _gather(Q, F, out):
    """Add the sum over nodes m of Q[m] F[m] to out, Q (k, c, 3), F (k, 3, w), out (c, w)."""
    for c in range(Q.shape[1]):
        for m in range(Q.shape[0]):
            a, b, d = Q[m, c, 0], Q[m, c, 1], Q[m, c, 2]
            for i in range(out.shape[1]):
                out[c, i] += a * F[m, 0, i] + b * F[m, 1, i] + d * F[m, 2, i]


@kernel
def _change(T, Z, moved):
    """Keep the largest squared change of place from Z (3, w) to T (3, w) in `moved` (w,)."""
    for i in range(T.shape[1]):
        x, y, z = T[0, i] - Z[0, i], T[1, i] - Z[1, i], T[2, i] - Z[2, i]
        moved[i] = max(moved[i], x * x + y * y + z * z)


@kernel
def fly_shared(
    Y, db, arc, phi, response, places, pushes, inner, outer, r1, r2, gm1, gm2, closed, sweeps, kick, dv, keep, out,
    moved, far,
):  # fmt: skip
    """Fly one block of w lanes through arcs that all lanes share.

    Y : (6, w) deviations [m], [m/s], advanced in place;  db : (w,) pressure beyond the reference's
    arc : (s,) int, which table each arc uses, of t tables with k nodes:
    phi (t, 6, 6), response (t, 6) : linear flow over the arc, and per unit of db
    places (t, k, 3, 6), pushes (t, k, 3) : the same from the arc's start to the places at its nodes
    inner (t, k, k, 3, 3), outer (t, k, 6, 3) : integrals of the flow against the interpolation of N
    r1, r2 : (t, k, 3) from the Sun and the Earth-Moon barycentre to the reference at the nodes [m]
    gm1 : (2,) the Sun's GM less the reference's pressure, and bare;  gm2 : float [m3/s2]
    closed : bool, N in closed form instead of series;  sweeps : int, 2 or more
    kick : (s,) int, which of the impulses dv (up to w, j, 3) acts at the arc's start, -1 none
    keep : (s,) int, row of out (m, 6, w) for the state after the arc, -1 none
    moved : (w,) squared change of place in the last sweep, the largest of all arcs [m2]
    far : (w,) largest |q| that the series were used at; in closed form see `_remainders_closed`
    """
    lanes = Y.shape[1]
    nodes = places.shape[1]
    T = np.empty((3, lanes))
    P = np.empty((nodes, 3, lanes))
    Z = np.empty((nodes, 3, lanes))
    F = np.empty((nodes, 3, lanes))
    E = np.empty((6, lanes))
    far[:] = 0.0
    moved[:] = 0.0
    D = turned(dv, lanes)
    for a in range(arc.size):
        t = arc[a]
        if kick[a] >= 0:
            for c in range(3):
                for i in range(lanes):
                    Y[3 + c, i] += D[kick[a], c, i]
        for k in range(nodes):
            _linear(places[t, k], pushes[t, k], Y, db, P[k])
        for sweep in range(sweeps):
            for k in range(nodes):
                here = P[k]
                if sweep > 0:
                    here = T
                    for c in range(3):
                        for i in range(lanes):
                            T[c, i] = P[k, c, i]
                    _gather(inner[t, k], F, T)
                    if sweep == sweeps - 1:
                        _change(T, Z[k] if sweeps > 2 else P[k], moved)
                    if sweep == sweeps - 2:
                        for c in range(3):
                            for i in range(lanes):
                                Z[k, c, i] = T[c, i]
                ax, ay, az = r1[t, k, 0], r1[t, k, 1], r1[t, k, 2]
                bx, by, bz = r2[t, k, 0], r2[t, k, 1], r2[t, k, 2]
                k1 = gm1[0] / (ax * ax + ay * ay + az * az) ** 1.5
                kp = gm1[1] / (ax * ax + ay * ay + az * az) ** 1.5
                k2 = gm2 / (bx * bx + by * by + bz * bz) ** 1.5
                if closed:
                    _remainders_closed(here, db, ax, ay, az, k1, kp, bx, by, bz, k2, F[k], far)
                else:
                    _remainders_series(here, db, ax, ay, az, k1, kp, bx, by, bz, k2, F[k], far)
        _linear(phi[t], response[t], Y, db, E)
        _gather(outer[t], F, E)
        for c in range(6):
            for i in range(lanes):
                Y[c, i] = E[c, i]
        if keep[a] >= 0:
            for c in range(6):
                for i in range(lanes):
                    out[keep[a], c, i] = Y[c, i]


@kernel
def fly_many(
    states, beta, lanes, arc, phi, response, places, pushes, inner, outer, r1, r2, gm1, gm2, closed, sweeps, kick,
    dv, keep, out, moved, far,
):  # fmt: skip
    """Fly n nodes through shared arcs, block by block of one lane width; blocks are padded with idle lanes.

    states : (n, 6) deviations, left as they are;  beta : (n,);  lanes : int;  dv : (n, j, 3)
    out : (n, m, 6);  moved, far : (n,);  the other arguments as in `fly_shared`
    """
    Y = np.zeros((6, lanes))
    db = np.zeros(lanes)
    ends = np.zeros((out.shape[1], 6, lanes))
    worst = np.zeros(lanes)
    reach = np.zeros(lanes)
    for first in range(0, states.shape[0], lanes):
        width = min(lanes, states.shape[0] - first)
        for i in range(lanes):
            db[i] = beta[first + i] if i < width else 0.0
            for c in range(6):
                Y[c, i] = states[first + i, c] if i < width else 0.0
        fly_shared(
            Y, db, arc, phi, response, places, pushes, inner, outer, r1, r2, gm1, gm2, closed, sweeps, kick,
            dv[first : first + width], keep, ends, worst, reach,
        )  # fmt: skip
        for i in range(width):
            moved[first + i] = worst[i]
            far[first + i] = reach[i]
            for m in range(out.shape[1]):
                for c in range(6):
                    out[first + i, m, c] = ends[m, c, i]
