"""Uncertain states on the linear map: covariances carried, summed over impulses, and drawn from."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.kernels.motion.sampling import spread

__all__ = ["carried_covariance", "draw", "factor_of"]


def carried_covariance(
    reference: Reference,
    initial: ArrayLike,
    from_s: float,
    to_s: float,
    *,
    impulse_s: ArrayLike = (),
    impulse_covariance: ArrayLike | None = None,
    pressure_sigma: ArrayLike = 0.0,
    acceleration_sigma_m_s2: float = 0.0,
) -> NDArray[np.float64]:
    """Covariance of deviations at `to_s`, by the linear map.

    Independent errors add up: of the state at `from_s`, of each impulse's execution, of each node's pressure,
    and of an unknown constant acceleration in rotating axes.

    Parameters
    ----------
    initial : (6, 6) or (n, 6, 6) covariance at `from_s`, rotating axes [m2, m2/s, m2/s2]
    impulse_s : (k,) times within the span
    impulse_covariance : (k, 3, 3) or (n, k, 3, 3) covariance of each impulse [m2/s2]
    pressure_sigma : one or (n,) standard deviation of beta
    acceleration_sigma_m_s2 : standard deviation of the acceleration on each axis

    Returns
    -------
    (n, 6, 6); n is 1 where nothing is given per node

    Raises
    ------
    DomainError
        Impulse times outside the span, or shapes that do not fit.
    """
    start = np.asarray(initial, dtype=float)
    if start.ndim not in (2, 3) or start.shape[-2:] != (6, 6):
        raise DomainError(Fault("initial", f"shape {start.shape}", "(6, 6) or (n, 6, 6)"))
    total = np.array(start if start.ndim == 3 else start[None], dtype=float)
    phi = reference.transition(from_s, to_s)
    total = phi @ total @ phi.T
    times = np.atleast_1d(np.asarray(impulse_s, dtype=float))
    if times.size:
        if impulse_covariance is None:
            raise DomainError(Fault("impulse_covariance", "none given", f"({times.size}, 3, 3)"))
        errors = np.asarray(impulse_covariance, dtype=float)
        if errors.shape[-3:] != (times.size, 3, 3):
            raise DomainError(
                Fault(
                    "impulse_covariance",
                    f"shape {errors.shape}",
                    f"(..., {times.size}, 3, 3)",
                )
            )
        if not (times.min() >= min(from_s, to_s) and times.max() <= max(from_s, to_s)):
            raise DomainError(
                Fault(
                    "impulse_s",
                    f"{times.min():g} to {times.max():g} s",
                    "times within the span",
                )
            )
        _same_nodes(total, errors, "impulse_covariance", 4)
        for k, moment in enumerate(times):
            push = reference.transition(float(moment), to_s)[:, 3:]
            total = total + push @ errors[..., k, :, :] @ push.T
    sigma = np.atleast_1d(np.asarray(pressure_sigma, dtype=float))
    _same_nodes(total, sigma, "pressure_sigma", 1)
    if sigma.any():
        response = reference.pressure_response(from_s, to_s)
        total = total + sigma[:, None, None] ** 2 * np.outer(response, response)
    if acceleration_sigma_m_s2:
        lever = _acceleration_response(reference, from_s, to_s)
        total = total + acceleration_sigma_m_s2**2 * (lever @ lever.T)
    return np.asarray(total)


def _same_nodes(total: NDArray[np.float64], given: NDArray[np.float64], name: str, dimensions: int) -> None:
    """Refuse what is given for another number of nodes than `total` (n, 6, 6), or has too many dimensions."""
    n = given.shape[0] if given.ndim == dimensions else 1
    if given.ndim > dimensions or (len(total) != n and 1 not in (len(total), n)):
        raise DomainError(Fault(name, f"shape {given.shape}", f"for all, or for each of {len(total)} nodes"))


def _acceleration_response(reference: Reference, from_s: float, to_s: float) -> NDArray[np.float64]:
    """Deviation (6, 3) at `to_s` per unit of constant acceleration since `from_s`, by Gauss-Legendre rules."""
    panels = max(1, int(np.ceil(abs(to_s - from_s) / (10.0 * 86400.0))))
    x, w = np.polynomial.legendre.leggauss(8)
    half = 0.5 * (to_s - from_s) / panels
    total = np.zeros((6, 3))
    for panel in range(panels):
        middle = from_s + half * (2 * panel + 1)
        for node, weight in zip(x, w, strict=True):
            total += weight * half * reference.transition(middle + half * node, to_s)[:, 3:]
    return total


def factor_of(covariance: ArrayLike) -> NDArray[np.float64]:
    """Lower triangular factors (n, 6, 6) of covariances (n, 6, 6) or one (6, 6), also of singular ones.

    Raises
    ------
    DomainError
        Another shape, a number that is not finite, or a direction of negative variance beyond rounding.
    """
    given = np.asarray(covariance, dtype=float)
    given = given[None] if given.ndim == 2 else given
    if given.ndim != 3 or given.shape[1:] != (6, 6):
        raise DomainError(Fault("covariance", f"shape {given.shape}", "(n, 6, 6)"))
    if not np.isfinite(given).all():
        raise DomainError(Fault("covariance", "a number that is not finite", "finite numbers"))
    variance = np.einsum("nii->ni", given)
    if variance.min(initial=0.0) < 0.0:
        raise DomainError(Fault("covariance", f"a variance of {variance.min():.3g}", "no negative variance"))
    scale = np.sqrt(variance)
    still = (scale == 0.0)[:, :, None] | (scale == 0.0)[:, None, :]
    if given[still].any():
        raise DomainError(Fault("covariance", "a variance of 0 that covaries", "no negative variance"))
    unit = np.divide(
        given,
        scale[:, :, None] * scale[:, None, :],
        out=np.zeros_like(given),
        where=~still,
    )
    values, vectors = np.linalg.eigh(unit)
    if values.min(initial=0.0) < -1e-9:
        raise DomainError(
            Fault(
                "covariance",
                f"an eigenvalue of {values.min():.3g}",
                "no negative variance",
            )
        )
    root = vectors * np.sqrt(np.maximum(values, 0.0))[:, None, :]
    # the triangle of root' by orthogonal reduction: root root' = R' R
    triangle = np.linalg.qr(np.swapaxes(root, 1, 2), mode="r")
    lower = np.swapaxes(triangle, 1, 2) * scale[:, :, None]
    return np.ascontiguousarray(lower)


def draw(
    rng: np.random.Generator,
    mean: NDArray[np.float64],
    covariance: NDArray[np.float64],
    samples: int,
    *,
    most: int = 1 << 20,
) -> Iterator[NDArray[np.float64]]:
    """Draw deviations in batches: yields (s, n, 6) until `samples` are drawn, six normal numbers per node each.

    Every batch is written over the one before: copy what is to be kept.

    Parameters
    ----------
    rng : the generator to draw from
    mean : (n, 6);  covariance : (n, 6, 6) or (1, 6, 6)
    samples : number of samples;  most : numbers of nodes times samples in one batch at most
    """
    n = len(mean)
    factor = np.ascontiguousarray(np.broadcast_to(factor_of(covariance), (n, 6, 6)))
    batch = max(1, most // max(n, 1))
    buffer = np.empty((min(batch, samples), n, 6))
    for first in range(0, samples, batch):
        normal = buffer[: min(batch, samples - first)]
        rng.standard_normal(out=normal)
        spread(np.ascontiguousarray(mean), factor, normal, normal)
        yield normal
