"""Streaming histograms: quantiles of any number of values in fixed memory, with a stated error.

Logarithmic bins split every octave into 2^m equal parts, so a value's bin is read from the bits of its
floating-point number: whole numbers only, exact and the same on every machine.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from farhold.errors import DomainError, Fault

__all__ = ["Bracket", "Histogram"]

_MANTISSA = 52
_BLOCK = 1 << 16


@dataclass(frozen=True, slots=True)
class Bracket:
    """A quantile: it lies between `low` and `high`, and `value` is their middle."""

    value: float
    low: float
    high: float


class Histogram:
    """Counts of values in fixed bins, with the exact least and greatest value.

    Values outside the bins are counted below or above them; a quantile that falls there is bracketed by the
    exact extreme. Made by :meth:`log` or :meth:`linear`.

    Attributes
    ----------
    edges : (bins + 1,) edges of the bins; a bin holds its lower edge
    counts : (bins + 2,) how many values lie below the first edge, in each bin, at or above the last edge
    minimum, maximum : exact; infinities of the wrong sign while there is no value
    """

    def __init__(self, edges: np.ndarray, shift: int) -> None:
        self.edges = edges
        self._shift = shift
        self.counts = np.zeros(edges.size + 1, dtype=np.int64)
        self.minimum = math.inf
        self.maximum = -math.inf

    @classmethod
    def log(cls, low: float, high: float, resolution: float = 0.002) -> Histogram:
        """Make logarithmic bins from `low` to at least `high`, each at most `resolution` of its value wide.

        Raises
        ------
        DomainError
            Not 0 < low < high, or the resolution is not between 1e-6 and 1.
        """
        if not (0.0 < low < high < math.inf):
            raise DomainError(Fault("histogram", f"got bins from {low!r} to {high!r}", "0 < low < high"))
        if not (1e-6 <= resolution <= 1.0):
            raise DomainError(Fault("histogram", f"got resolution {resolution!r}", "1e-6 to 1"))
        shift = _MANTISSA - max(0, math.ceil(-math.log2(resolution)))
        first, last = (int(np.float64(edge).view(np.int64)) >> shift for edge in (low, high))
        keys = np.arange(first, last + 2, dtype=np.int64)
        return cls((keys << shift).view(np.float64), shift)

    @classmethod
    def linear(cls, low: float, high: float, bins: int) -> Histogram:
        """Make `bins` equal bins from `low` to `high`.

        Raises
        ------
        DomainError
            Not low < high, or fewer than one bin.
        """
        if not (-math.inf < low < high < math.inf) or not bins >= 1:
            raise DomainError(
                Fault("histogram", f"got {bins!r} bins from {low!r} to {high!r}", "low < high, 1 bin or more")
            )
        return cls(np.linspace(low, high, bins + 1), -1)

    @property
    def count(self) -> int:
        """How many values were added."""
        return int(self.counts.sum())

    def add(self, values: Any) -> None:
        """Count `values`, of any shape.

        Raises
        ------
        DomainError
            A value is not a number; nothing is counted.
        """
        flat = np.asarray(values, dtype=np.float64).reshape(-1)
        if flat.size == 0:
            return
        low, high = float(flat.min()), float(flat.max())
        if math.isnan(low):
            raise DomainError(Fault("histogram", "got a value that is not a number", "numbers"))
        # blocks that stay in the processor's cache are several times as fast
        for begin in range(0, flat.size, _BLOCK):
            places = self._places(flat[begin : begin + _BLOCK])
            self.counts += np.bincount(places, minlength=self.counts.size)
        self.minimum, self.maximum = min(self.minimum, low), max(self.maximum, high)

    def _places(self, values: np.ndarray) -> np.ndarray:
        if self._shift < 0:
            return self._linear_places(values)
        # negative numbers have negative bits, so they come out below the first bin
        first = int(self.edges[:1].view(np.int64)[0]) >> self._shift
        places = values.view(np.int64) >> self._shift
        places -= first - 1
        return np.clip(places, 0, self.edges.size, out=places)

    def _linear_places(self, values: np.ndarray) -> np.ndarray:
        first, last, bins = self.edges[0], self.edges[-1], self.edges.size - 1
        with np.errstate(over="ignore"):
            guess = (values - first) * (bins / (last - first))
        places: np.ndarray = np.floor(np.clip(guess, -1.0, bins)).astype(np.int64) + 1
        # the guess may be a rounding off; the edges decide
        bounds = np.concatenate([[-np.inf], self.edges, [np.inf]])
        places += (values >= bounds[places + 1]) & (places <= bins)
        places -= values < bounds[places]
        return places

    def merge(self, other: Histogram) -> None:
        """Add the counts of another histogram of the same bins; the order of merging does not matter.

        Raises
        ------
        DomainError
            The bins differ.
        """
        self._include(other.edges, other.counts, other.minimum, other.maximum)

    def _include(self, edges: np.ndarray, counts: np.ndarray, minimum: float, maximum: float) -> None:
        if not np.array_equal(edges, self.edges):
            raise DomainError(Fault("histogram", "the bins differ", "the same bins"))
        self.counts += counts
        self.minimum, self.maximum = min(self.minimum, minimum), max(self.maximum, maximum)

    def to_arrays(self, name: str) -> dict[str, np.ndarray]:
        """Give the histogram as arrays of a chunk, each named after `name`."""
        return {
            f"{name}.edges": self.edges,
            f"{name}.counts": self.counts,
            f"{name}.extremes": np.array([self.minimum, self.maximum]),
        }

    def add_arrays(self, chunk: Mapping[str, Any], name: str) -> None:
        """Merge the histogram that a chunk holds under `name`; see :meth:`to_arrays`."""
        minimum, maximum = (float(value) for value in chunk[f"{name}.extremes"])
        self._include(chunk[f"{name}.edges"], chunk[f"{name}.counts"], minimum, maximum)

    def at_rank(self, rank: int) -> Bracket:
        """Bracket the value of this rank in rising order; 1 is the least.

        Raises
        ------
        DomainError
            There is no such rank.
        """
        if not 1 <= rank <= self.count:
            raise DomainError(Fault("histogram", f"got rank {rank!r}", f"1 to {self.count}"))
        if rank in (1, self.count):
            value = self.minimum if rank == 1 else self.maximum
            return Bracket(value, value, value)
        place = int(np.searchsorted(np.cumsum(self.counts), rank, side="left"))
        low = -math.inf if place == 0 else float(self.edges[place - 1])
        high = math.inf if place == self.edges.size else float(self.edges[place])
        low, high = max(low, self.minimum), min(high, self.maximum)
        return Bracket(0.5 * (low + high), low, high)

    def quantile(self, p: float) -> Bracket:
        """Bracket the `p` quantile: the least value that at least the share `p` of all do not exceed.

        Raises
        ------
        DomainError
            No value was added, or `p` is not between 0 and 1.
        """
        if not 0.0 <= p <= 1.0:
            raise DomainError(Fault("quantile", f"got {p!r}", "0 to 1"))
        if self.count == 0:
            raise DomainError(Fault("quantile", "no value was added", "one value or more"))
        # the product of a share and a count may lie a rounding above the whole number that it is
        return self.at_rank(max(1, math.ceil(p * self.count * (1.0 - 1e-15))))
