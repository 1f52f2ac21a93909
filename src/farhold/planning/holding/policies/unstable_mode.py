"""Null what grows: the component of the deviation along the direction that the flow amplifies most.

For nodes at the reference itself near L1 and L2, where the rest of the motion stays bounded by itself. The
direction is the leading singular vector of the flow over some e-folding times (Dunham and Roberts 2001 and the
Floquet mode approach of Simo et al. 1987, from memory).
"""

from __future__ import annotations

import numpy as np

from farhold.domain.epoch import DAY_S
from farhold.planning.holding.flow import Flow
from farhold.planning.holding.policy import Feedback, Policy

__all__ = ["POLICY"]

_AHEAD_S = 90.0 * DAY_S


def _ahead(cadence_s: float) -> tuple[float, ...]:
    """Look ahead far enough for growth to show."""
    return (max(_AHEAD_S, 2.0 * cadence_s),)


def _null_growth(flow: Flow) -> Feedback:
    """Least burn after which the growing component at the horizon vanishes."""
    span = np.linalg.norm(flow.state[-1, :3, 3:], 2) / np.linalg.norm(flow.state[-1, :3, :3], 2)
    scale = np.array([1.0, 1.0, 1.0, 1.0 / span, 1.0 / span, 1.0 / span])
    left, size, right = np.linalg.svd(flow.state[-1] / scale[:, None] * scale)
    grows = left[:, 0] / scale
    now = right[0] / scale
    lever = now[3:]
    burn = -lever / (lever @ lever)
    return Feedback(
        np.outer(burn, now)[None],
        np.outer(burn, grows @ flow.steady[-1] / size[0])[None],
        np.outer(burn, grows @ flow.slot[-1] / size[0])[None],
    )


POLICY = Policy("unstable-mode", "nulls the growing component of the deviation", _ahead, _null_growth)
