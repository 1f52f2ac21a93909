"""The document, the tables and the remarks of the drift study."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from farhold.domain.epoch import DAY_S
from farhold.study.campaign import Findings
from farhold.study.campaign.histogram import Histogram
from farhold.study.campaign.intervals import support_warning
from farhold.study.drift_chunks import DriftPayload, DriftSums
from farhold.study.provenance import provenance
from farhold.study.setting import Setting
from farhold.units import say_length

__all__ = ["findings"]

_QUANTILES = (("p50", 0.5), ("p95", 0.95), ("p99", 0.99))


def findings(
    setting: Setting, formation: str, payload: DriftPayload, for_days: float, sums: DriftSums
) -> Findings:
    """Make the JSON document "drift", the tables nodes, displacement and baselines, and the remarks."""
    case, state = setting.case, setting.state
    displacement = _displacement(payload, sums)
    nodes = pd.DataFrame(
        {
            "node": state.node,
            "class": state.class_name,
            "slot": state.slot,
            "mean_km": sums.total_m / payload.samples / 1e3,
            "rms_km": np.sqrt(sums.square_m2 / payload.samples) / 1e3,
            "max_km": sums.largest_m / 1e3,
            "lost_samples": sums.lost,
        }
    )
    pairs = int(sums.after.count)
    draws = len(state) * payload.samples
    closest_m, a, b, day = sums.closest
    broken, broken_day = sums.broken
    summary: dict[str, Any] = {
        "kind": "drift",
        "schema": 1,
        "case": case.title,
        "formation": formation,
        "for_days": for_days,
        "nodes": len(state),
        "samples": payload.samples,
        "seed": payload.seed,
        "lane": payload.lane,
        "model": setting.reference.model,
        "displacement_km": displacement[["day", "p50", "p95", "p99", "max"]].to_dict("records"),
        "by_axis_km": displacement[["day", "r_p95", "t_p95", "n_p95"]].to_dict("records"),
        "distortion": {
            "rms_relative": float(np.sqrt(sums.changes[0] / pairs)) if pairs else None,
            "worst_relative": float(sums.changes[1]) if pairs else None,
        },
        "leaves_tolerance_days": {name: _leaving(sums, payload, p) for name, p in (("p05", 0.05), ("p50", 0.5))},
        "closest": {
            "distance_m": closest_m if np.isfinite(closest_m) else None,
            "pair": [str(state.node[a]), str(state.node[b])] if a >= 0 else None,
            "day": day if np.isfinite(day) else None,
        },
        "link_breaks": {
            "nodes": broken if broken >= 0 else None,
            "first_day": broken_day if np.isfinite(broken_day) else None,
        },
        "seconds": None,
        "provenance": provenance(case.sha256, payload.seed, None),
    }
    return Findings(
        summary,
        {"nodes": nodes, "displacement": displacement, "baselines": _baselines(sums)},
        _notes(payload, draws, int(sums.lost.sum()), sums.off_m),
    )


def _displacement(payload: DriftPayload, sums: DriftSums) -> pd.DataFrame:
    """Quantiles of the distance from the slot and of its parts along R, T, N on each day looked at [km]."""
    rows = []
    for k, day in enumerate(payload.days):
        size = sums.displaced[f"size_{k}"]
        row: dict[str, float | None] = {"day": float(day)}
        row |= {name: _km(size, p) for name, p in _QUANTILES}
        row["max"] = size.maximum / 1e3 if size.count else None
        row |= {f"{axis}_p95": _km(sums.displaced[f"{axis}_{k}"], 0.95) for axis in "rtn"}
        rows.append(row)
    return pd.DataFrame(rows)


def _km(histogram: Histogram, p: float) -> float | None:
    """Give a quantile in km."""
    return histogram.quantile(p).value / 1e3 if histogram.count else None


def _leaving(sums: DriftSums, payload: DriftPayload, p: float) -> float | None:
    """Day by which the share `p` of all draws has left the tolerance; None: not within the span."""
    draws = sums.leaving.count + sums.changes[2]
    rank = p * draws
    if rank > sums.leaving.count or not sums.leaving.count:
        return None
    return float(min(sums.leaving.quantile(min(1.0, rank / sums.leaving.count)).value, payload.days[-1]))


def _baselines(sums: DriftSums) -> pd.DataFrame:
    """Histogram of the followed baselines before and after."""
    used = (sums.before.counts[1:-1] > 0) | (sums.after.counts[1:-1] > 0)
    at = np.flatnonzero(used)
    span = slice(int(at[0]), int(at[-1]) + 1) if at.size else slice(0, 0)
    return pd.DataFrame(
        {
            "from_km": sums.before.edges[:-1][span] / 1e3,
            "to_km": sums.before.edges[1:][span] / 1e3,
            "before": sums.before.counts[1:-1][span],
            "after": sums.after.counts[1:-1][span],
        }
    )


def _notes(payload: DriftPayload, draws: int, lost: int, off_m: float) -> list[str]:
    """Say what a reader of the numbers should know."""
    notes = [
        "displacement is the distance from where the slot would be; quantiles are over all nodes and samples, "
        "read from bins of 1 %"
    ]
    if payload.lane == "fast":
        notes.append(f"flown by second-order maps, off by at most {say_length(off_m)} by estimate and check")
    warning = support_warning(0.99, draws, "draws")
    if warning:
        notes.append(warning)
    growth = payload.reference.unstable_rate_1_s()
    if growth and payload.days[-1] * DAY_S * growth > 3.0:
        notes.append("the motion here is unstable: over this span errors grow more than twentyfold")
    if lost:
        notes.append(f"{lost} of {draws} draws meet a body before the end and are left out from then on")
    return notes
