"""The numbers of a reshape: who goes where, what each pays, what holding costs before and after."""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.domain.formation import Formation
from farhold.errors import CaseError, ConvergenceError, Fault, NoSolutionError
from farhold.planning.assignment.objectives import OBJECTIVES
from farhold.planning.assignment.pairing import Candidates, Pairing, Places, pair
from farhold.planning.holding.price import holding_m_s
from farhold.planning.slots import slot_states
from farhold.planning.transfer.linear import LinearTransfer, good_windows
from farhold.planning.transfer.two_point import CONVERGED, SINGULAR, STATUS_WORDS, TwoPointPlan, two_point
from farhold.study.setting import Setting, states_of
from farhold.watch import Watch

__all__ = ["Reshape", "reshape"]


@dataclass(frozen=True, slots=True, eq=False)
class Reshape:
    """Arrays over the k nodes alive, in the order of the case; states in rotating axes, SI.

    Attributes
    ----------
    alive : (k,) index into the swarm
    start, end : (k, 6) states of the slots left at departure and taken at arrival
    formation, slot : (k,) where each sits afterwards
    moves : (k,) bool, False for nodes that keep their slot
    plan : two impulses per node, zero for nodes that keep their slot
    pairing : who goes where, on the linear map
    remainder_m_s : conservative size of what the map leaves out, over all nodes
    old_hold_m_s, new_hold_m_s : (k,) holding of the old slot from departure, and of the new one from arrival,
        to the horizon; a node that keeps its slot holds it all the while, so both are the same
    before_m_s_yr, after_m_s_yr : (k,) holding per year of the old and of the new slot
    seconds : time by part
    """

    alive: NDArray[np.int64]
    start: NDArray[np.float64]
    end: NDArray[np.float64]
    formation: NDArray[np.str_]
    slot: NDArray[np.str_]
    moves: NDArray[np.bool_]
    plan: TwoPointPlan
    pairing: Pairing
    remainder_m_s: float
    old_hold_m_s: NDArray[np.float64]
    new_hold_m_s: NDArray[np.float64]
    before_m_s_yr: NDArray[np.float64]
    after_m_s_yr: NDArray[np.float64]
    seconds: dict[str, float]


def reshape(
    setting: Setting,
    to: Formation,
    depart_s: float,
    arrive_s: float,
    horizon_s: float,
    objective: str,
    accuracy: str,
    watch: Watch,
) -> Reshape:
    """Price the change to formation `to`; times are seconds from the case's epoch.

    Raises
    ------
    CaseError
        No node is alive, too few nodes, or too many for this version.
    NoSolutionError
        The transfer time is singular for some node (all named, with good times), or no pairing exists.
    ConvergenceError
        A path could not be brought to its slot.
    """
    state = setting.state
    alive = np.flatnonzero(state.alive)
    if alive.size == 0:
        raise CaseError(Fault("swarm", "no node is alive", "one or more nodes alive"))
    excess = setting.excess_beta[alive]
    clock = _Clock()
    start, old_rule = states_of(setting, depart_s, state.formation[alive], state.slot[alive])
    linear = LinearTransfer.between(setting.reference, depart_s, arrive_s)
    clock.lap("reference")
    nodes = Candidates(
        state.node[alive],
        state.class_name[alive],
        start,
        excess,
        state.mass_kg[alive],
        state.per_class("effective_isp_s")[alive],
    )
    spares = setting.case.formation(to.spares, f"formation.{to.name}.spares") if to.spares else None
    places, home = _places(setting, nodes, to, spares, arrive_s)
    pairing = pair(linear, nodes, places, OBJECTIVES[objective], formation=to.name, watch=watch)
    moves = pairing.slot_of >= 0
    formation = state.formation[alive].astype(np.result_type(home, state.formation))
    formation[moves] = home[pairing.slot_of[moves]]
    slot = state.slot[alive].astype(np.result_type(places.name, state.slot))
    slot[moves] = places.name[pairing.slot_of[moves]]
    clock.lap("assignment")
    end, new_rule = states_of(setting, arrive_s, formation, slot)
    plan = _flown(setting, nodes, start, end, moves, depart_s, arrive_s, excess, accuracy, watch)
    clock.lap("targeting")
    reference = setting.reference
    remainder = float(linear.remainder_m_s(reference, start[moves], end[moves]).sum())
    old_hold = holding_m_s(reference, old_rule, start[:, :3], depart_s, depart_s, horizon_s, excess)
    new_hold = holding_m_s(reference, new_rule, end[:, :3], arrive_s, arrive_s, horizon_s, excess)
    return Reshape(
        alive,
        start,
        end,
        formation,
        slot,
        moves,
        plan,
        pairing,
        remainder,
        old_hold,
        np.where(moves, new_hold, old_hold),
        holding_m_s(reference, old_rule, start[:, :3], depart_s, depart_s, depart_s + YEAR_S, excess),
        holding_m_s(reference, new_rule, end[:, :3], arrive_s, arrive_s, arrive_s + YEAR_S, excess),
        clock.seconds,
    )


