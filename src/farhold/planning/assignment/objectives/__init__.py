"""ROOM of the objectives: one file per objective and one line in `OBJECTIVES` adds one."""

from __future__ import annotations

from farhold.planning.assignment.objective import Objective
from farhold.planning.assignment.objectives import least_propellant, least_total, least_worst

__all__ = ["OBJECTIVES"]

OBJECTIVES: dict[str, Objective] = {
    "least-total": least_total.OBJECTIVE,
    "least-propellant": least_propellant.OBJECTIVE,
    "least-worst": least_worst.OBJECTIVE,
}
