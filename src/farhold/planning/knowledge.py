"""The knowledge horizon: how long positions stay known once measurement stops."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.dispersion import carried_covariance
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault

__all__ = ["horizon_days", "rms_m"]


def rms_m(
    reference: Reference,
    after_s: float,
    *,
    position_m: float,
    velocity_m_s: float,
    acceleration_m_s2: float = 0.0,
    start_s: float = 0.0,
) -> float:
    """3-D rms position error `after_s` seconds after a fix of the given 1-sigma errors per axis [m]."""
    initial = np.diag([position_m**2] * 3 + [velocity_m_s**2] * 3)
    carried: NDArray[np.float64] = carried_covariance(
        reference, initial, start_s, start_s + after_s, acceleration_sigma_m_s2=acceleration_m_s2
    )[0]
    return math.sqrt(float(np.trace(carried[:3, :3])))


def horizon_days(
    reference: Reference,
    *,
    position_m: float,
    velocity_m_s: float,
    acceleration_m_s2: float = 0.0,
    asked_m: float = 10.0,
    start_s: float = 0.0,
    longest_days: float = 3652.5,
) -> float | None:
    """Days until the 3-D rms position error first exceeds `asked_m`.

    None if that is not within `longest_days`, nor within the span that the reference is known for.

    Parameters
    ----------
    position_m, velocity_m_s : 1-sigma errors per axis of the last fix
    acceleration_m_s2 : 1-sigma unmodelled constant acceleration per axis

    Raises
    ------
    DomainError
        A negative or not finite error, or an asked error that is not above 0.
    """
    for name, value in (("position", position_m), ("velocity", velocity_m_s), ("acceleration", acceleration_m_s2)):
        if not (value >= 0.0 and math.isfinite(value)):
            raise DomainError(Fault(f"knowledge.{name}", f"got {value!r}", "0 or above, finite"))
    if not asked_m > 0.0:
        raise DomainError(Fault("knowledge.asked_m", f"got {asked_m!r}", "above 0 m"))

    def beyond(after_s: float) -> float:
        return (
            rms_m(
                reference,
                after_s,
                position_m=position_m,
                velocity_m_s=velocity_m_s,
                acceleration_m_s2=acceleration_m_s2,
                start_s=start_s,
            )
            - asked_m
        )

    if beyond(0.0) > 0.0:
        return 0.0
    longest_s = longest_days * DAY_S
    if reference.span_s is not None:
        longest_s = min(longest_s, reference.span_s[1] - start_s)
    step = 0.05 * DAY_S
    before = 0.0
    while before < longest_s:
        after = min(before + step, longest_s)
        if beyond(after) > 0.0:
            return float(brentq(beyond, before, after, xtol=1.0)) / DAY_S
        before = after
        step = min(1.3 * step, YEAR_S / 50.0)
    return None
