"""``farhold status DIR``: how far a study is."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import click

from farhold.interfaces.cli.documents import emit
from farhold.interfaces.cli.options import Manner, manner
from farhold.interfaces.cli.tables import Sheet
from farhold.interfaces.cli.text import plain_text

__all__ = ["command"]

_STYLES = {"running": "bold", "stopped": "bold yellow", "finished": "bold green", "damaged": "bold red"}
_BAR = 40


@click.command("status")
@click.argument("folder", metavar="DIR")
@manner
def command(folder: str, manner: Manner) -> None:
    """Say how far the study kept in the folder DIR is, and how to go on with it."""
    from farhold.study.status import status

    document = status(folder)
    if manner.json:
        emit(document)
        return
    sheet = Sheet()
    sheet.line(f"{document['study'] or 'a study'}: {document['state']}", style=_STYLES[document["state"]])
    sheet.line(folder, style="dim")
    sheet.line()
    sheet.labelled(_lines(document))
    if document["resume"]:
        from rich.text import Text

        sheet.line("go on with", style="dim")
        # on a line of its own and never folded, so that it can be copied
        sheet.console.print(Text(plain_text(document["resume"])), soft_wrap=True)


def _lines(document: Mapping[str, Any]) -> Iterator[tuple[str, ...]]:
    done, total = document["done"], document["total"]
    if total:
        bar = ("#" * (_BAR * done // total)).ljust(_BAR, ".")
        yield "chunks", f"{done:,} of {total:,}", ""
        yield "", f"{bar} {100 * done // total} %", "dim"
    if document["state"] == "damaged" and document["resume"]:
        yield "damaged", "what is damaged is computed again, the rest is kept"
    elif document["state"] == "damaged":
        yield "damaged", "study.json does not match its digest: restore it, or begin anew with --force"
    elif document["state"] == "stopped" and not document["resume"]:
        yield "go on", "from Python, as it was begun, with resume=True"
