"""Holding many nodes at their slots in a closed loop: decisions, burns and motion, lanes last.

Deviations are those from the node's own slot. The slot's pull is a known constant acceleration, or, for slots
that turn in rotating axes, linear in the slot's place; both enter the motion through tables of each step.
"""

import numpy as np

from farhold.kernels.jit import kernel

__all__ = ["advance", "burn", "decide_box", "decide_linear"]


@kernel
def _predicted(F, G, H, E, known, b, S, i, row):
    """Component `row` of the deviation of lane i after a span: F E + G (known + b) + H S."""
    total = 0.0
    for j in range(6):
        total += F[row, j] * E[j, i]
    for j in range(3):
        total += G[row, j] * (known[j, i] + b[j, i]) + H[row, j] * S[j, i]
    return total


@kernel
def decide_linear(E, known, b, S, Kx, Ka, Ks, dv):
    """Write dv = Kx E + Ka (known + b) + Ks S of each lane into `dv` (3, w).

    E : (6, w) estimate;  known, b : (3, w) known and estimated acceleration;  S : (3, w) slot's place
    Kx : (3, 6);  Ka, Ks : (3, 3)
    """
    for c in range(3):
        for i in range(E.shape[1]):
            total = 0.0
            for j in range(6):
                total += Kx[c, j] * E[j, i]
            for j in range(3):
                total += Ka[c, j] * (known[j, i] + b[j, i]) + Ks[c, j] * S[j, i]
            dv[c, i] = total


@kernel
def decide_box(E, known, b, S, box, watch, F, G, H, Kx, Ka, Ks, look, dv):
    """Burn only where the path would leave the box before the next decision; then stay inside for longest.

    box : half-width on each axis [m], of which the share `watch` is used
    F (p, 3, 6), G, H (p, 3, 3) : maps to the places at the p times until after the next decision
    Kx (h, 3, 6), Ka, Ks (h, 3, 3) : feedback that brings the node to the slot after each of h horizons, rising
    look : (h, m) int, which rows of F, G, H beyond p (appended) show the path up to each horizon, -1 for none
    dv : (3, w) written, 0 where nothing is done
    """
    edge = watch * box
    horizons, most = look.shape
    u = np.empty(3)
    for i in range(E.shape[1]):
        dv[0, i] = 0.0
        dv[1, i] = 0.0
        dv[2, i] = 0.0
        leaves = False
        for p in range(look[0, 0]):
            for c in range(3):
                if abs(_predicted(F[p], G[p], H[p], E, known, b, S, i, c)) > edge:
                    leaves = True
            if leaves:
                break
        if not leaves:
            continue
        for k in range(horizons - 1, -1, -1):
            for c in range(3):
                u[c] = 0.0
                for j in range(6):
                    u[c] += Kx[k, c, j] * E[j, i]
                for j in range(3):
                    u[c] += Ka[k, c, j] * (known[j, i] + b[j, i]) + Ks[k, c, j] * S[j, i]
            inside = True
            for m in range(most):
                p = look[k, m]
                if p < 0 or k == 0:
                    break
                for c in range(3):
                    total = _predicted(F[p], G[p], H[p], E, known, b, S, i, c)
                    for j in range(3):
                        total += F[p, c, 3 + j] * u[j]
                    # a node that starts outside may come back in on its way
                    if abs(total) > edge and abs(total) > abs(E[c, i]):
                        inside = False
                if not inside:
                    break
            if inside:
                dv[0, i] = u[0]
                dv[1, i] = u[1]
                dv[2, i] = u[2]
                break


@kernel
def burn(dv, least, ready, g, s1, s2, s3, X, E, C, spent, counts, counted):
    """Make the burns `dv` (3, w) with errors; write what each lane spent into `spent` (w,) [m/s].

    least : (w,) smallest burn that the thruster can make [m/s];  ready : (w,) bool, False: the burn is missed
    g : (4, w) standard normal numbers;  s1 : error of magnitude;  s2 : its fixed part [m/s];  s3 : pointing [rad]
    X, E : (6, w) truth and estimate, both pushed;  C : (18, w) covariances, grown by the execution's
    counts : (w,) int, burns made, where `counted`
    Source: Gates 1963, JPL TR 32-504: magnitude and transverse errors.
    """
    for i in range(dv.shape[1]):
        spent[i] = 0.0
        v = np.sqrt(dv[0, i] ** 2 + dv[1, i] ** 2 + dv[2, i] ** 2)
        if not (v > 0.0 and v >= least[i] and ready[i]):
            continue
        along = np.sqrt((s1 * v) ** 2 + s2 * s2) * g[0, i]
        d0, d1, d2 = dv[0, i] / v, dv[1, i] / v, dv[2, i] / v
        part = g[1, i] * d0 + g[2, i] * d1 + g[3, i] * d2
        total = 0.0
        for c in range(3):
            d = dv[c, i] / v
            made = dv[c, i] + along * d + s3 * v * (g[1 + c, i] - part * d)
            total += made * made
            X[3 + c, i] += made
            E[3 + c, i] += dv[c, i]
            C[6 * c + 2, i] += ((s1 * v) ** 2 + s2 * s2) * d * d + (s3 * v) ** 2 * (1.0 - d * d)
        spent[i] = np.sqrt(total)
        if counted:
            counts[i] += 1


@kernel
def advance(X, E, known, hidden, b, S, F, G, H, T, box, out, worst, square, moved):
    """Carry truth, estimate and slot over one step and look whether the node is in its box.

    X, E : (6, w);  known, hidden : (3, w) accelerations that the controller knows and does not [m/s2]
    b : (3, w) its estimate;  S : (3, w) slot's place, turned by T (3, 3)
    F (6, 6), G (6, 3), H (6, 3) : flow of the step, per constant acceleration, per slot's place
    box : half-width [m];  out : (w,) int, steps that end outside;  worst : (w,) largest |component| [m]
    square : (w,) sum of squared distances;  moved : (6, w) work space
    """
    lanes = X.shape[1]
    for which in range(2):
        Y = X if which == 0 else E
        extra = hidden if which == 0 else b
        for c in range(6):
            for i in range(lanes):
                total = 0.0
                for j in range(6):
                    total += F[c, j] * Y[j, i]
                for j in range(3):
                    total += G[c, j] * (known[j, i] + extra[j, i]) + H[c, j] * S[j, i]
                moved[c, i] = total
        for c in range(6):
            for i in range(lanes):
                Y[c, i] = moved[c, i]
    for i in range(lanes):
        a, b_, c_ = S[0, i], S[1, i], S[2, i]
        for c in range(3):
            S[c, i] = T[c, 0] * a + T[c, 1] * b_ + T[c, 2] * c_
        far = max(abs(X[0, i]), abs(X[1, i]), abs(X[2, i]))
        worst[i] = max(worst[i], far)
        square[i] += X[0, i] ** 2 + X[1, i] ** 2 + X[2, i] ** 2
        if far > box:
            out[i] += 1
