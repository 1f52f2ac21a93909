"""Circular restricted three-body problem with radiation pressure, in the barycentric rotating frame."""

from farhold.kernels.jit import kernel

__all__ = ["derivative"]


@kernel
def derivative(y, mu, beta, dy):
    """Write the time derivative of the state, and of its transition matrix if it is there, into `dy`.

    y : (6,) or (42,) nondimensional state (x, y, z, vx, vy, vz) [and the 6 x 6 transition matrix by rows]
    mu : float, mass ratio, secondary at (1 - mu, 0, 0);  beta : float, pressure over gravity of the primary
    dy : like y

    The secondary's term is left out when mu is 0, where its place would divide nothing by nothing.
    Source: Szebehely, Theory of Orbits, 1967, ch. 1; pressure as in Schuerman 1980, ApJ 238, 337.
    Undefined at the centre of a primary.
    """
    x, yy, z = y[0], y[1], y[2]
    x1 = x + mu
    x2 = x1 - 1.0
    s = yy * yy + z * z
    r1 = x1 * x1 + s
    p1 = (1.0 - mu) * (1.0 - beta) / (r1 * r1**0.5)
    r2 = x2 * x2 + s
    p2 = 0.0
    if mu != 0.0:
        p2 = mu / (r2 * r2**0.5)
    dy[0] = y[3]
    dy[1] = y[4]
    dy[2] = y[5]
    dy[3] = 2.0 * y[4] + x - p1 * x1 - p2 * x2
    dy[4] = -2.0 * y[3] + yy - (p1 + p2) * yy
    dy[5] = -(p1 + p2) * z
    if y.size == 6:
        return
    a = 3.0 * p1 / r1
    b = 0.0
    if mu != 0.0:
        b = 3.0 * p2 / r2
    p = p1 + p2
    gxx = 1.0 - p + a * x1 * x1 + b * x2 * x2
    gyy = 1.0 - p + (a + b) * yy * yy
    gzz = -p + (a + b) * z * z
    gxy = (a * x1 + b * x2) * yy
    gxz = (a * x1 + b * x2) * z
    gyz = (a + b) * yy * z
    for j in range(6):
        u, v, w = y[6 + j], y[12 + j], y[18 + j]
        du, dv = y[24 + j], y[30 + j]
        dy[6 + j] = du
        dy[12 + j] = dv
        dy[18 + j] = y[36 + j]
        dy[24 + j] = gxx * u + gxy * v + gxz * w + 2.0 * dv
        dy[30 + j] = gxy * u + gyy * v + gyz * w - 2.0 * du
        dy[36 + j] = gxz * u + gyz * v + gzz * w
