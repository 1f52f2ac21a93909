"""The case file: its schema, its lines, its tables, and what they resolve to."""

from __future__ import annotations

from farhold.study.case.record import (
    Case,
    Deploy,
    Errors,
    Hold,
    Holding,
    Lose,
    Miss,
    NodeTable,
    Phase,
    Rates,
    ReferenceSpec,
    Regroup,
    Reshape,
    Retire,
    Safety,
    Trim,
)
from farhold.study.case.resolve import load

__all__ = [
    "Case",
    "Deploy",
    "Errors",
    "Hold",
    "Holding",
    "Lose",
    "Miss",
    "NodeTable",
    "Phase",
    "Rates",
    "ReferenceSpec",
    "Regroup",
    "Reshape",
    "Retire",
    "Safety",
    "Trim",
    "load",
]
