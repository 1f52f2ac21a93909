"""Exports of a ledger, by file ending; a new ending is one file here and one line in the table.

A file of this room offers a function ``(ledger, nodes) -> bytes``.
"""

from __future__ import annotations

import difflib
import importlib
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from farhold.errors import CaseError, FarholdError, Fault
from farhold.files import refuse_existing, write_bytes_durably

if TYPE_CHECKING:
    from farhold.study.book import Ledger

__all__ = ["EXPORTS", "export"]

# ending: (module, function, what it is)
EXPORTS: dict[str, tuple[str, str, str]] = {
    ".xlsx": ("workbook", "render", "workbook with live balances"),
    ".csv": ("tables", "render_csv", "entries as comma-separated text"),
    ".parquet": ("tables", "render_parquet", "entries as a Parquet table"),
}


def export(ledger: Ledger, path: str | Path, nodes: Sequence[str] | None = None, force: bool = False) -> Path:
    """Write a ledger to a file; the ending of `path` chooses what is written.

    Parameters
    ----------
    ledger : Ledger
    path : str or Path
        ``.xlsx``: summary, balances, entries and assumptions with formulas that stay live.
        ``.csv`` and ``.parquet``: the entries, with the columns of the ledger. In ``.csv`` every text is
        quoted and exact: nothing is put before a note that begins with ``=``, so a spreadsheet should be told
        to import such a column as text (or be given the ``.xlsx``).
    nodes : sequence of str, optional
        Only these nodes, in the ledger's order.
    force : bool
        Replace a file that is there.

    Returns
    -------
    Path
        The file written.

    Raises
    ------
    FarholdError
        The ending is unknown, or the file cannot be written (exit 2).
    OutputExistsError
        The file is there and `force` is false (exit 2).
    CaseError
        A node is not in the ledger (exit 2).
    """
    path = Path(path)
    ending = path.suffix.lower()
    if ending not in EXPORTS:
        close = difflib.get_close_matches(ending, EXPORTS, n=1)
        hint = f"did you mean {path.stem}{close[0]}?" if close else ""
        raise FarholdError(Fault(str(path), f"the ending {ending!r} is unknown", ", ".join(EXPORTS), hint))
    refuse_existing(path, force)
    if path.is_dir():
        raise FarholdError(Fault(str(path), "is a folder, not a file", hint="name a file"))
    if nodes is not None:
        _refuse_unknown(nodes, [str(name) for name in ledger.terms["node"]])
    module, function, _ = EXPORTS[ending]
    render = getattr(importlib.import_module(f"{__name__}.{module}"), function)
    write_bytes_durably(path, render(ledger, nodes))
    return path


def _refuse_unknown(nodes: Sequence[str], known: list[str]) -> None:
    if not nodes:
        raise FarholdError(Fault("--nodes", "names no node", "names of nodes with commas between"))
    lawful = set(known)
    faults = []
    for name in nodes:
        if name not in lawful:
            close = difflib.get_close_matches(name, known, n=1, cutoff=0.5)
            faults.append(
                Fault(
                    "--nodes",
                    f"no node {name!r} in this ledger",
                    hint=f"did you mean {close[0]!r}?" if close else "",
                )
            )
    if faults:
        raise CaseError(faults)
