"""Chunks of the drift study: flights of the whole swarm, and what they add up to."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from farhold.domain.epoch import DAY_S
from farhold.dynamics.fast import fly_fast
from farhold.dynamics.propagate import fly
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.pool import run_blocks
from farhold.study.campaign import Chunk, chunk_rng
from farhold.study.campaign.histogram import Histogram

__all__ = ["AXES", "DriftPayload", "DriftSums", "compute"]

AXES = ("size", "r", "t", "n")
_LOW_M, _HIGH_M, _RESOLUTION = 1e-2, 1e12, 0.01
_BASELINE_LOW_M, _BASELINE_HIGH_M, _BASELINE_RESOLUTION = 1.0, 1e12, 0.05
_LEAVING_PARTS = 1000
_ORDER = 2


@dataclass(frozen=True, slots=True, eq=False)
class DriftPayload:
    """What a chunk needs: n nodes, m days looked at, all errors 1 sigma per axis.

    Attributes
    ----------
    states : (n, 6) at release, before errors;  places_m : (m, n, 3) where the slots are on the days looked at
    beta, excess_beta : (n,) pressure over gravity, in all and beyond the reference's
    tolerance_m : distance from the slot that counts as having left
    hubs : (n,) bool;  link_range_m : None where no hub has one
    pairs : (p, 2) nodes whose distance is followed
    lane : "full" or "fast"
    """

    reference: Reference
    days: NDArray[np.float64]
    states: NDArray[np.float64]
    places_m: NDArray[np.float64]
    beta: NDArray[np.float64]
    excess_beta: NDArray[np.float64]
    position_m: float
    velocity_m_s: float
    release_m_s: float
    area_spread: float
    tolerance_m: float
    hubs: NDArray[np.bool_]
    link_range_m: float | None
    pairs: NDArray[np.int64]
    samples: int
    pair_samples: int
    seed: int
    samples_per_chunk: int
    accuracy: str
    lane: str

    def fly(self, rng: np.random.Generator | None) -> tuple[NDArray[np.float64], float]:
        """Fly the swarm with errors drawn from `rng`, or as planned: places (n, m, 3), error of the maps [m].

        Raises
        ------
        DomainError
            The fast lane's maps do not hold for this swarm and span.
        """
        states, excess = self.states, self.excess_beta
        if rng is not None:
            states = states.copy()
            n = len(states)
            states[:, :3] += self.position_m * rng.standard_normal((n, 3))
            states[:, 3:] += np.hypot(self.velocity_m_s, self.release_m_s) * rng.standard_normal((n, 3))
            excess = excess + self.beta * self.area_spread * rng.standard_normal(n)
        times = self.days * DAY_S
        if self.lane == "full":
            flown = fly(self.reference, states, times, excess_beta=excess, accuracy=self.accuracy)
            return flown.state[:, :, :3], 0.0
        mapped = fly_fast(self.reference, states, times, order=_ORDER, excess_beta=excess)
        if not mapped.sound:
            raise DomainError(
                Fault(
                    "--lane",
                    "maps do not hold over this span: higher terms do not fade",
                    "full",
                    "use --lane full",
                )
            )
        return mapped.state[:, :, :3], max(mapped.error_m, mapped.checked_m)


def compute(payload: DriftPayload, index: int) -> Chunk:
    """Fly the samples of one chunk; chunk 0 flies the nominal swarm as well."""
    first = index * payload.samples_per_chunk
    last = min(first + payload.samples_per_chunk, payload.samples)
    n, m = len(payload.states), payload.days.size
    sums = _Gathered(n, m, payload)
    looks = [_Look.nothing()]
    if index == 0:
        looks.append(_looked_at(payload, payload.fly(None)[0]))
    off_m = 0.0
    for sample in range(first, last):
        place, error_m = payload.fly(chunk_rng(payload.seed, index, sample))
        off_m = max(off_m, error_m)
        sums.add(payload, place)
        if sample < payload.pair_samples:
            looks.append(_looked_at(payload, place))
    closest = min(looks, key=lambda look: look.closest_m)
    breaks = max(looks, key=lambda look: look.broken)
    return {
        **sums.arrays(),
        "off_m": np.array([off_m]),
        "closest_m": np.array([closest.closest_m]),
        "closest_pair": np.array(closest.pair, dtype=np.int64),
        "closest_day": np.array([closest.day]),
        "broken": np.array([breaks.broken], dtype=np.int64),
        "broken_day": np.array([min(look.broken_day for look in looks)]),
    }


class _Gathered:
    """Histograms and sums over the samples of one chunk."""

    def __init__(self, n: int, m: int, payload: DriftPayload) -> None:
        self.displaced = {f"{axis}_{day}": _displacements() for axis in AXES for day in range(m)}
        self.leaving = Histogram.linear(0.0, float(payload.days[-1]), _LEAVING_PARTS)
        self.before, self.after = _baselines(), _baselines()
        self.total, self.square, self.largest = np.zeros(n), np.zeros(n), np.zeros(n)
        self.lost = np.zeros(n, dtype=np.int64)
        self.changes = np.zeros(3)

    def add(self, payload: DriftPayload, place_m: NDArray[np.float64]) -> None:
        """Add one sample's places (n, m, 3)."""
        size = np.empty(place_m.shape[:2])

        def look(day: int) -> None:
            way = place_m[:, day] - payload.places_m[day]
            size[:, day] = np.sqrt(np.einsum("ij,ij->i", way, way))
            good = np.isfinite(size[:, day])
            self.displaced[f"size_{day}"].add(np.maximum(size[good, day], _LOW_M))
            for k, axis in enumerate("rtn"):
                self.displaced[f"{axis}_{day}"].add(np.maximum(np.abs(way[good, k]), _LOW_M))

        run_blocks(look, range(payload.days.size))
        lost = ~np.isfinite(size)
        self.lost += lost[:, -1]
        filled = np.where(lost, 0.0, size)
        self.total += filled[:, -1]
        self.square += filled[:, -1] ** 2
        self.largest = np.maximum(self.largest, filled.max(axis=1))
        left = _leaves(payload, np.where(lost, np.inf, size))
        self.leaving.add(left[left <= payload.days[-1]])
        self.changes[2] += int(np.sum(left > payload.days[-1]))
        if payload.pairs.size:
            a, b = payload.pairs.T
            before = np.linalg.norm(payload.states[a, :3] - payload.states[b, :3], axis=1)
            after = np.linalg.norm(place_m[a, -1] - place_m[b, -1], axis=1)
            sound = np.isfinite(after) & (before > 0.0)
            change = after[sound] / before[sound] - 1.0
            self.changes[0] += float(np.sum(change**2))
            self.changes[1] = max(self.changes[1], float(np.abs(change).max(initial=0.0)))
            self.before.add(before[sound])
            self.after.add(after[sound])

    def arrays(self) -> dict[str, NDArray[np.generic]]:
        """Give everything as arrays of a chunk."""
        arrays: dict[str, NDArray[np.generic]] = {
            "total_m": self.total,
            "square_m2": self.square,
            "largest_m": self.largest,
            "lost": self.lost,
            "changes": self.changes,
        }
        for name, histogram in self.displaced.items():
            arrays |= histogram.to_arrays(name)
        arrays |= self.leaving.to_arrays("leaving")
        arrays |= self.before.to_arrays("before")
        arrays |= self.after.to_arrays("after")
        return arrays


