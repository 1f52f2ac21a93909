"""``farhold post QUOTE --ledger L``."""

from __future__ import annotations

import click

from farhold.interfaces.cli.documents import emit
from farhold.interfaces.cli.options import Manner, manner
from farhold.interfaces.cli.progress import watching
from farhold.interfaces.cli.tables import Sheet
from farhold.interfaces.cli.text import CAUTION, plural

__all__ = ["command"]


@click.command("post")
@click.argument("quote_folder", metavar="QUOTE")
@click.option("--ledger", "ledger_folder", metavar="LEDGER", required=True, help="The ledger to enter it in.")
@click.option("--requote", is_flag=True, help="Price it again on the ledger as it stands now.")
@manner
def command(quote_folder: str, ledger_folder: str, requote: bool, manner: Manner) -> None:
    """Enter the quote saved in the folder QUOTE in a ledger."""
    from farhold.study.book import Ledger
    from farhold.study.quote_folder import load_quote

    with watching(manner) as watch:
        watch.stage(f"posting {quote_folder}")
        quote = load_quote(quote_folder)
        summary = Ledger.open(ledger_folder).post(quote, requote=requote).summary
    if manner.json:
        emit(summary)
        return
    sheet = Sheet()
    entries, nodes = plural(summary["entries"], "entry", "entries"), plural(summary["nodes"], "node")
    sheet.labelled(
        [
            ("posted", f"{entries} for {nodes}"),
            ("quote", summary["quote"]),
            ("ledger", ledger_folder),
            ("head", summary["ledger_head"]),
        ]
    )
    sheet.line(CAUTION, style="dim")
