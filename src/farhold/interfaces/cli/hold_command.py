"""``farhold hold CASE --formation F --for "365 d"``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from farhold.interfaces.cli.documents import emit
from farhold.interfaces.cli.options import (
    Going,
    Manner,
    OneOf,
    days,
    force,
    going,
    manner,
    out,
    samples,
    seed,
    threads,
)
from farhold.interfaces.cli.progress import watching
from farhold.interfaces.cli.tables import Sheet
from farhold.interfaces.cli.text import CAUTION, number, plural

if TYPE_CHECKING:
    from farhold.study.campaign import Findings

__all__ = ["command"]

_SAMPLES = 20
_WORST = 10


def _policies() -> tuple[str, ...]:
    from farhold.planning.holding.policies import POLICIES

    return tuple(POLICIES)


@click.command("hold")
@click.argument("case_file", metavar="CASE")
@click.option("--formation", metavar="F", required=True, help="The formation that is held.")
@click.option("--for", "for_", metavar="TIME", required=True, help='How long, with its unit: "365 d".')
@click.option("--policy", cls=OneOf, names=_policies, metavar="NAME", help="How it is held; default the case's.")
@samples
@seed
@going
@out("Keep the study in this folder: tables, pictures, and what --resume needs.")
@force
@threads
@manner
def command(
    case_file: str,
    formation: str,
    for_: str,
    policy: str | None,
    samples: int | None,
    seed: int | None,
    going: Going,
    out: str | None,
    force: bool,
    threads: int | None,
    manner: Manner,
) -> None:
    """Hold a formation of CASE in a closed loop and see what each node pays, over many samples of all errors."""
    for_days = days(for_, "--for")
    with watching(manner) as watch:
        from farhold.study.case import load
        from farhold.study.hold import hold

        found = hold(
            load(case_file),
            formation,
            for_days=for_days,
            policy=policy,
            samples=_SAMPLES if samples is None else samples,
            seed=seed,
            folder=out,
            resume=going.resume,
            force=force,
            cluster=going.cluster,
            allow_mixed=going.allow_mixed,
            threads=threads,
            words=going.words,
            watch=watch,
        )
        if out is not None:
            from farhold.interfaces.figures import draw

            draw("hold", found, out)
    if manner.json:
        emit(found.summary)
    else:
        _print(found, out)


def _print(found: Findings, out: str | None) -> None:
    summary = found.summary
    price, outside = summary["dv_per_year"], summary["violations"]
    sheet = Sheet()
    sheet.line(
        f"{summary['formation']} held by {summary['policy']}: {number(price['mean_m_s'])} m/s a year per node",
        "bold",
    )
    sheet.line(summary["case"], style="dim")
    sheet.line()
    sure = summary["interval_95"]
    continuous = f"{number(price['continuous_m_s'])} m/s a year"
    if price["ratio"] is not None:
        continuous += f"; the policy pays {number(price['ratio'])} times that"
    sheet.labelled(
        [
            (
                "swarm",
                f"{plural(summary['nodes'], 'node')}, {plural(summary['samples'], 'sample')}, "
                f"seed {summary['seed']}, {summary['for_days']:g} d",
            ),
            (
                "per node",
                f"half below {number(price['p50_m_s'])}, 95 % below {number(price['p95_m_s'])}, 99 % below "
                f"{number(price['p99_m_s'])} m/s a year",
            ),
            ("worst off", f"{price['max_node']} pays {number(price['max_m_s'])} m/s a year in its worst draw"),
            ("how sure", _sure(sure)),
            ("continuous", continuous),
            (
                "start-up",
                f"{number(summary['startup']['mean_m_s'])} m/s apart, at most "
                f"{number(summary['startup']['max_m_s'])} m/s",
            ),
            ("burns", f"{number(summary['impulses_per_year'])} a year per node"),
            ("box", _box(outside, summary["nodes"])),
            (
                "propellant",
                f"{number(summary['propellant']['total_kg'])} kg in all, at most "
                f"{number(summary['propellant']['max_kg'])} kg for one node, without margins",
            ),
            *(("note", note) for note in found.notes),
        ]
    )
    worst = found.tables["nodes"].nlargest(_WORST, "dv_mean_m_s_yr")
    sheet.table(
        f"The {_WORST} dearest" if summary["nodes"] > _WORST else "Node by node",
        [
            "node",
            "class",
            "slot",
            "mean\nm/s/yr",
            "worst\nm/s/yr",
            "continuous\nm/s/yr",
            "outside\n%",
            "excursion\nkm",
        ],
        (
            [
                str(row["node"]),
                str(row["class"]),
                str(row["slot"]),
                f"{row['dv_mean_m_s_yr']:.4f}",
                f"{row['dv_max_m_s_yr']:.4f}",
                f"{row['continuous_m_s_yr']:.4f}",
                f"{100.0 * row['outside_share']:.1f}",
                number(row["worst_m"] / 1e3),
            ]
            for row in worst.to_dict("records")
        ),
        text_columns=3,
    )
    sheet.line()
    sheet.labelled([("kept in", out or "nowhere; -o DIR keeps tables, pictures and the way to resume")])
    sheet.line(CAUTION, style="dim")


def _sure(sure: dict[str, list[float | None]]) -> str:
    low, high = sure["mean_m_s"]
    mean = "no interval from one sample" if low is None else f"the mean within {number(low)} to {number(high)}"
    first, last = sure["p99_m_s"]
    tail = (
        "" if first is None or last is None else f", the 99 % within {number(first)} to {number(last)} m/s a year"
    )
    return f"{mean}{tail} (95 %)"


def _box(outside: dict[str, float], nodes: int) -> str:
    if not outside["nodes"]:
        return f"never left; largest excursion {number(outside['worst_m'] / 1e3)} km on an axis"
    return (
        f"left by {outside['nodes']:,} of {plural(nodes, 'node')}, {100.0 * outside['share']:.2g} % of the time; "
        f"largest excursion {number(outside['worst_m'] / 1e3)} km on an axis"
    )
