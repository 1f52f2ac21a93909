"""The fast lane: Taylor maps of the deviation motion, made by the full lane's own arcs in polynomial arithmetic.

A polynomial is its 119 coefficients over the monomials of degree 1 to 3 in seven variables, the six of the
deviation and the pressure beyond the reference's: first the 7, then the 28 products of two, then the 84 of
three, each in lexical order of its variables. Products of higher degree are cut off.
"""

import numpy as np

from farhold.kernels.jit import kernel
from farhold.kernels.motion.totals import turned

__all__ = ["carry", "fly_maps", "fly_maps_many"]

_DB = 6


@kernel
def _product(a, b, pairs, out):
    """Write the truncated product of polynomials a and b into out (not a or b).

    pairs : (p, 3) int, places of two factors and of their product
    """
    for i in range(out.size):
        out[i] = 0.0
    for p in range(pairs.shape[0]):
        out[pairs[p, 2]] += a[pairs[p, 0]] * b[pairs[p, 1]]


@kernel
def _body(X, r, k, pairs, N, W):
    """Add the attraction's remainder of one body to N (3, terms); leave F(q) in W[0].

    X : (3, terms) place;  r : (3,) from the body to the reference [m];  k : GM/rho3 [1/s2]
    W : (6, terms) work space
    """
    f, u, q, q2, t, h = W[0], W[1], W[2], W[3], W[4], W[5]
    inverse = 1.0 / (r[0] * r[0] + r[1] * r[1] + r[2] * r[2])
    terms = f.size
    for i in range(terms):
        u[i] = 0.0
    for c in range(3):
        _product(X[c], X[c], pairs, t)
        for i in range(terms):
            u[i] += inverse * t[i]
    for i in range(terms):
        q[i] = u[i] + 2.0 * inverse * (X[0, i] * r[0] + X[1, i] * r[1] + X[2, i] * r[2])
    _product(q, q, pairs, q2)
    _product(q, q2, pairs, t)
    for i in range(terms):
        g = -1.875 * q2[i] + 2.1875 * t[i]
        f[i] = 1.5 * q[i] + g
        h[i] = 1.5 * u[i] + g
    for c in range(3):
        _product(f, X[c], pairs, t)
        for i in range(terms):
            N[c, i] += k * (t[i] + h[i] * r[c])


@kernel
def _remainder(X, r1, r2, gm1, gm2, pairs, N, W):
    """Write the remainder N (3, terms) of the linear motion at the place X (3, terms); W (8, terms) work."""
    terms = X.shape[1]
    e, t = W[6], W[7]
    for c in range(3):
        for i in range(terms):
            N[c, i] = 0.0
    _body(X, r2, gm2 / (r2[0] * r2[0] + r2[1] * r2[1] + r2[2] * r2[2]) ** 1.5, pairs, N, W)
    rho3 = (r1[0] * r1[0] + r1[1] * r1[1] + r1[2] * r1[2]) ** 1.5
    _body(X, r1, gm1[0] / rho3, pairs, N, W)
    kp = gm1[1] / rho3
    f, db = W[0], W[1]
    for i in range(terms):
        db[i] = 0.0
    db[_DB] = 1.0
    _product(db, f, pairs, e)
    for c in range(3):
        _product(db, X[c], pairs, t)
        for i in range(terms):
            N[c, i] += kp * (t[i] - e[i] * r1[c])
        _product(e, X[c], pairs, t)
        for i in range(terms):
            N[c, i] -= kp * t[i]


@kernel
def carry(y, phi, response, places, pushes, inner, outer, r1, r2, gm1, gm2, pairs):
    """Carry the map y (6, terms) over one arc, in place; tables of one arc as in collocate.fly_shared.

    Two sweeps settle all terms up to the third degree, since each sweep is right to one degree more.
    """
    nodes = places.shape[0]
    terms = y.shape[1]
    F = np.zeros((nodes, 3, terms))
    X = np.empty((3, terms))
    W = np.empty((8, terms))
    for sweep in range(2):
        for k in range(nodes):
            for c in range(3):
                for i in range(terms):
                    X[c, i] = 0.0
                X[c, _DB] = pushes[k, c]
                for j in range(6):
                    for i in range(terms):
                        X[c, i] += places[k, c, j] * y[j, i]
                if sweep > 0:
                    for m in range(nodes):
                        for j in range(3):
                            for i in range(terms):
                                X[c, i] += inner[k, m, c, j] * F[m, j, i]
            _remainder(X, r1[k], r2[k], gm1, gm2, pairs, F[k], W)
    new = np.zeros((6, terms))
    for c in range(6):
        new[c, _DB] = response[c]
        for j in range(6):
            for i in range(terms):
                new[c, i] += phi[c, j] * y[j, i]
        for m in range(nodes):
            for j in range(3):
                for i in range(terms):
                    new[c, i] += outer[m, c, j] * F[m, j, i]
    for c in range(6):
        for i in range(terms):
            y[c, i] = new[c, i]


