"""Which step the full lane takes: chosen from radius, reference, span and accuracy alone.

The step is found by halving on a fixed set of probe nodes, never on the nodes flown, so that a node's result
does not depend on its neighbours, their order, blocks or workers.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.kernels.motion.deviation import fly_block

__all__ = ["ACCURACIES", "BODY_RADII_M", "LANES", "Arcs", "fly_arcs", "probe_states", "step_s"]

LANES = 128
ACCURACIES = {"draft": 1.0, "default": 1e-3, "fine": 1e-5}
BODY_RADII_M = np.array([6.957e8, 6.3781e6])
_REACH_AT_1000_KM_M = 4e7
_LONGEST_STEP_S = 28.0 * DAY_S
_SHORTEST_STEP_S = 60.0
_ROUNDED = 1e-8


@dataclass(frozen=True, slots=True, eq=False)
class Arcs:
    """What each lane does in each of s arcs, arrays (s, n), or (s, 1) where all lanes agree.

    Attributes
    ----------
    steps : number of steps;  size_s : their length, sign gives the direction [s]
    kick : which impulse acts at the arc's start, -1 for none
    keep : which output row the state after the arc goes to, -1 for none
    """

    steps: NDArray[np.int64]
    size_s: NDArray[np.float64]
    kick: NDArray[np.int64]
    keep: NDArray[np.int64]

    def of(self, first: int, last: int) -> Arcs:
        """Return the arcs of lanes `first` to `last`, written out for each lane."""
        lanes = slice(first, last) if self.steps.shape[1] > 1 else slice(0, 1)
        shape = (self.steps.shape[0], last - first)
        return Arcs(
            np.ascontiguousarray(np.broadcast_to(self.steps[:, lanes], shape)),
            np.ascontiguousarray(np.broadcast_to(self.size_s[:, lanes], shape)),
            np.ascontiguousarray(np.broadcast_to(self.kick[:, lanes], shape)),
            np.ascontiguousarray(np.broadcast_to(self.keep[:, lanes], shape)),
        )


def fly_arcs(
    reference: Reference,
    states: NDArray[np.float64],
    excess_beta: NDArray[np.float64],
    arcs: Arcs,
    dv_m_s: NDArray[np.float64],
    kept: int,
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Fly one block of lanes (6, w) through arcs; see kernels.motion.deviation.fly_block for the arrays.

    Returns the kept states (kept, 6, w), NaN where a lane failed, and the status (w,).
    """
    gm_sun, gm_bare, gm_earth = reference.gm_m3_s2
    r1, r2 = reference.primaries_m()
    out = np.full((kept, 6, states.shape[1]), np.nan)
    status = np.zeros(states.shape[1], dtype=np.int64)
    fly_block(
        states,
        excess_beta,
        arcs.steps,
        arcs.size_s,
        arcs.kick,
        dv_m_s,
        arcs.keep,
        out,
        r1,
        r2,
        np.array([gm_sun, gm_bare]),
        gm_earth,
        reference.rate_rad_s,
        BODY_RADII_M,
        status,
    )
    return out, status


def probe_states(radius_m: float, rate_rad_s: float) -> NDArray[np.float64]:
    """Deviations (6, 12) that stand for all within `radius_m`: each axis both ways, at rest and moving."""
    axes = np.concatenate([np.eye(3), -np.eye(3)], axis=1)
    states = np.zeros((6, 12))
    states[:3, :6] = axes * radius_m
    states[:3, 6:] = axes * radius_m / math.sqrt(2.0)
    states[3:, 6:] = np.roll(axes, 1, axis=0) * (radius_m * rate_rad_s / math.sqrt(2.0))
    return states


def step_s(reference: Reference, radius_m: float, span_s: float, accuracy: str) -> float:
    """Longest step that keeps the position error within what `accuracy` allows [s].

    Parameters
    ----------
    radius_m : largest distance (or speed over rate) of any node from the reference at the start
    span_s : length of the flight
    accuracy : "draft", "default" or "fine": 1 m, 1 mm, 10 micrometres after a year at 1000 km; scaled up with
        the distance reached where that is beyond the 40,000 km of that case

    Raises
    ------
    DomainError
        Unknown accuracy.
    """
    if accuracy not in ACCURACIES:
        raise DomainError(Fault("accuracy", f"got {accuracy!r}", " ".join(ACCURACIES)))
    radius = 2.0 ** math.ceil(math.log2(max(radius_m, 1e3)))
    days = max(1, math.ceil(abs(span_s) / DAY_S))
    return _calibrated(reference, radius, days, accuracy)


@lru_cache(maxsize=256)
def _calibrated(reference: Reference, radius_m: float, days: int, accuracy: str) -> float:
    """Halve the step until flights with it and with half of it agree on the probes, or rounding forbids it."""
    span = days * DAY_S
    count = max(1, math.ceil(span / _LONGEST_STEP_S))
    coarse = _fly_probes(reference, radius_m, span, count)
    before = math.inf
    while True:
        fine = _fly_probes(reference, radius_m, span, 2 * count)
        size = np.linalg.norm(fine, axis=0)
        with np.errstate(invalid="ignore"):
            error = np.linalg.norm(fine - coarse, axis=0)
        allowed = ACCURACIES[accuracy] * np.maximum(1.0, size / _REACH_AT_1000_KM_M)
        lost = ~np.isfinite(size)
        good = error <= 0.5 * allowed
        if np.all(good | lost) or span / count < _SHORTEST_STEP_S:
            return span / count
        worst = float(np.max(error[~lost] / allowed[~lost]))
        # a method of order 8 gains 256 times by halving; where it gains less than 4, rounding is all that is left
        if worst > 0.25 * before and np.all((error <= _ROUNDED * size) | lost):
            return span / count
        before = worst
        count *= 2
        coarse = fine


def _fly_probes(reference: Reference, radius_m: float, span_s: float, count: int) -> NDArray[np.float64]:
    """Positions (3, 12) of the probes after `span_s` in `count` equal steps."""
    states = probe_states(radius_m, reference.rate_rad_s)
    lanes = states.shape[1]
    shape = (1, lanes)
    out, _ = fly_arcs(
        reference,
        states,
        np.zeros(lanes),
        Arcs(
            np.full(shape, count, dtype=np.int64),
            np.full(shape, span_s / count),
            np.full(shape, -1, dtype=np.int64),
            np.zeros(shape, dtype=np.int64),
        ),
        np.zeros((1, 3, lanes)),
        1,
    )
    return out[0, :3]
