"""``farhold quote CASE --to F --over "30 d"``: the answer first, then who pays, then where it was kept."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

import click

from farhold.interfaces.cli.documents import emit
from farhold.interfaces.cli.options import Manner, OneOf, accuracy, days, force, manner, out, threads
from farhold.interfaces.cli.progress import watching
from farhold.interfaces.cli.tables import Sheet, spread
from farhold.interfaces.cli.text import CAUTION, listed, number, plural, years

if TYPE_CHECKING:
    import pandas as pd

    from farhold.study.quote import Quote

__all__ = ["command"]

_DEAREST = 10


def _objectives() -> tuple[str, ...]:
    from farhold.planning.assignment.objectives import OBJECTIVES

    return tuple(OBJECTIVES)


@click.command("quote")
@click.argument("case_file", metavar="CASE")
@click.option("--to", metavar="F", required=True, help="The formation to go to.")
@click.option("--from", "from_", metavar="F", help="The formation to leave; default the one in force.")
@click.option("--depart", metavar="EPOCH", help="When, TDB; default the ledger's last epoch, else the case's.")
@click.option("--over", metavar="TIME", required=True, help='How long it takes, with its unit: "30 d".')
@click.option(
    "--objective",
    cls=OneOf,
    names=_objectives,
    metavar="NAME",
    default="least-total",
    help="What is made least; default least-total.",
)
@click.option("--horizon", metavar="TIME", help="How far holding is counted for the net price; default --over.")
@click.option("--ledger", metavar="LEDGER", help="Start from where a ledger says the nodes are.")
@out("Keep the quote in this new folder; farhold post reads it.")
@force
@accuracy
@threads
@manner
def command(
    case_file: str,
    to: str,
    from_: str | None,
    depart: str | None,
    over: str,
    objective: str,
    horizon: str | None,
    ledger: str | None,
    out: str | None,
    force: bool,
    accuracy: str,
    threads: int | None,
    manner: Manner,
) -> int:
    """Price a change of formation of the swarm of CASE: who flies where, what each pays, who cannot."""
    over_days = days(over, "--over")
    horizon_days = None if horizon is None else days(horizon, "--horizon")
    if out is not None:
        from farhold.files import refuse_existing

        refuse_existing(out, force)
    with watching(manner) as watch:
        from farhold.study.case import load
        from farhold.study.quote import quote

        priced = quote(
            load(case_file),
            to=to,
            from_=from_,
            depart=depart,
            over_days=over_days,
            objective=objective,
            horizon_days=horizon_days,
            ledger=ledger,
            accuracy=accuracy,
            threads=threads,
            watch=watch,
        )
        if out is not None:
            priced.save(out, force=force)
    if manner.json:
        emit(priced.summary)
    else:
        _print(priced, out)
    return 0 if priced.affordable else 3


def _print(priced: Quote, out: str | None) -> None:
    summary = priced.summary
    sheet = Sheet()
    sheet.line(f"{summary['from']} to {summary['to']}: {number(summary['dv']['total_m_s'])} m/s in all", "bold")
    sheet.line(summary["case"], style="dim")
    sheet.line()
    sheet.labelled(_answer(summary))
    for note in priced.notes:
        sheet.labelled([("note", note)])
    _who_pays(sheet, priced.nodes, frozenset(summary["cannot_afford"]))
    sheet.line()
    kept = f"{out}; enter it with: farhold post {out} --ledger LEDGER" if out else "nowhere; -o DIR keeps it"
    if not summary["affordable"] and out:
        kept = f"{out}; farhold post refuses it while nodes cannot afford it"
    sheet.labelled([("kept in", kept), ("quote", summary["quote"])])
    sheet.line(CAUTION, style="dim")


def _answer(summary: Mapping[str, Any]) -> Iterator[tuple[str, ...]]:
    dv, propellant, holding = summary["dv"], summary["propellant"], summary["holding"]
    yield (
        "flight",
        f"departs {summary['depart']} TDB, {summary['over_days']:g} d on the way, "
        f"{summary['objective']}; {plural(summary['nodes'], 'node')}, {summary['moved']:,} moved",
    )
    yield (
        "per node",
        f"mean {number(dv['mean_m_s'])}, median {number(dv['median_m_s'])}, "
        f"95 % below {number(dv['p95_m_s'])} m/s",
    )
    yield "worst off", f"{dv['max_node']} pays {number(dv['max_m_s'])} m/s"
    yield "affordable", _affordable(summary), "" if summary["affordable"] else "bold red"
    yield (
        "propellant",
        f"{number(propellant['total_kg'])} kg in all, at most {number(propellant['max_kg'])} kg; "
        f"margin on top {number(propellant['margin_kg'])} kg",
    )
    yield "life after", _life(summary["life_after"])
    yield (
        "net price",
        f"{number(holding['net_total_m_s'])} m/s with holding to day {summary['horizon_days']:g}: "
        f"new slots {number(holding['new_total_m_s'])}, old slots spared {number(holding['old_total_m_s'])}",
    )
    yield (
        "to hold",
        f"mean {number(holding['before_mean_m_s_yr'])} before, {number(holding['after_mean_m_s_yr'])} after, "
        f"at most {number(holding['after_max_m_s_yr'])} m/s per year",
    )
    yield "best price", _proof(summary["assignment"])
    if summary["targeting"].get("max_miss_m") is not None:
        yield "arrival", f"flown again, the largest miss is {number(summary['targeting']['max_miss_m'], 2)} m"


def _affordable(summary: Mapping[str, Any]) -> str:
    cannot = summary["cannot_afford"]
    if summary["affordable"]:
        return "yes, by every node, with margins and reserves"
    return f"NO: {len(cannot):,} of {plural(summary['nodes'], 'node')} cannot pay: {listed(cannot)}"


def _life(life: Mapping[str, Any]) -> str:
    if life["min_years"] is None:
        return "not computed"
    who = f" ({life['limiting_node']})" if life["limiting_node"] else ""
    return f"least {years(life['min_years'])} years{who}, median {years(life['median_years'])} years"


def _proof(assignment: Mapping[str, Any]) -> str:
    # a bound without a gap says nothing, so both or neither
    if assignment["gap"] is None:
        return f"not proven ({assignment['method']})"
    unit = assignment["unit"]
    verdict = "proven: no other pairing is cheaper" if assignment["proven"] else "not proven"
    bound = f"{number(assignment['lower_bound'])} {unit}"
    text = f"{verdict}; gap {number(assignment['gap'], 2)} {unit} to the bound {bound}"
    if assignment["map_error_m_s"] is not None:
        text += f"; map error {number(assignment['map_error_m_s'], 2)} m/s"
    return text


def _who_pays(sheet: Sheet, nodes: pd.DataFrame, cannot: frozenset[str]) -> None:
    most = float(nodes["dv_total_m_s"].max())
    rows = []
    for name, group in nodes.groupby("class", sort=False):
        dv = group["dv_total_m_s"]
        rows.append(
            [
                str(name),
                f"{len(group):,}",
                f"{dv.mean():.4f}",
                f"{dv.quantile(0.95):.4f}",
                f"{dv.max():.4f}",
                f"{group['propellant_kg'].sum():.4f}",
                f"{sum(node in cannot for node in group['node']):,}",
                spread(dv.tolist(), most),
            ]
        )
    heads = [
        "class",
        "nodes",
        "mean\nm/s",
        "95 %\nm/s",
        "worst\nm/s",
        "propellant\nkg",
        "cannot\npay",
        "0 to worst\nm/s",
    ]
    sheet.table("Who pays", heads, rows)
    dearest = nodes.nlargest(_DEAREST, "dv_total_m_s")
    sheet.table(
        f"The {_DEAREST} dearest" if len(nodes) > _DEAREST else "Node by node",
        ["node", "class", "slot", "dv\nm/s", "propellant\nkg", "usable after\nkg", "life\nyears"],
        (
            [
                str(row["node"]),
                str(row["class"]),
                str(row["slot"]),
                f"{row['dv_total_m_s']:.4f}",
                f"{row['propellant_kg']:.5f}",
                f"{row['usable_kg']:.5f}",
                years(row["life_years"]),
            ]
            for row in dearest.to_dict("records")
        ),
        text_columns=3,
    )
