"""``farhold check CASE``."""

from __future__ import annotations

import click

from farhold.interfaces.cli.documents import emit
from farhold.interfaces.cli.options import Manner, manner
from farhold.interfaces.cli.tables import Sheet
from farhold.interfaces.cli.text import CAUTION, plural

__all__ = ["command"]


@click.command("check")
@click.argument("case_file", metavar="CASE")
@manner
def command(case_file: str, manner: Manner) -> None:
    """Validate the file CASE, say in plain words what would be flown, and warn."""
    from farhold.study.case import load
    from farhold.study.check import check

    result = check(load(case_file))
    if manner.json:
        emit(result.summary)
        return
    sheet = Sheet()
    for line in result.lines:
        sheet.line(line, hang=2)
    warnings = [str(warning) for warning in result.summary["warnings"]]
    sheet.line()
    if warnings:
        sheet.line(plural(len(warnings), "warning"), style="bold yellow")
        sheet.labelled(((f"{place}.", text) for place, text in enumerate(warnings, 1)), width=3)
    else:
        sheet.line("No warnings.", style="bold")
    sheet.line()
    sheet.line(CAUTION, style="dim")