@kernel
def _degree_one(Z, M, S):
    """Write the linear part of the map M (terms, 6) at Z (7, w) into S (6, w)."""
    for k in range(6):
        a, b, c, u, v, w, p = (
            M[0, k],
            M[1, k],
            M[2, k],
            M[3, k],
            M[4, k],
            M[5, k],
            M[6, k],
        )
        for i in range(Z.shape[1]):
            S[k, i] = (
                a * Z[0, i] + b * Z[1, i] + c * Z[2, i] + u * Z[3, i] + v * Z[4, i] + w * Z[5, i] + p * Z[6, i]
            )


@kernel
def _degree_two(Z, M, S):
    """Write the terms of degree one and two of the map M (terms, 6) at Z (7, w) into S (6, w)."""
    for k in range(6):
        m = M[:35, k].copy()
        for i in range(Z.shape[1]):
            a, b, c, u, v, w, p = (
                Z[0, i],
                Z[1, i],
                Z[2, i],
                Z[3, i],
                Z[4, i],
                Z[5, i],
                Z[6, i],
            )
            S[k, i] = (
                a * (m[0] + m[7] * a + m[8] * b + m[9] * c + m[10] * u + m[11] * v + m[12] * w + m[13] * p)
                + b * (m[1] + m[14] * b + m[15] * c + m[16] * u + m[17] * v + m[18] * w + m[19] * p)
                + c * (m[2] + m[20] * c + m[21] * u + m[22] * v + m[23] * w + m[24] * p)
                + u * (m[3] + m[25] * u + m[26] * v + m[27] * w + m[28] * p)
                + v * (m[4] + m[29] * v + m[30] * w + m[31] * p)
                + w * (m[5] + m[32] * w + m[33] * p)
                + p * (m[6] + m[34] * p)
            )


@kernel
def _degree_three(Z, M, T, U, S):
    """Add the terms of degree three to S (6, w), nested like those of degree two; T, U (6, w) work space."""
    lanes = Z.shape[1]
    row = 35
    for a in range(7):
        for k in range(6):
            for i in range(lanes):
                U[k, i] = 0.0
        for b in range(a, 7):
            for k in range(6):
                for i in range(lanes):
                    T[k, i] = 0.0
            for c in range(b, 7):
                for k in range(6):
                    m = M[row, k]
                    for i in range(lanes):
                        T[k, i] += m * Z[c, i]
                row += 1
            for k in range(6):
                for i in range(lanes):
                    U[k, i] += Z[b, i] * T[k, i]
        for k in range(6):
            for i in range(lanes):
                S[k, i] += Z[a, i] * U[k, i]


@kernel
def fly_maps(Y, db, order, leg, maps, kick, dv, keep, out):
    """Fly one block of w lanes through legs by maps of the given order.

    Y : (6, w) deviations, advanced in place;  db : (w,);  order : int, 1 to 3
    leg : (s,) int, which of maps (t, 119, 6) each leg uses
    kick, keep : (s,) int, which of the impulses dv (up to w, j, 3) acts before and which row of
    out (m, 6, w) is written after the leg, -1 for none
    """
    lanes = Y.shape[1]
    Z = np.empty((7, lanes))
    T = np.empty((6, lanes))
    U = np.empty((6, lanes))
    for i in range(lanes):
        Z[6, i] = db[i]
    D = turned(dv, lanes)
    for step in range(leg.size):
        M = maps[leg[step]]
        row = kick[step]
        for c in range(6):
            for i in range(lanes):
                Z[c, i] = Y[c, i]
        if row >= 0:
            for c in range(3):
                for i in range(lanes):
                    Z[3 + c, i] += D[row, c, i]
        if order == 1:
            _degree_one(Z, M, Y)
        else:
            _degree_two(Z, M, Y)
            if order == 3:
                _degree_three(Z, M, T, U, Y)
        if keep[step] >= 0:
            for c in range(6):
                for i in range(lanes):
                    out[keep[step], c, i] = Y[c, i]


@kernel
def fly_maps_many(states, beta, lanes, order, leg, maps, kick, dv, keep, out):
    """Fly n nodes by maps, block by block of `lanes`; blocks are padded with idle lanes.

    states : (n, 6), left as they are;  beta : (n,);  dv : (n, j, 3);  out : (n, m, 6)
    The other arguments are those of `fly_maps`.
    """
    Y = np.zeros((6, lanes))
    db = np.zeros(lanes)
    ends = np.zeros((out.shape[1], 6, lanes))
    for first in range(0, states.shape[0], lanes):
        width = min(lanes, states.shape[0] - first)
        for i in range(lanes):
            db[i] = beta[first + i] if i < width else 0.0
            for c in range(6):
                Y[c, i] = states[first + i, c] if i < width else 0.0
        fly_maps(Y, db, order, leg, maps, kick, dv[first : first + width], keep, ends)
        for i in range(width):
            for m in range(out.shape[1]):
                for c in range(6):
                    out[first + i, m, c] = ends[m, c, i]
