"""What an accuracy allows, and the probe nodes on which schemes and steps are chosen."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S
from farhold.errors import DomainError, Fault

__all__ = [
    "ACCURACIES",
    "LANES",
    "LONGEST_S",
    "NEAR",
    "SETTLED",
    "SHORTEST_S",
    "allowed_m",
    "known",
    "probe_states",
    "rounded",
]

LANES = 128
ACCURACIES = {"draft": 1.0, "default": 1e-3, "fine": 1e-5}
# nodes nearer to a body than this share of the reference's distance are followed one by one
NEAR = 0.5
# relative error below which rounding is suspected
SETTLED = 1e-6
LONGEST_S = 128.0 * DAY_S
SHORTEST_S = 3600.0
_REACH_AT_1000_KM_M = 4e7


def probe_states(radius_m: float, rate_rad_s: float) -> NDArray[np.float64]:
    """Deviations (12, 6) that stand for all within `radius_m`: each axis both ways, at rest and moving."""
    axes = np.concatenate([np.eye(3), -np.eye(3)])
    states = np.zeros((12, 6))
    states[:6, :3] = axes * radius_m
    states[6:, :3] = axes * radius_m / math.sqrt(2.0)
    states[6:, 3:] = np.roll(axes, 1, axis=1) * (radius_m * rate_rad_s / math.sqrt(2.0))
    return states


def allowed_m(accuracy: str, size_m: NDArray[np.float64]) -> NDArray[np.float64]:
    """Error allowed to nodes that end at distances `size_m` [m]."""
    return ACCURACIES[accuracy] * np.maximum(1.0, size_m / _REACH_AT_1000_KM_M)


def known(accuracy: str) -> str:
    """Return `accuracy`; DomainError where it is none of ACCURACIES."""
    if accuracy not in ACCURACIES:
        raise DomainError(Fault("accuracy", f"got {accuracy!r}", " ".join(ACCURACIES)))
    return accuracy


def rounded(radius_m: float, span_s: float, accuracy: str) -> tuple[float, float]:
    """Round radius and span up to the steps in which the choice is made; refuse an unknown accuracy."""
    known(accuracy)
    radius = 2.0 ** math.ceil(math.log2(max(radius_m, 1e3)))
    return radius, math.copysign(max(1, math.ceil(abs(span_s) / DAY_S)) * DAY_S, span_s)
