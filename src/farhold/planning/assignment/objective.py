"""What an objective is: how a price in m/s weighs for a node, and whether the sum or the worst counts."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Objective", "Weigh"]

Weigh = Callable[[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]], NDArray[np.float64]]


@dataclass(frozen=True, slots=True)
class Objective:
    """An objective of the pairing.

    Attributes
    ----------
    name, label : as the user writes it; one line for reports
    unit : unit of its value
    weigh : cost (n, m) from dv (n, m) [m/s], masses (n, 1) [kg] and specific impulses (n, 1) [s]; rising with
        dv for each node
    worst : whether the dearest node is made cheapest first, and the sum is least among those pairings
    """

    name: str
    label: str
    unit: str
    weigh: Weigh
    worst: bool = False