class _Clock:
    """Seconds by part."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}
        self._since = time.perf_counter()

    def lap(self, part: str) -> None:
        """Book the time since the last lap on `part`."""
        now = time.perf_counter()
        self.seconds[part] = now - self._since
        self._since = now


def _places(
    setting: Setting, nodes: Candidates, to: Formation, spares: Formation | None, arrive_s: float
) -> tuple[Places, NDArray[np.str_]]:
    """Gather the slots to be filled, those of `spares` behind; also the formation of each."""
    state = setting.state
    parts = [to] if spares is None or spares.name == to.name else [to, spares]
    index = {str(name): k for k, name in enumerate(nodes.name)}
    holders = {
        (str(state.formation[i]), str(state.slot[i])): index[str(state.node[i])]
        for i in np.flatnonzero(state.alive)
    }
    gathered = []
    for part in parts:
        slots = part.slots
        gathered.append(
            Places(
                slots.slot,
                slots.class_name,
                slot_states(setting.reference, part, arrive_s),
                slots.priority,
                np.array([index.get(str(node), -1) if part is to else -1 for node in slots.node], dtype=np.int64),
                np.array([holders.get((part.name, str(name)), -1) for name in slots.slot], dtype=np.int64),
                np.full(len(slots), part is not to),
            )
        )
    merged = Places(
        *(np.concatenate([getattr(part, name) for part in gathered]) for name in Places.__dataclass_fields__)
    )
    home = np.repeat([part.name for part in parts], [len(part.slots) for part in parts])
    return merged, home


def _flown(
    setting: Setting,
    nodes: Candidates,
    start: NDArray[np.float64],
    end: NDArray[np.float64],
    moves: NDArray[np.bool_],
    depart_s: float,
    arrive_s: float,
    excess: NDArray[np.float64],
    accuracy: str,
    watch: Watch,
) -> TwoPointPlan:
    """Fly the transfers of the nodes that move; the others pay nothing."""
    n = len(start)
    plan = TwoPointPlan(np.zeros((n, 3)), np.zeros((n, 3)), np.zeros(n), np.zeros(n, dtype=np.int64))
    rows = np.flatnonzero(moves)
    if rows.size == 0:
        return plan
    flown = two_point(
        setting.reference,
        start[rows],
        end[rows],
        depart_s,
        arrive_s,
        excess_beta=excess[rows],
        accuracy=accuracy,
        watch=watch,
    )
    _refuse_unsolved(setting, nodes.name[rows], flown, depart_s, arrive_s)
    plan.dv_depart_m_s[rows] = flown.dv_depart_m_s
    plan.dv_arrive_m_s[rows] = flown.dv_arrive_m_s
    plan.miss_m[rows] = flown.miss_m
    return plan


def _refuse_unsolved(
    setting: Setting, names: NDArray[np.str_], plan: TwoPointPlan, depart_s: float, arrive_s: float
) -> None:
    """Refuse a plan in which some node has no path: name all of them, and the times that are good."""
    days = (arrive_s - depart_s) / DAY_S
    where = f"transfer over {days:g} d"
    singular = plan.status == SINGULAR
    if singular.any():
        windows = good_windows(setting.reference, depart_s)
        good = " or ".join(f"{first} d to {last} d" if last > first else f"{first} d" for first, last in windows)
        raise NoSolutionError(
            Fault(
                where,
                "two impulses are singular at this time for " + _all(names[singular]),
                f"transfer times of {good}" if good else "no time up to 400 d",
                "choose another --over",
            )
        )
    for code in np.unique(plan.status[plan.status != CONVERGED]):
        bad = plan.status == code
        raise ConvergenceError(
            Fault(where, f"{STATUS_WORDS[code]}: {_all(names[bad])}", hint="choose a shorter or longer --over")
        )


def _all(names: NDArray[np.str_]) -> str:
    """Name all nodes, with their number."""
    return f"{names.size} node{'s' if names.size > 1 else ''}: " + ", ".join(map(str, names))
