"""What ``check`` warns of: things that are lawful and yet rarely meant."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.domain.formation import Formation
from farhold.dynamics.trajectory import Reference
from farhold.study.case.record import Case
from farhold.units import say_length

__all__ = ["warnings_of"]

# at L2 the Earth's shadow is 13,300 km in radius; half as much again for the formation
_SHADOW_M = 2e7
_LOOK_S = 0.25 * DAY_S
_MOST_LOOKS = 8000


class _View(Protocol):
    """What is looked at of a formation."""

    @property
    def formation(self) -> Formation:
        """The formation."""

    @property
    def states(self) -> NDArray[np.float64]:
        """States (m, 6) of its slots at its start."""

    @property
    def holding_m_s_yr(self) -> NDArray[np.float64]:
        """Holding price (m,) [m/s per year]."""

    @property
    def radius_m(self) -> float:
        """Largest distance of a slot from the reference."""

    @property
    def closest_m(self) -> float:
        """Least distance between two slots."""


def warnings_of(case: Case, reference: Reference, views: Sequence[_View]) -> list[str]:
    """Gather all warnings, each one sentence."""
    return [
        *_numbers(case, views),
        *_boxes(case, views),
        *_hubs(case, views),
        *_margins(case),
        *_model(case, reference),
    ]


def _numbers(case: Case, views: Sequence[_View]) -> Iterator[str]:
    """Nodes and slots that do not match, slots hardly apart."""
    names = np.array([c.name for c in case.classes])[case.nodes.class_index]
    for view in views:
        slots = view.formation.slots
        for one in case.classes:
            n, m = int((names == one.name).sum()), int((slots.class_name == one.name).sum())
            if m > n:
                tail = (
                    "those of lowest priority stay empty"
                    if not np.isnan(slots.priority[slots.class_name == one.name]).any()
                    else "a reshape to it is refused until each slot has a priority"
                )
                yield f"Formation {view.formation.name} has {m} slots for {n} nodes of class {one.name}: {tail}."
            elif n > m and view.formation.spares is None:
                yield (
                    f"Formation {view.formation.name} has {m} slots for {n} nodes of class {one.name}: "
                    f"{_keep(n - m)}."
                )
        if view.closest_m < 2.0 * case.safety.separation_m:
            yield (
                f"Formation {view.formation.name} has slots {say_length(view.closest_m)} apart, less than twice "
                f"the separation of {say_length(case.safety.separation_m)}: boxes and errors may use it up."
            )


def _keep(number: int) -> str:
    """Say that so many nodes stay where they are."""
    return "1 keeps the slot it holds" if number == 1 else f"{number} keep the slot they hold"


def _boxes(case: Case, views: Sequence[_View]) -> Iterator[str]:
    """Boxes smaller than the swing between two burns, a T2 / 8."""
    for view in views:
        pull = float(view.holding_m_s_yr.max(initial=0.0)) / YEAR_S
        swing = pull * case.holding.cadence_s**2 / 8.0
        if swing > case.holding.box_m:
            yield (
                f"Formation {view.formation.name}: between burns every {case.holding.cadence_s / DAY_S:g} d the "
                f"worst slot swings {say_length(swing)}, more than the box of {say_length(case.holding.box_m)}."
            )


def _hubs(case: Case, views: Sequence[_View]) -> Iterator[str]:
    """Hubs that cannot serve everybody, links that never bind or never reach."""
    hubs = [c for c in case.classes if c.is_hub]
    names = np.array([c.name for c in case.classes])[case.nodes.class_index]
    members = int(np.sum(~np.isin(names, [c.name for c in hubs])))
    places = sum(int((names == c.name).sum()) * (c.capacity or 0) for c in hubs)
    if hubs and members > places:
        yield f"The hubs can serve {places} members, {members - places} fewer than there are."
    for view in views:
        slots = view.formation.slots
        for hub in hubs:
            of_hub = slots.class_name == hub.name
            others = ~np.isin(slots.class_name, [c.name for c in hubs])
            if hub.link_range_m is None or not of_hub.any() or not others.any():
                continue
            place = view.states[:, :3]
            gaps = np.array([np.linalg.norm(place[of_hub] - p, axis=1).min() for p in place[others]])
            out = int((gaps > hub.link_range_m).sum())
            if out:
                yield (
                    f"Formation {view.formation.name}: {out} slots lie farther than the link range of "
                    f"{say_length(hub.link_range_m)} from every slot of class {hub.name}."
                )
            elif hub.link_range_m >= 2.0 * view.radius_m:
                yield (
                    f"Formation {view.formation.name}: the link range of {say_length(hub.link_range_m)} spans it "
                    "whole and never binds."
                )


def _margins(case: Case) -> Iterator[str]:
    """Margins of nothing, reserves of nothing."""
    for one in case.classes:
        if case.margins.attitude > 0.0 and one.attitude_m_s_per_year == 0.0:
            yield (
                f"Class {one.name}: the attitude margin of {case.margins.attitude:.0%} is taken of no attitude "
                "cost and reserves nothing; give attitude_per_year."
            )
    if case.margins.contingency_m_s == 0.0:
        yield "No contingency is kept back: after a safe mode a node may not be able to return."


def _model(case: Case, reference: Reference) -> Iterator[str]:
    """What the model leaves out."""
    if reference.model == "circular":
        tail = "; the shadow dims the Sun there" if _meets_shadow(reference) else ""
        yield f"The circular model has no planets and no shadow of the Earth{tail}."
    if reference.span_s is not None:
        runs_s = sum(getattr(phase, "over_s", 0.0) + getattr(phase, "for_s", 0.0) for phase in case.timeline)
        if runs_s > reference.span_s[1]:
            yield (
                f"The timeline runs for {runs_s / DAY_S:.6g} d, and the reference is known for "
                f"{reference.span_s[1] / DAY_S:.6g} d only: give it a longer span."
            )
    if any(c.sun_cone_rad is not None for c in case.classes):
        yield "sun_cone is read but not applied to quotes in this version."
    if case.burns_per_day is not None:
        yield "burns_per_day is read but not applied to quotes in this version: all nodes burn at one epoch."
    if reference.unstable_rate_1_s():
        days = 1.0 / reference.unstable_rate_1_s() / DAY_S
        yield (
            f"Deviations grow e-fold in {days:.0f} d at {reference.point}: the prices of holding count the pull "
            "at the slot, not the control of navigation errors."
        )


def _meets_shadow(reference: Reference) -> bool:
    """Whether the reference passes close to the line from the Sun beyond the Earth at L2."""
    if reference.point != "L2" or reference.autonomous:
        return reference.point == "L2"
    length_s = reference.period_s or (reference.span_s or (0.0, 0.0))[1]
    looks = min(_MOST_LOOKS, 2 + int(length_s / _LOOK_S))
    off = np.linalg.norm(reference.motion(np.linspace(0.0, length_s, looks))[:, 1:3], axis=1)
    return bool(off.min() < _SHADOW_M)
