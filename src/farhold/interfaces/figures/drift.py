"""Pictures of a drift study: the fan of displacements, and baselines before and after."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from farhold.interfaces.canvas import AMBER, GREY, PLUM, TEAL, decades, picture

__all__ = ["draw"]

_BARS = 60


def draw(findings: Any, folder: Path) -> list[Path]:
    """Write ``drift_fan`` and ``baselines``."""
    return [
        *picture(folder, "drift_fan", lambda axes: _fan(axes, findings)),
        *picture(folder, "baselines", lambda axes: _baselines(axes, findings)),
    ]


def _fan(axes: Any, findings: Any) -> None:
    table = findings.tables["displacement"]
    day = table["day"].to_numpy()
    axes.plot(day, table["max"], color=PLUM, linewidth=1.2, linestyle="--", label="the farthest")
    axes.fill_between(
        day, table["p95"], table["p99"], color=AMBER, alpha=0.5, linewidth=0, label="99 % are nearer"
    )
    axes.fill_between(day, table["p50"], table["p95"], color=TEAL, alpha=0.3, linewidth=0, label="95 % are nearer")
    axes.plot(day, table["p50"], color=TEAL, linewidth=2.0, label="half are nearer")
    axes.set_xscale("log")
    axes.set_yscale("log")
    decades(axes.xaxis)
    decades(axes.yaxis)
    axes.set_xlabel("days after release")
    axes.set_ylabel("distance from the slot [km]")
    summary = findings.summary
    axes.set_title(
        f"{summary['formation']} left alone: {summary['nodes']:,} nodes, {summary['samples']:,} samples",
        loc="left",
    )
    axes.legend()


def _baselines(axes: Any, findings: Any) -> None:
    table = _coarser(findings.tables["baselines"])
    if len(table):
        edges = np.append(table["from_km"].to_numpy(), table["to_km"].to_numpy()[-1])
        width = np.log10(table["to_km"] / table["from_km"])
        for what, look in (
            ("before", {"color": GREY, "fill": True, "alpha": 0.5}),
            ("after", {"color": TEAL, "linewidth": 1.6}),
        ):
            share = table[what] / max(1, table[what].sum()) / width
            axes.stairs(share, edges, label=what, **look)
        axes.set_xscale("log")
        decades(axes.xaxis)
        axes.legend()
    axes.set_xlabel("baseline [km]")
    axes.set_ylabel("share of pairs per decade of length")
    axes.set_title(f"Baselines before and after {findings.summary['for_days']:g} d", loc="left")


def _coarser(table: Any) -> Any:
    """Join neighbouring bins until some tens are left that hold pairs, so that the eye sees the shape."""
    together = max(1, len(table) // _BARS)
    groups = table.groupby(np.arange(len(table)) // together)
    return groups.agg({"from_km": "first", "to_km": "last", "before": "sum", "after": "sum"})
