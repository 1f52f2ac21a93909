"""At every decision, aim to be in the slot at the next."""

from __future__ import annotations

from farhold.planning.holding.policy import Policy, towards_slot

__all__ = ["POLICY"]


def _next_decision(cadence_s: float) -> tuple[float, ...]:
    """Look ahead to the next decision."""
    return (cadence_s,)


POLICY = Policy("revisit", "aims for the slot at the next decision", _next_decision, towards_slot)
