"""Turning standard normal numbers into deviations with given covariances."""

from farhold.kernels.jit import kernel

__all__ = ["spread"]


@kernel
def spread(mean, factor, normal, out):
    """Write out[s, i] = mean[i] + factor[i] normal[s, i] for all samples s and nodes i.

    mean : (n, 6);  factor : (n, 6, 6) lower triangular;  normal, out : (samples, n, 6), may be the same array
    """
    for s in range(normal.shape[0]):
        for i in range(normal.shape[1]):
            for c in range(5, -1, -1):
                total = mean[i, c]
                for j in range(c + 1):
                    total += factor[i, c, j] * normal[s, i, j]
                out[s, i, c] = total
