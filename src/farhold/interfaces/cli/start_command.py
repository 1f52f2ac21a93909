"""``farhold start DIR``."""

from __future__ import annotations

import click

from farhold.interfaces.cli.documents import emit
from farhold.interfaces.cli.options import Manner, force, manner
from farhold.interfaces.cli.tables import Sheet

__all__ = ["command"]


@click.command("start")
@click.argument("folder", metavar="DIR")
@force
@manner
def command(folder: str, force: bool, manner: Manner) -> None:
    """Write a ready case to edit into the new folder DIR."""
    from farhold.study.start import start

    files = [str(path) for path in start(folder, force=force)]
    if manner.json:
        emit({"kind": "start", "schema": 1, "files": files})
        return
    case = next((name for name in files if name.endswith(".toml")), files[0])
    sheet = Sheet()
    sheet.labelled(("wrote", name) for name in files)
    sheet.line(f"Edit it, then: farhold check {case}")
