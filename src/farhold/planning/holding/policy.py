"""What a holding policy is: the horizons it looks at, and the feedback it makes of the flow to them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.planning.holding.flow import Flow

__all__ = ["Feedback", "Policy", "towards_slot"]


@dataclass(frozen=True, slots=True, eq=False)
class Feedback:
    """Burns dv = state E + steady a + slot S for each of h horizons: E the estimate, a accelerations, S the slot.

    Attributes
    ----------
    state : (h, 3, 6);  steady, slot : (h, 3, 3)
    """

    state: NDArray[np.float64]
    steady: NDArray[np.float64]
    slot: NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Policy:
    """A holding policy.

    Attributes
    ----------
    name, label : as the user writes it; one line for reports
    horizons : from the time between decisions [s] to the spans looked ahead to [s], rising
    feedback : from the flow to these spans to the burns
    boxed : whether it burns only when the path would leave the box, and then for the longest stay inside
    """

    name: str
    label: str
    horizons: Callable[[float], tuple[float, ...]]
    feedback: Callable[[Flow], Feedback]
    boxed: bool = False


def towards_slot(flow: Flow) -> Feedback:
    """Feedback that brings the node to its slot at the end of each horizon."""
    inverse = np.linalg.inv(flow.state[:, :3, 3:])
    state = np.concatenate([-inverse @ flow.state[:, :3, :3], np.tile(-np.eye(3), (len(inverse), 1, 1))], axis=2)
    return Feedback(
        np.ascontiguousarray(state),
        np.ascontiguousarray(-inverse @ flow.steady[:, :3]),
        np.ascontiguousarray(-inverse @ flow.slot[:, :3]),
    )
