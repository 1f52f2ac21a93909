"""Burn only when the path would leave the box before the next decision; then for the longest stay inside.

Of the horizons that bring the node back to its slot, the longest whose whole path stays inside is chosen: under
a steady pull the node is thrown against it across the box, in quiet it is let drift. Between burns the pull is
not fought, so with a wide box the continuous price can be beaten.
"""

from __future__ import annotations

from farhold.planning.holding.policy import Policy, towards_slot

__all__ = ["POLICY"]

_MULTIPLES = (1.0, 2.0, 4.0, 8.0, 16.0)


def _doubling(cadence_s: float) -> tuple[float, ...]:
    """Look ahead by one, two, four, eight and sixteen decisions."""
    return tuple(cadence_s * factor for factor in _MULTIPLES)


POLICY = Policy(
    "box",
    "acts when the prediction leaves the box, then stays inside for longest",
    _doubling,
    towards_slot,
    boxed=True,
)
