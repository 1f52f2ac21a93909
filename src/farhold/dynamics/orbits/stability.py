"""Multipliers of a closed orbit from its monodromy matrix, without splitting those that are 1."""

from __future__ import annotations

import cmath

import numpy as np

from farhold.dynamics.orbits.taylor import Exact

__all__ = ["largest_multiplier"]

_ON_THE_CIRCLE = 1e-12


def largest_multiplier(monodromy: Exact) -> float:
    """Size of the largest multiplier of a (6, 6) monodromy matrix, 1 where all lie on the unit circle.

    One pair is 1; the sums s = l + 1/l of the other two pairs follow from the traces of the matrix and of its
    square (Broucke 1969, AIAA Journal 7, 1003), which hold the digits that an eigenvalue solver loses there.
    """
    both = np.trace(monodromy) - 2
    squares = np.trace(monodromy @ monodromy) + 2
    inner = complex(2 * squares - both * both)
    largest = 1.0
    for sign in (1.0, -1.0):
        s = 0.5 * (complex(both) + sign * cmath.sqrt(inner))
        if abs(s.imag) < _ON_THE_CIRCLE and abs(s.real) <= 2.0 + _ON_THE_CIRCLE:
            continue
        root = cmath.sqrt(s * s - 4.0)
        largest = max(largest, abs(s + root) / 2.0, abs(s - root) / 2.0)
    return largest
