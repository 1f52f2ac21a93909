"""``farhold ledger VERB LEDGER ...``: the propellant book."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from farhold.interfaces.cli.documents import emit, plain, rows
from farhold.interfaces.cli.group import OurGroup
from farhold.interfaces.cli.options import Manner, force, manner, out, whole
from farhold.interfaces.cli.progress import watching
from farhold.interfaces.cli.tables import Sheet
from farhold.interfaces.cli.text import CAUTION, number, plural, years

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["command"]

_SHOWN = 40
_LOWEST = 10


@click.group("ledger", cls=OurGroup, no_args_is_help=True)
def command() -> None:
    """Create, read, audit, correct or export a ledger: farhold ledger VERB LEDGER."""


@command.command("create")
@click.argument("ledger", metavar="LEDGER")
@click.argument("case_file", metavar="CASE")
@force
@manner
def create(ledger: str, case_file: str, force: bool, manner: Manner) -> None:
    """Open a new ledger with the swarm of CASE."""
    from farhold.study.book import Ledger
    from farhold.study.case import load

    with watching(manner) as watch:
        watch.stage(f"opening {ledger}")
        book = Ledger.create(ledger, load(case_file), force=force)
        balances = book.balances()
    if manner.json:
        emit({"kind": "create", "schema": 1, "ledger_head": book.head, "nodes": len(balances)})
        return
    sheet = Sheet()
    loaded = f"{plural(len(balances), 'node')} with {number(balances['loaded_kg'].sum())} kg of propellant"
    sheet.labelled([("opened", ledger), ("holds", loaded), ("head", book.head)])


@command.command("balances")
@click.argument("ledger", metavar="LEDGER")
@manner
def balances(ledger: str, manner: Manner) -> None:
    """Show what every node has left."""
    from farhold.study.book import Ledger

    book = Ledger.open(ledger)
    frame = book.balances()
    if manner.json:
        emit({"kind": "balances", "schema": 1, "ledger_head": book.head, "rows": rows(frame)})
        return
    sheet = Sheet()
    left = f"{number(frame['usable_kg'].sum())} kg usable of {number(frame['loaded_kg'].sum())} kg loaded"
    sheet.line(f"{plural(len(frame), 'node')}: {left}", style="bold")
    sheet.line(book.title, style="dim")
    _by_class(sheet, frame)
    few = len(frame) <= _SHOWN
    shown = frame.sort_values("usable_kg", kind="stable").head(_SHOWN if few else _LOWEST)
    sheet.table(
        "Every node, least usable first" if few else f"The {_LOWEST} with least usable",
        ["node", "class", "status", "slot", "spent\nkg", "margin\nkg", "usable\nkg", "life\nyears"],
        (
            [
                *(str(row[name]) for name in ("node", "class", "status", "slot")),
                *(f"{row[name]:.5f}" for name in ("spent_kg", "margin_kg", "usable_kg")),
                years(row["life_years"]),
            ]
            for row in shown.to_dict("records")
        ),
        text_columns=4,
    )
    sheet.line()
    if not few:
        sheet.line(f"All {len(frame):,}: --json, or farhold ledger export {ledger} -o balances.xlsx")
    sheet.labelled([("head", book.head)])
    sheet.line(CAUTION, style="dim")


def _by_class(sheet: Sheet, frame: pd.DataFrame) -> None:
    sheet.table(
        "By class",
        [
            "class",
            "nodes",
            "loaded\nkg",
            "spent\nkg",
            "margin\nkg",
            "usable\nkg",
            "least usable\nkg",
            "least life\nyears",
        ],
        (
            [
                str(name),
                f"{len(group):,}",
                *(f"{group[column].sum():.4f}" for column in ("loaded_kg", "spent_kg", "margin_kg", "usable_kg")),
                f"{group['usable_kg'].min():.5f}",
                years(group["life_years"].min()),
            ]
            for name, group in frame.groupby("class", sort=False)
        ),
    )


@command.command("statement")
@click.argument("ledger", metavar="LEDGER")
@click.argument("node", metavar="NODE")
@manner
def statement(ledger: str, node: str, manner: Manner) -> None:
    """Show every entry of one node."""
    from farhold.study.book import Ledger

    book = Ledger.open(ledger)
    frame = book.statement(node)
    if manner.json:
        emit({"kind": "statement", "schema": 1, "ledger_head": book.head, "rows": rows(frame)})
        return
    sheet = Sheet()
    last = frame.iloc[-1]
    sheet.line(
        f"{node}: {last['mass_after_kg']:.5f} kg after {plural(len(frame), 'entry', 'entries')}", style="bold"
    )
    sheet.line(book.title, style="dim")
    sheet.table(
        "Statement",
        ["seq", "epoch TDB", "cause", "dv\nm/s", "propellant\nkg", "margin\nkg", "mass after\nkg"],
        (
            [
                f"{row['seq']}",
                str(plain(row["epoch_tdb"]))[:19],
                str(row["cause"]),
                f"{row['dv_m_s']:.4f}",
                f"{row['propellant_kg']:.5f}",
                f"{row['margin_kg']:.5f}",
                f"{row['mass_after_kg']:.5f}",
            ]
            for row in frame.to_dict("records")
        ),
        text_columns=3,
    )
    sheet.line()
    for row in frame.to_dict("records"):
        source = f"source {row['source'][:12]}" if row["source"] else ""
        remarks = [text for text in (row["note"], source) if text]
        if remarks:
            sheet.labelled([(f"seq {row['seq']}", "; ".join(remarks))])
    sheet.labelled([("head", book.head)])


@command.command("audit")
@click.argument("ledger", metavar="LEDGER")
@manner
def audit(ledger: str, manner: Manner) -> None:
    """Compute everything again.

    Exit 4 names the first entry that fails.
    """
    from farhold.study.book import Ledger

    with watching(manner) as watch:
        watch.stage(f"auditing {ledger}")
        book = Ledger.open(ledger)
        frame = book.audit()
    if manner.json:
        emit({"kind": "audit", "schema": 1, "ledger_head": book.head, "rows": rows(frame)})
        return
    sheet = Sheet()
    sheet.line(f"{ledger} is sound: {plural(len(frame), 'check')} passed", style="bold")
    sheet.labelled((row["check"], f"{row['result']}: {row['detail']}") for row in frame.to_dict("records"))
    sheet.line()
    sheet.labelled([("head", book.head)])


@command.command("correct")
@click.argument("ledger", metavar="LEDGER")
@click.argument("seq", metavar="SEQ", callback=whole(0))
@click.option("--why", metavar="TEXT", required=True, help="The reason, kept with the correction.")
@manner
def correct(ledger: str, seq: int, why: str, manner: Manner) -> None:
    """Reverse entry SEQ by a new entry.

    Nothing is edited: the reversed entry stays.
    """
    from farhold.study.book import Ledger

    book = Ledger.open(ledger)
    book.correct(seq, why)
    if manner.json:
        emit({"kind": "correct", "schema": 1, "seq": seq, "ledger_head": book.head})
        return
    Sheet().labelled([("reversed", f"entry {seq} of {ledger}"), ("head", book.head)])


@command.command("export")
@click.argument("ledger", metavar="LEDGER")
@out("The file to write; its ending says what: .xlsx, .csv or .parquet.", required=True, metavar="FILE")
@click.option("--nodes", metavar="A,B", help="These nodes only.")
@force
@manner
def export(ledger: str, out: str, nodes: str | None, force: bool, manner: Manner) -> None:
    """Write a spreadsheet or a table."""
    from farhold.interfaces.export import export
    from farhold.study.book import Ledger

    book = Ledger.open(ledger)
    chosen = None if nodes is None else [name.strip() for name in nodes.split(",") if name.strip()]
    with watching(manner) as watch:
        watch.stage(f"writing {out}")
        written = export(book, out, nodes=chosen, force=force)
    if manner.json:
        emit({"kind": "export", "schema": 1, "file": str(written), "ledger_head": book.head})
        return
    Sheet().labelled([("wrote", str(written)), ("head", book.head)])
