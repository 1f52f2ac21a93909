"""Estimates of many nodes: a Kalman filter of place, rate and unknown acceleration, gains axis by axis.

The estimate moves with the full linear flow; only the covariance, which sets the gains, treats the axes apart
and as free of tidal and Coriolis terms. These turn errors by n dt between two fixes, some percent of a radian.
Rows of a covariance C (18, w): for each axis rr, rv, vv, ra, va, aa.
"""

from farhold.kernels.jit import kernel

__all__ = ["grow", "measure", "replace"]


@kernel
def measure(X, E, b, C, seen, noise, r2, v2):
    """Take a fix of place and rate of each lane that is `seen`, in turn for the three axes.

    X, E : (6, w) truth and estimate;  b : (3, w) estimated acceleration;  C : (18, w) covariances
    seen : (w,) bool;  noise : (6, w) errors of the fix [m], [m/s];  r2, v2 : variances of the fix
    Source: Kalman 1960, by scalar updates (Bierman 1977, Factorization Methods, from memory).
    """
    for c in range(3):
        k = 6 * c
        for i in range(X.shape[1]):
            rr, rv, vv, ra, va, aa = C[k, i], C[k + 1, i], C[k + 2, i], C[k + 3, i], C[k + 4, i], C[k + 5, i]
            # a lane that is not seen gets gains of zero, so that all lanes take the same way
            on = 1.0 if seen[i] else 0.0
            s = rr + r2
            f = on / s if s > 0.0 else 0.0
            g0, g1, g2 = rr * f, rv * f, ra * f
            miss = X[c, i] + noise[c, i] - E[c, i]
            place, rate, pull = E[c, i] + g0 * miss, E[c + 3, i] + g1 * miss, b[c, i] + g2 * miss
            rr, rv, vv, ra, va, aa = (
                rr - g0 * rr,
                rv - g0 * rv,
                vv - g1 * rv,
                ra - g0 * ra,
                va - g1 * ra,
                aa - g2 * ra,
            )
            s = vv + v2
            f = on / s if s > 0.0 else 0.0
            g0, g1, g2 = rv * f, vv * f, va * f
            miss = X[c + 3, i] + noise[c + 3, i] - rate
            E[c, i], E[c + 3, i], b[c, i] = place + g0 * miss, rate + g1 * miss, pull + g2 * miss
            C[k, i], C[k + 1, i], C[k + 2, i] = rr - g0 * rv, rv - g0 * vv, vv - g1 * vv
            C[k + 3, i], C[k + 4, i], C[k + 5, i] = ra - g0 * va, va - g1 * va, aa - g2 * va


@kernel
def replace(X, E, seen, noise):
    """Take the fix itself for the estimate: no filter.  Arguments as in `measure`."""
    for i in range(X.shape[1]):
        if seen[i]:
            for c in range(6):
                E[c, i] = X[c, i] + noise[c, i]


@kernel
def grow(C, dt, q):
    """Carry covariances over `dt` [s]; `q` is the growth of the acceleration's variance [m2/s4 per s]."""
    h = 0.5 * dt * dt
    for i in range(C.shape[1]):
        for c in range(3):
            k = 6 * c
            rr, rv, vv, ra, va, aa = C[k, i], C[k + 1, i], C[k + 2, i], C[k + 3, i], C[k + 4, i], C[k + 5, i]
            C[k, i] = rr + 2.0 * dt * rv + dt * dt * vv + 2.0 * h * ra + 2.0 * dt * h * va + h * h * aa
            C[k + 1, i] = rv + dt * vv + h * va + dt * (ra + dt * va + h * aa)
            C[k + 2, i] = vv + 2.0 * dt * va + dt * dt * aa
            C[k + 3, i] = ra + dt * va + h * aa
            C[k + 4, i] = va + dt * aa
            C[k + 5, i] = aa + q * dt
