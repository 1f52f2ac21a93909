"""The fast lane: nodes flown by chained Taylor maps, the error estimated and checked on the full lane."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.dynamics.lanes.accuracy import ACCURACIES, known
from farhold.dynamics.lanes.request import Asked, Legs, checked, legs_of, pieces
from farhold.dynamics.maps import ORDERS, map_between
from farhold.dynamics.propagate import fly
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.kernels.motion.maps import fly_maps_many
from farhold.pool import run_blocks

__all__ = ["FastFlight", "choose_lane", "fly_fast"]

# nodes looked at, of which so many for going farthest, and so many for each extreme at the start
_SAMPLE = 96
_FARTHEST = 32
_EXTREMES = 8
_SAFETY = 1.5
_REFUSED_ABOVE = 0.1
# impulses of so many nodes stay in the first cache while maps are applied
_LANES = 64


@dataclass(frozen=True, slots=True, eq=False)
class FastFlight:
    """States (n, m, 6) at the m asked times, and how far they may be off.

    Attributes
    ----------
    order : degree of the maps
    error_m : estimate of the largest position error of any node at any asked time: 1.5 times the next term
    checked_m : largest position error found on the full lane, over a sample that holds the extremes
    sound : whether the next term is below a tenth of the last one kept, or below a millimetre by estimate and
        check alike; without that the estimate is worthless
    """

    state: NDArray[np.float64]
    order: int
    error_m: float
    checked_m: float
    sound: bool


def fly_fast(
    reference: Reference,
    states: ArrayLike,
    output_s: ArrayLike,
    *,
    order: int,
    start_s: float = 0.0,
    excess_beta: ArrayLike | None = None,
    impulse_s: ArrayLike | None = None,
    dv_m_s: ArrayLike | None = None,
) -> FastFlight:
    """Fly nodes by Taylor maps of the given order between impulses that all nodes share.

    Parameters
    ----------
    order : 1, 2 or 3; the other arguments as in :func:`farhold.dynamics.propagate.fly`, impulse times (k,)

    Returns
    -------
    FastFlight. The error is estimated, and found, on up to 96 nodes: those that go farthest, those with the
    largest distance, speed, pressure and impulses, the rest evenly spread. For order 3 the next term is the full
    lane's difference.

    Raises
    ------
    DomainError
        As `fly`; an order other than 1 to 3; impulse times of each node's own.
    """
    if order not in ORDERS:
        raise DomainError(Fault("order", f"got {order!r}", "1, 2 or 3"))
    asked = checked(states, output_s, start_s, excess_beta, impulse_s, dv_m_s)
    if asked.own:
        raise DomainError(
            Fault(
                "impulse times",
                "the fast lane takes times that all nodes share",
                "(k,)",
                "use the full lane",
            )
        )
    legs = legs_of(asked)
    state = _flown(reference, asked, legs, order)
    sample = _sample(asked, state)
    few = asked.part(sample)
    few_legs = legs_of(few)
    full = fly(
        reference,
        few.states,
        few.output_s,
        start_s=start_s,
        excess_beta=few.excess_beta,
        impulse_s=few.impulse_s[0],
        dv_m_s=few.dv_m_s,
        radius_m=asked.reach_m(reference),
    ).state
    mine = state[sample]
    found = float(np.linalg.norm((mine - full)[..., :3], axis=-1).max(initial=0.0))
    above = full if order == ORDERS[-1] else _flown(reference, few, few_legs, order + 1)
    below = _flown(reference, few, few_legs, order - 1) if order > 1 else np.zeros_like(mine)
    following = np.linalg.norm((above - mine)[..., :3], axis=-1).max(initial=0.0)
    kept = np.linalg.norm((mine - below)[..., :3], axis=-1).max(initial=0.0)
    # differences within what the full lane promises may be its own, and say nothing against the map
    small = max(found, following) <= ACCURACIES["default"]
    sound = np.isfinite(found) and (small or following <= _REFUSED_ABOVE * kept)
    return FastFlight(state, order, _SAFETY * float(following), found, bool(sound))


def choose_lane(
    reference: Reference,
    states: ArrayLike,
    output_s: ArrayLike,
    *,
    tolerance_m: float | None = None,
    accuracy: str = "default",
    start_s: float = 0.0,
    excess_beta: ArrayLike | None = None,
    impulse_s: ArrayLike | None = None,
    dv_m_s: ArrayLike | None = None,
) -> int | None:
    """Lowest order of the fast lane whose estimate and check stay within a tolerance; None: the full lane.

    Parameters
    ----------
    tolerance_m : largest position error allowed [m] (None: what `accuracy` allows at 1000 km after a year)
    """
    limit = ACCURACIES[known(accuracy)] if tolerance_m is None else tolerance_m
    asked = checked(states, output_s, start_s, excess_beta, impulse_s, dv_m_s)
    if asked.own:
        return None
    few = asked.part(_sample(asked, _flown(reference, asked, legs_of(asked), 1)))
    for order in ORDERS:
        tried = fly_fast(
            reference,
            few.states,
            few.output_s,
            order=order,
            start_s=start_s,
            excess_beta=few.excess_beta,
            impulse_s=few.impulse_s[0],
            dv_m_s=few.dv_m_s,
        )
        if tried.sound and tried.error_m <= limit and tried.checked_m <= limit:
            return order
    return None


def _sample(asked: Asked, flown: NDArray[np.float64]) -> NDArray[np.int64]:
    """Nodes to check: those that `flown` (n, m, 6) has farthest, the extremes at the start, an even spread."""
    n = len(asked.states)
    reached = np.einsum("nmc,nmc->nm", flown[..., :3], flown[..., :3]).max(axis=1)
    sizes = (
        np.linalg.norm(asked.states[:, :3], axis=1),
        np.linalg.norm(asked.states[:, 3:], axis=1),
        np.abs(asked.excess_beta),
        asked.total_m_s,
    )
    extremes = [_largest(reached, _FARTHEST), *(_largest(size, _EXTREMES) for size in sizes)]
    rest = _SAMPLE - _FARTHEST - len(sizes) * _EXTREMES
    spread = np.linspace(0, max(n - 1, 0), min(n, rest)).astype(np.int64)
    return np.unique(np.concatenate([*extremes, spread]))


def _largest(size: NDArray[np.float64], count: int) -> NDArray[np.int64]:
    """Places of the `count` largest of `size` (n,), all where there are fewer."""
    if len(size) <= count:
        return np.arange(len(size))
    return np.argpartition(-size, count - 1)[:count].astype(np.int64)


def _flown(reference: Reference, asked: Asked, legs: Legs, order: int) -> NDArray[np.float64]:
    """Fly all nodes by maps of one order, (n, m, 6)."""
    place: dict[tuple[float, float], int] = {}
    maps: list[NDArray[np.float64]] = []
    index = np.empty(len(legs.span_s), dtype=np.int64)
    for k, (begin, span) in enumerate(zip(legs.begin_s, legs.span_s, strict=True)):
        key = (0.0 if reference.autonomous else begin, span)
        if key not in place:
            place[key] = len(maps)
            maps.append(map_between(reference, begin, begin + span).terms)
        index[k] = place[key]
    stack = np.stack(maps) if maps else np.zeros((0, 119, 6))
    out = np.empty((len(asked.states), asked.output_s.size, 6))

    def piece(part: slice) -> None:
        states = asked.states[part]
        got = np.empty((len(states), legs.kept, 6))
        if len(index):
            fly_maps_many(
                np.ascontiguousarray(states),
                np.ascontiguousarray(asked.excess_beta[part]),
                _LANES,
                order,
                index,
                stack,
                legs.kick,
                np.ascontiguousarray(legs.dv_m_s[part]),
                legs.keep,
                got,
            )
        legs.put(out, part, states, got)

    run_blocks(piece, pieces(len(asked.states)))
    return out
