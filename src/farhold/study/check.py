"""What a case would fly, in plain words, and what looks unwise about it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S
from farhold.domain.formation import Formation
from farhold.dynamics.circular import SUN_EARTH, libration_point
from farhold.dynamics.trajectory import Reference
from farhold.planning.holding.price import holding_m_s_yr
from farhold.planning.knowledge import horizon_days
from farhold.planning.slots import closest_pair, slot_states
from farhold.propellant.margins import usable_kg
from farhold.propellant.rocket import dv_of
from farhold.study.case.record import Case
from farhold.study.check_warnings import warnings_of
from farhold.study.provenance import provenance
from farhold.study.setting import excess_of, reference_of
from farhold.units import say_length

__all__ = ["CheckResult", "FormationView", "check"]

_LOOKS = 400


_KNOWN_M = 10.0


@dataclass(frozen=True, slots=True)
class CheckResult:
    """The JSON document "check" and the same in plain words."""

    summary: dict[str, Any]
    lines: list[str]


@dataclass(frozen=True, slots=True, eq=False)
class FormationView:
    """A formation at its start: states (m, 6), holding price (m,) [m/s per year], extent, closest pair."""

    formation: Formation
    states: NDArray[np.float64]
    holding_m_s_yr: NDArray[np.float64]
    radius_m: float
    closest_m: float


def check(case: Case) -> CheckResult:
    """Say what `case` would fly and warn of what looks unwise.

    Raises
    ------
    CaseError
        A formation cannot be placed about the reference.
    """
    reference = reference_of(case)
    state = case.initial_state(allow_unplaced=True)
    excess = excess_of(reference, state)
    views = [_view(reference, formation, excess, state.class_name) for formation in case.formations.values()]
    classes = _classes(case)
    growth = reference.unstable_rate_1_s()
    summary: dict[str, Any] = {
        "kind": "check",
        "schema": 1,
        "case": case.title,
        "reference": {
            "point": reference.point,
            "kind": reference.kind,
            "model": reference.model,
            "period_days": None if reference.period_s is None else reference.period_s / DAY_S,
            "unstable_efold_days": 1.0 / growth / DAY_S if growth else None,
            "stability_index": reference.stability_index,
        },
        "classes": classes,
        "formations": [
            {
                "formation": view.formation.name,
                "rule": view.formation.rule,
                "slots": len(view.formation.slots),
                "radius_km": view.radius_m / 1e3,
                "holding_mean_m_s_yr": float(view.holding_m_s_yr.mean()),
                "holding_max_m_s_yr": float(view.holding_m_s_yr.max()),
            }
            for view in views
        ],
        "knowledge_days": _knowledge_days(case, reference),
        "warnings": warnings_of(case, reference, views),
        "provenance": provenance(case.sha256, case.seed, None),
    }
    return CheckResult(summary, _lines(case, reference, summary, views))


def _knowledge_days(case: Case, reference: Reference) -> float | None:
    """Days until the position after one fix is known worse than 10 m (3-D rms); None without errors given."""
    errors = case.errors
    if errors.navigation_position_m == 0.0 and errors.navigation_velocity_m_s == 0.0:
        return None
    return horizon_days(
        reference,
        position_m=errors.navigation_position_m,
        velocity_m_s=errors.navigation_velocity_m_s,
        acceleration_m_s2=errors.unmodelled_acceleration_m_s2,
        asked_m=_KNOWN_M,
    )


def _view(
    reference: Reference, formation: Formation, excess_beta: NDArray[np.float64], class_name: NDArray[np.str_]
) -> FormationView:
    """Look at a formation at its start; each slot is held by a node of the mean pressure of its class."""
    states = slot_states(reference, formation, formation.start_s)
    place = states[:, :3]
    means = {
        str(name): float(excess_beta[class_name == name].mean()) if (class_name == name).any() else 0.0
        for name in np.unique(formation.slots.class_name)
    }
    beta = np.array([means[str(name)] for name in formation.slots.class_name])
    rule = np.full(len(place), formation.rule)
    price = holding_m_s_yr(reference, rule, place, formation.start_s, beta)
    radius = float(np.linalg.norm(place, axis=1).max())
    return FormationView(formation, states, price, radius, closest_pair(place)[0])


def _classes(case: Case) -> list[dict[str, Any]]:
    """Number and dv capacity of each class: what the least provided of its nodes can spend."""
    table = case.nodes
    rows = []
    for k, one in enumerate(case.classes):
        mine = table.class_index == k
        usable = usable_kg(
            table.mass_kg[mine],
            table.dry_mass_kg[mine],
            table.loaded_kg[mine],
            one.effective_isp_s,
            case.margins,
        )
        capacity = dv_of(table.mass_kg[mine], table.mass_kg[mine] - np.maximum(usable, 0.0), one.effective_isp_s)
        rows.append(
            {
                "class": one.name,
                "nodes": int(mine.sum()),
                "dv_capacity_m_s": float(capacity.min()) if mine.any() else None,
            }
        )
    return rows


def _lines(case: Case, reference: Reference, summary: dict[str, Any], views: list[FormationView]) -> list[str]:
    """Say it in plain words."""
    swarm = ", ".join(
        f"{row['nodes']} {row['class']} with {row['dv_capacity_m_s']:.3g} m/s each"
        for row in summary["classes"]
        if row["nodes"]
    )
    lines = [case.title, "", f"Swarm: {len(case.nodes)} nodes: {swarm}.", _reference_line(reference)]
    for view, row in zip(views, summary["formations"], strict=True):
        near = f", closest pair {say_length(view.closest_m)}" if np.isfinite(view.closest_m) else ""
        lines.append(
            f"Formation {row['formation']}: {row['slots']} {row['rule']} slots within "
            f"{say_length(view.radius_m)}{near}; holding costs {row['holding_mean_m_s_yr']:.3g} m/s a year "
            f"on average, {row['holding_max_m_s_yr']:.3g} at most."
        )
    lines.append(f"At the start the nodes sit in {case.opening_formation}.")
    margins = case.margins
    lines.append(
        f"Margins: {margins.manoeuvre:.0%} on manoeuvres ({margins.manoeuvre_why}), {margins.attitude:.0%} on "
        f"attitude ({margins.attitude_why}), {margins.residual:.0%} of the load stays in the tank "
        f"({margins.residual_why}), {margins.contingency_m_s:g} m/s kept back ({margins.contingency_why})."
    )
    lines.append(
        f"Safety: slots at least {say_length(case.safety.separation_m)} apart. Holding: {case.holding.policy}, "
        f"{say_length(case.holding.box_m)} half-width, every {case.holding.cadence_s / DAY_S:g} d. Burns per day: "
        f"{'unlimited' if case.burns_per_day is None else case.burns_per_day}."
    )
    if summary["knowledge_days"] is not None:
        lines.append(
            f"Knowledge: {summary['knowledge_days']:.2g} d after a single fix the position is known worse than "
            f"{say_length(_KNOWN_M)} (3-D rms)."
        )
    if case.timeline:
        lines.append("Timeline: " + ", ".join(phase.phase for phase in case.timeline) + ".")
    return lines


def _reference_line(reference: Reference) -> str:
    """Say what the formations are defined about."""
    growth = reference.unstable_rate_1_s()
    grows = f"; deviations grow e-fold in {1.0 / growth / DAY_S:.1f} d" if growth else ""
    if not reference.autonomous:
        return f"{_orbit_words(reference)}{grows}."
    bare = libration_point(reference.point, SUN_EARTH.mu) * SUN_EARTH.length_m
    beta_place = libration_point(
        reference.point, SUN_EARTH.mu, 1.0 - reference.gm_m3_s2[0] / reference.gm_m3_s2[1]
    )
    shift = float(np.linalg.norm(beta_place * SUN_EARTH.length_m - bare))
    return (
        f"Reference: {reference.kind} at {reference.point}, {reference.model} model, displaced by "
        f"{say_length(shift)} by radiation pressure on {reference.pressure_area_m2_kg:.4g} m2/kg (C_R A/m){grows}."
    )


def _orbit_words(reference: Reference) -> str:
    """Say what orbit the formations are defined about."""
    length_s = reference.period_s or (reference.span_s or (0.0, 0.0))[1]
    reach = np.abs(reference.motion(np.linspace(0.0, length_s, _LOOKS))[:, :3]).max(axis=0)
    text = (
        f"Reference: {reference.kind} about {reference.point}, {reference.model} model, carrying radiation "
        f"pressure on {reference.pressure_area_m2_kg:.4g} m2/kg (C_R A/m); it goes {say_length(reach[0])} "
        f"along R, {say_length(reach[1])} along T, {say_length(reach[2])} along N from the point"
    )
    if reference.period_s is None:
        return text + f"; it is known for {length_s / DAY_S:.6g} d from the case's epoch"
    text += f"; period {reference.period_s / DAY_S:.6g} d"
    index = reference.stability_index
    if index is None:
        return text
    return text + (f", stability index {index:.5g}" if index > 1.0 + 1e-9 else ", stable")
