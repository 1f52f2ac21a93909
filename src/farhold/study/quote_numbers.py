"""From a reshape to a quote: propellant, affordability, life, and the tables and the document of it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from farhold.domain.epoch import Epoch
from farhold.planning.assignment.objectives import OBJECTIVES
from farhold.propellant.burn import burn_s
from farhold.propellant.life import LifeYears, life_years
from farhold.propellant.margins import margin_kg, usable_kg
from farhold.propellant.rocket import propellant_kg
from farhold.study.reshape import Reshape
from farhold.study.setting import Setting

__all__ = ["Priced", "impulses_frame", "nodes_frame", "price", "summary_of"]

_MOVED_M_S = 1e-3
_PROVEN_GAP = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class Priced:
    """What the k nodes alive pay, and what it leaves them.

    Attributes
    ----------
    alive : (k,) index into the swarm
    dv_m_s : (k,) both impulses;  least_impulse_m_s : (k,) the smaller of them
    burnt_kg : (k, 2) propellant of departure and arrival;  margin_kg : (k, 2) their margins
    usable_before_kg, usable_after_kg : (k,) without margins;  affordable : (k,) bool, with margins
    life : years left afterwards;  idle : number of nodes that keep their slot
    """

    alive: NDArray[np.int64]
    dv_m_s: NDArray[np.float64]
    least_impulse_m_s: NDArray[np.float64]
    burnt_kg: NDArray[np.float64]
    margin_kg: NDArray[np.float64]
    usable_before_kg: NDArray[np.float64]
    usable_after_kg: NDArray[np.float64]
    affordable: NDArray[np.bool_]
    life: LifeYears
    idle: int


def price(setting: Setting, numbers: Reshape) -> Priced:
    """Turn the impulses of a reshape into propellant, affordability and life."""
    state, margins, rows = setting.state, setting.case.margins, numbers.alive
    isp = state.per_class("effective_isp_s")[rows]
    mass, dry, loaded = state.mass_kg[rows], state.dry_mass_kg[rows], state.loaded_kg[rows]
    sizes = np.stack(
        [
            np.linalg.norm(numbers.plan.dv_depart_m_s, axis=1),
            np.linalg.norm(numbers.plan.dv_arrive_m_s, axis=1),
        ],
        axis=1,
    )
    first = propellant_kg(mass, sizes[:, 0], isp)
    second = propellant_kg(mass - first, sizes[:, 1], isp)
    margin = np.stack(
        [
            margin_kg(mass, sizes[:, 0], isp, margins.manoeuvre),
            margin_kg(mass - first, sizes[:, 1], isp, margins.manoeuvre),
        ],
        axis=1,
    )
    before = usable_kg(mass, dry, loaded, isp, margins)
    after = before - first - second
    spends = sizes.sum(axis=1) > 0.0
    affordable = ~spends | (after - margin.sum(axis=1) - setting.planned_margin_kg[rows] >= 0.0)
    # a price beyond every tank would leave no mass at all; the life is 0 either way
    life = life_years(
        np.maximum(mass - first - second, dry),
        after,
        isp,
        numbers.after_m_s_yr,
        margins,
        attitude_m_s_yr=state.per_class("attitude_m_s_per_year")[rows],
        attitude_isp_s=np.array([c.attitude_isp_s or c.effective_isp_s for c in state.classes])[
            state.class_index[rows]
        ],
        leak_kg_yr=state.per_class("leak_kg_per_year")[rows],
    )
    return Priced(
        rows,
        sizes.sum(axis=1),
        sizes.min(axis=1),
        np.stack([first, second], axis=1),
        margin,
        before,
        after,
        affordable,
        life,
        int((~numbers.moves).sum()),
    )


def nodes_frame(setting: Setting, numbers: Reshape, priced: Priced) -> pd.DataFrame:
    """One row per node alive: places in rotating axes at departure and arrival, prices, what is left."""
    state, rows = setting.state, numbers.alive
    columns: dict[str, Any] = {
        "node": state.node[rows],
        "class": state.class_name[rows],
        "slot": numbers.slot,
        "formation": numbers.formation,
    }
    for what, where in (("from", numbers.start), ("to", numbers.end)):
        for k, axis in enumerate("rtn"):
            columns[f"{what}_{axis}_km"] = where[:, k] / 1e3
    return pd.DataFrame(
        columns
        | {
            "dv_total_m_s": priced.dv_m_s,
            "floor_m_s": np.full(rows.size, np.nan),
            "impulses": (numbers.moves * 2).astype(np.int64),
            "propellant_kg": priced.burnt_kg.sum(axis=1),
            "margin_kg": priced.margin_kg.sum(axis=1),
            "usable_kg": priced.usable_after_kg,
            "life_years": priced.life.years,
            "holding_after_m_s_yr": numbers.after_m_s_yr,
        }
    )


def impulses_frame(
    setting: Setting, numbers: Reshape, priced: Priced, depart: Epoch, over_days: float
) -> pd.DataFrame:
    """One row per impulse, node by node: epoch, dv in rotating axes of that epoch and in the ICRF, burn."""
    state = setting.state
    movers = np.flatnonzero(numbers.moves)
    rows = numbers.alive[movers]
    isp = state.per_class("effective_isp_s")[rows]
    thrust = state.per_class("thrust_n")[rows] * state.per_class("thrust_efficiency")[rows]
    epochs = (depart, depart.plus(over_days * 86400.0))
    dv = np.stack([numbers.plan.dv_depart_m_s[movers], numbers.plan.dv_arrive_m_s[movers]], axis=1)
    turned = np.stack(
        [dv[:, k] @ setting.reference.axes_to_icrf(setting.seconds(epoch)).T for k, epoch in enumerate(epochs)],
        axis=1,
    )
    mass = np.stack(
        [state.mass_kg[rows], state.mass_kg[rows] - priced.burnt_kg[movers, 0]],
        axis=1,
    )
    size = np.linalg.norm(dv, axis=2)
    frame = pd.DataFrame(
        {
            "node": np.repeat(state.node[rows], 2),
            "epoch_tdb": pd.to_datetime(np.tile([epoch.ns for epoch in epochs], movers.size), unit="ns"),
        }
    )
    for k, axis in enumerate("rtn"):
        frame[f"dv_{axis}_m_s"] = dv[:, :, k].ravel()
    for k, axis in enumerate("xyz"):
        frame[f"dv_{axis}_m_s"] = turned[:, :, k].ravel()
    frame["burn_s"] = burn_s(mass, size, isp[:, None], thrust[:, None]).ravel()
    frame["propellant_kg"] = priced.burnt_kg[movers].ravel()
    frame["margin_kg"] = priced.margin_kg[movers].ravel()
    return frame


def summary_of(
    setting: Setting, numbers: Reshape, priced: Priced, request: dict[str, Any], nodes: pd.DataFrame
) -> dict[str, Any]:
    """Fill the JSON document "quote" of design section 8, without its provenance and digest."""
    dv, pairing = priced.dv_m_s, numbers.pairing
    names = nodes["node"].to_numpy()
    total = float(dv.sum())
    propellant = priced.burnt_kg.sum(axis=1)
    life = priced.life.years
    worst = OBJECTIVES[request["objective"]].worst
    on_map = float(pairing.dv_m_s.max() if worst else pairing.dv_m_s.sum()) if dv.size else 0.0
    map_error = (float(dv.max(initial=0.0)) if worst else total) - on_map
    return {
        "kind": "quote",
        "schema": 1,
        "quote": None,
        "case": setting.case.title,
        "from": request["from"] or setting.in_force,
        "to": request["to"],
        "depart": request["depart"],
        "over_days": request["over_days"],
        "horizon_days": request["horizon_days"],
        "objective": request["objective"],
        "impulses": "two",
        "nodes": int(dv.size),
        "moved": int(np.sum(dv > _MOVED_M_S)),
        "dv": {
            "total_m_s": total,
            "mean_m_s": float(dv.mean()),
            "median_m_s": float(np.median(dv)),
            "p95_m_s": float(np.quantile(dv, 0.95)),
            "max_m_s": float(dv.max()),
            "max_node": str(names[np.argmax(dv)]),
        },
        "propellant": {
            "total_kg": float(propellant.sum()),
            "max_kg": float(propellant.max()),
            "margin_kg": float(priced.margin_kg.sum()),
        },
        "holding": {
            "old_total_m_s": float(numbers.old_hold_m_s.sum()),
            "new_total_m_s": float(numbers.new_hold_m_s.sum()),
            "net_total_m_s": total + float(numbers.new_hold_m_s.sum() - numbers.old_hold_m_s.sum()),
            "before_mean_m_s_yr": float(numbers.before_m_s_yr.mean()),
            "after_mean_m_s_yr": float(numbers.after_m_s_yr.mean()),
            "after_max_m_s_yr": float(numbers.after_m_s_yr.max()),
        },
        "assignment": {
            "objective": request["objective"],
            "value": pairing.value,
            "unit": OBJECTIVES[request["objective"]].unit,
            "lower_bound": pairing.lower_bound,
            "gap": pairing.gap,
            "gap_relative": pairing.gap_relative,
            "map_error_m_s": map_error,
            "proven": bool(pairing.gap_relative < _PROVEN_GAP and abs(map_error) <= numbers.remainder_m_s),
            "method": pairing.method,
        },
        "floor": {
            "total_m_s": None,
            "ratio": None,
            "worst_ratio": None,
            "worst_node": None,
            "remainder_m_s": numbers.remainder_m_s,
        },
        "targeting": {
            "lane": "full",
            "model": setting.reference.model,
            "max_miss_m": float(numbers.plan.miss_m.max()),
        },
        "trim": {"p99_m_s": None, "arrival_sigma_m": None},
        "separation": {
            "asked_m": setting.case.safety.separation_m,
            "closest_m": None,
            "pair": None,
            "at": None,
            "conflicts": None,
            "after_missed_burn_m": None,
        },
        "affordable": bool(priced.affordable.all()),
        "cannot_afford": [str(name) for name in names[~priced.affordable]],
        "life_after": {
            "min_years": float(life.min()),
            "median_years": float(np.median(life)),
            "limiting_node": str(names[np.argmin(life)]),
            "capped": bool(priced.life.capped[np.argmin(life)]),
        },
        "seconds": numbers.seconds | {"separation": None, "total": float(sum(numbers.seconds.values()))},
    }