def _displacements() -> Histogram:
    return Histogram.log(_LOW_M, _HIGH_M, _RESOLUTION)


def _baselines() -> Histogram:
    return Histogram.log(_BASELINE_LOW_M, _BASELINE_HIGH_M, _BASELINE_RESOLUTION)


def _leaves(payload: DriftPayload, size_m: NDArray[np.float64]) -> NDArray[np.float64]:
    """Day on which each node (n,) is first farther from its slot than the tolerance; inf: never.

    Between the days looked at the distance is taken to grow as a power of time.
    """
    days, tolerance = payload.days, payload.tolerance_m
    out = size_m > tolerance
    first = np.argmax(out, axis=1)
    some = out.any(axis=1)
    rows = np.arange(len(size_m))
    at = size_m[rows, first]
    before = np.where(first > 0, size_m[rows, np.maximum(first - 1, 0)], 0.0)
    start = np.where(first > 0, days[np.maximum(first - 1, 0)], 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        power = np.log(tolerance / before) / np.log(at / before)
        between = start * (days[first] / start) ** power
        straight = start + (days[first] - start) * (tolerance - before) / (at - before)
    when = np.where((first > 0) & (before > 0.0) & np.isfinite(between), between, straight)
    when = np.where(np.isfinite(when), when, days[first])
    return np.where(some, np.clip(when, start, days[first]), np.inf)


@dataclass(frozen=True, slots=True)
class _Look:
    """What was seen of distances and links in one flight."""

    closest_m: float
    pair: tuple[int, int]
    day: float
    broken: int
    broken_day: float

    @classmethod
    def nothing(cls) -> _Look:
        """Nothing was seen."""
        return cls(np.inf, (-1, -1), np.nan, -1, np.inf)


def _looked_at(payload: DriftPayload, place_m: NDArray[np.float64]) -> _Look:
    """Look at the closest pair and at members out of range of every hub, on the days looked at."""
    closest, pair, day = np.inf, (-1, -1), np.nan
    broken = np.zeros(len(place_m), dtype=bool)
    broken_day = np.inf
    members = np.flatnonzero(~payload.hubs)
    for k, now in enumerate(payload.days):
        there = np.flatnonzero(np.isfinite(place_m[:, k]).all(axis=1))
        if there.size > 1:
            found = cKDTree(place_m[there, k]).query(place_m[there, k], k=2)
            distance, other = np.asarray(found[0])[:, 1], np.asarray(found[1])[:, 1]
            one = int(np.argmin(distance))
            if distance[one] < closest:
                closest, day = float(distance[one]), float(now)
                pair = (int(there[one]), int(there[other[one]]))
        if payload.link_range_m is not None and payload.hubs.any() and members.size:
            hubs = place_m[payload.hubs, k]
            sound = np.isfinite(hubs).all(axis=1)
            gap = np.full(members.size, np.inf)
            here = np.isfinite(place_m[members, k]).all(axis=1)
            if sound.any() and here.any():
                gap[here] = np.asarray(cKDTree(hubs[sound]).query(place_m[members[here], k])[0])
            out = gap > payload.link_range_m
            broken[members] |= out
            if out.any():
                broken_day = min(broken_day, float(now))
    seen = payload.link_range_m is not None and bool(payload.hubs.any())
    return _Look(closest, pair, day, int(broken.sum()) if seen else -1, broken_day)


@dataclass(frozen=True, slots=True, eq=False)
class DriftSums:
    """What the chunks so far came to."""

    displaced: dict[str, Histogram]
    leaving: Histogram
    before: Histogram
    after: Histogram
    total_m: NDArray[np.float64]
    square_m2: NDArray[np.float64]
    largest_m: NDArray[np.float64]
    lost: NDArray[np.int64]
    changes: NDArray[np.float64]
    closest: tuple[float, int, int, float]
    broken: tuple[int, float]
    off_m: float

    @classmethod
    def fresh(cls, payload: DriftPayload) -> DriftSums:
        """Begin."""
        empty = _Gathered(len(payload.states), payload.days.size, payload)
        return cls(
            empty.displaced,
            empty.leaving,
            empty.before,
            empty.after,
            empty.total,
            empty.square,
            empty.largest,
            empty.lost,
            empty.changes,
            (np.inf, -1, -1, np.nan),
            (-1, np.inf),
            0.0,
        )

    @staticmethod
    def with_chunk(sums: DriftSums, chunk: Chunk) -> DriftSums:
        """Add one chunk."""
        got = {name: np.asarray(value) for name, value in chunk.items()}
        for name, histogram in sums.displaced.items():
            histogram.add_arrays(chunk, name)
        sums.leaving.add_arrays(chunk, "leaving")
        sums.before.add_arrays(chunk, "before")
        sums.after.add_arrays(chunk, "after")
        changes = sums.changes + got["changes"]
        changes[1] = max(sums.changes[1], got["changes"][1])
        near = (
            float(got["closest_m"][0]),
            int(got["closest_pair"][0]),
            int(got["closest_pair"][1]),
            float(got["closest_day"][0]),
        )
        links = int(got["broken"][0]), float(got["broken_day"][0])
        return replace(
            sums,
            total_m=sums.total_m + got["total_m"],
            square_m2=sums.square_m2 + got["square_m2"],
            largest_m=np.maximum(sums.largest_m, got["largest_m"]),
            lost=sums.lost + got["lost"],
            changes=changes,
            closest=min(sums.closest, near, key=lambda one: one[0]),
            off_m=max(sums.off_m, float(got["off_m"][0])),
            broken=(max(sums.broken[0], links[0]), min(sums.broken[1], links[1])),
        )
