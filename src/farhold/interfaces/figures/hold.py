"""Pictures of a holding study: what nodes pay a year, and the policy against the continuous price."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from farhold.interfaces.canvas import AMBER, GREY, PLUM, TEAL, picture

__all__ = ["draw"]


def draw(findings: Any, folder: Path) -> list[Path]:
    """Write ``who_pays`` and ``against_continuous``."""
    return [
        *picture(folder, "who_pays", lambda axes: _who_pays(axes, findings)),
        *picture(folder, "against_continuous", lambda axes: _against(axes, findings)),
    ]


def _who_pays(axes: Any, findings: Any) -> None:
    price = findings.tables["nodes"]["dv_mean_m_s_yr"]
    axes.hist(price, bins=min(40, max(5, len(price) // 10)), color=TEAL, edgecolor="white", linewidth=0.6)
    year = findings.summary["dv_per_year"]
    axes.axvline(year["mean_m_s"], color=AMBER, linewidth=2.0, label=f"mean {year['mean_m_s']:.3g} m/s a year")
    if year["p99_m_s"] is not None:
        axes.axvline(
            year["p99_m_s"],
            color=PLUM,
            linewidth=1.6,
            linestyle="--",
            label=f"99 % of all draws pay less than {year['p99_m_s']:.3g}",
        )
    axes.set_xlim(left=0.0)
    axes.set_xlabel("holding, mean over samples [m/s per year]")
    axes.set_ylabel("nodes")
    axes.set_title(f"{findings.summary['formation']} held by {findings.summary['policy']}", loc="left")
    axes.legend()


def _against(axes: Any, findings: Any) -> None:
    nodes = findings.tables["nodes"]
    axes.scatter(nodes["continuous_m_s_yr"], nodes["dv_mean_m_s_yr"], s=9, color=TEAL, alpha=0.6, linewidths=0)
    top = float(max(nodes["continuous_m_s_yr"].max(), nodes["dv_mean_m_s_yr"].max()))
    axes.set_xlim(0.0, 1.04 * top)
    axes.set_ylim(0.0, 1.04 * top)
    axes.plot([0.0, top], [0.0, top], color=GREY, linewidth=1.2, linestyle="--", label="the continuous price")
    axes.set_xlabel("continuous price of the slot [m/s per year]")
    axes.set_ylabel("paid by the policy [m/s per year]")
    axes.set_title("Policy against continuous price, node by node", loc="left")
    axes.legend()
