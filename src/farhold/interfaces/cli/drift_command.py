"""``farhold drift CASE --formation F --for "365 d"``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from farhold.interfaces.cli.documents import emit
from farhold.interfaces.cli.options import (
    Going,
    Manner,
    OneOf,
    accuracy,
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
_WORST = 5


@click.command("drift")
@click.argument("case_file", metavar="CASE")
@click.option("--formation", metavar="F", required=True, help="The formation that is let go.")
@click.option("--for", "for_", metavar="TIME", required=True, help='How long, with its unit: "365 d".')
@samples
@seed
@going
@out("Keep the study in this folder: tables, pictures, and what --resume needs.")
@force
@accuracy
@click.option(
    "--lane",
    cls=OneOf,
    names=lambda: ("full", "fast"),
    metavar="NAME",
    default="full",
    help="What it is flown on.",
)
@threads
@manner
def command(
    case_file: str,
    formation: str,
    for_: str,
    samples: int | None,
    seed: int | None,
    going: Going,
    out: str | None,
    force: bool,
    accuracy: str,
    lane: str,
    threads: int | None,
    manner: Manner,
) -> None:
    """Let a formation of CASE go and see how far its nodes drift, over many samples of all errors."""
    for_days = days(for_, "--for")
    with watching(manner) as watch:
        from farhold.study.case import load
        from farhold.study.drift import drift

        found = drift(
            load(case_file),
            formation,
            for_days=for_days,
            samples=_SAMPLES if samples is None else samples,
            pair_samples=going.pair_samples,
            seed=seed,
            accuracy=accuracy,
            lane=lane,
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

            draw("drift", found, out)
    if manner.json:
        emit(found.summary)
    else:
        _print(found, out)


def _print(found: Findings, out: str | None) -> None:
    summary = found.summary
    last = summary["displacement_km"][-1]
    sheet = Sheet()
    sheet.line(
        f"{summary['formation']} left alone for {summary['for_days']:g} d: half of all draws end within "
        f"{number(last['p50'])} km",
        "bold",
    )
    sheet.line(summary["case"], style="dim")
    sheet.line()
    leaves, closest, links = summary["leaves_tolerance_days"], summary["closest"], summary["link_breaks"]
    bent = summary["distortion"]
    lines = [
        (
            "swarm",
            f"{plural(summary['nodes'], 'node')}, {plural(summary['samples'], 'sample')}, seed {summary['seed']}",
        ),
        ("leaves box", _leaves(leaves)),
        ("baselines", _bent(bent)),
        ("closest", _closest(closest)),
    ]
    if links["nodes"] is not None:
        first = "" if links["first_day"] is None else f", the first on day {number(links['first_day'])}"
        lines.append(
            ("links", f"{plural(links['nodes'], 'member')} out of range of every hub at some time{first}")
        )
    sheet.labelled([*lines, *(("note", note) for note in found.notes)])
    sheet.table(
        "Distance from the slot",
        ["day", "half\nkm", "95 %\nkm", "99 %\nkm", "farthest\nkm", "R 95 %\nkm", "T 95 %\nkm", "N 95 %\nkm"],
        (
            [
                number(size["day"]),
                *(number(size[name]) for name in ("p50", "p95", "p99", "max")),
                *(number(axis[name]) for name in ("r_p95", "t_p95", "n_p95")),
            ]
            for size, axis in zip(summary["displacement_km"], summary["by_axis_km"], strict=True)
        ),
        text_columns=0,
    )
    worst = found.tables["nodes"].nlargest(_WORST, "rms_km")
    sheet.table(
        f"The {_WORST} that drift farthest",
        ["node", "class", "slot", "rms\nkm", "farthest\nkm"],
        (
            [str(row["node"]), str(row["class"]), str(row["slot"]), number(row["rms_km"]), number(row["max_km"])]
            for row in worst.to_dict("records")
        ),
        text_columns=3,
    )
    sheet.line()
    sheet.labelled([("kept in", out or "nowhere; -o DIR keeps tables, pictures and the way to resume")])
    sheet.line(CAUTION, style="dim")


def _leaves(leaves: dict[str, float | None]) -> str:
    if leaves["p05"] is None:
        return "hardly any node leaves its box in this time"
    half = "and less than half do at all" if leaves["p50"] is None else f"half by day {number(leaves['p50'], 3)}"
    return f"5 % of draws by day {number(leaves['p05'], 3)}, {half}"


def _bent(bent: dict[str, float | None]) -> str:
    if bent["rms_relative"] is None:
        return "no pairs to follow"
    rms, worst = number(bent["rms_relative"], 3), number(bent["worst_relative"], 3)
    return f"change by {rms} of their length (rms), at most {worst}"


def _closest(closest: dict[str, object]) -> str:
    pair, distance, day = closest["pair"], closest["distance_m"], closest["day"]
    if not isinstance(pair, list) or not isinstance(distance, float) or not isinstance(day, float):
        return "not looked at"
    return f"{pair[0]} and {pair[1]} come within {number(distance)} m on day {number(day)}, of the days looked at"
