"""Make the weighted misses at some future points small, with a price on the burn (Howell and Pernicka 1993).

Source: K. C. Howell, H. J. Pernicka, Station-keeping method for libration point trajectories, JGCD 16 (1993)
151 (from memory): a quadratic cost of misses at future times and of the burn.
"""

from __future__ import annotations

import numpy as np

from farhold.planning.holding.flow import Flow
from farhold.planning.holding.policy import Feedback, Policy

__all__ = ["POLICY"]

_MULTIPLES = (1.0, 2.0, 3.0)
_PRICE = 0.02


def _points(cadence_s: float) -> tuple[float, ...]:
    """Look at the next three decisions."""
    return tuple(cadence_s * factor for factor in _MULTIPLES)


def _least_squares(flow: Flow) -> Feedback:
    """Feedback that minimises the squared misses at the points plus the price of the burn."""
    lever = flow.state[:, :3, 3:]
    weight = np.einsum("pji,pjk->ik", lever, lever)
    weight += _PRICE * np.trace(weight) / 3.0 * np.eye(3)

    def answer(
        part: np.ndarray[tuple[int, ...], np.dtype[np.float64]],
    ) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
        return -np.linalg.solve(weight, np.einsum("pji,pjk->ik", lever, part[:, :3]))[None]

    return Feedback(answer(flow.state), answer(flow.steady), answer(flow.slot))


POLICY = Policy("target-point", "makes weighted misses at the next three decisions small", _points, _least_squares)
