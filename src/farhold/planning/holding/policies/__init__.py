"""ROOM of the holding policies: one file per policy and one line in `POLICIES` adds one."""

from __future__ import annotations

from farhold.planning.holding.policies import box, revisit, target_point, unstable_mode
from farhold.planning.holding.policy import Policy

__all__ = ["POLICIES"]

POLICIES: dict[str, Policy] = {
    "box": box.POLICY,
    "revisit": revisit.POLICY,
    "target-point": target_point.POLICY,
    "unstable-mode": unstable_mode.POLICY,
}
