"""A quote on disk: one folder of two documents and two tables, there whole or not at all."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from farhold.errors import CaseError, Fault
from farhold.files import durable_folder, write_bytes_durably
from farhold.study.quote import Quote, digest_of_quote

__all__ = ["load_quote", "save_quote"]

_SUMMARY, _NODES, _IMPULSES, _REQUEST = "quote.json", "nodes.parquet", "impulses.parquet", "request.json"
_ASKED = {"to", "depart", "over_days", "objective", "horizon_days", "accuracy", "case_path"}


def save_quote(quote: Quote, folder: str | Path, *, force: bool = False) -> Path:
    """Write `quote` to a new folder; with `force` one that already holds a quote is replaced.

    Raises
    ------
    OutputExistsError
        The folder exists and `force` is not given, or holds something else.
    FarholdError
        It cannot be written.
    """
    path = Path(folder)
    with durable_folder(path, force, _is_quote) as aside:
        for name, document in (
            (_SUMMARY, quote.summary),
            (_REQUEST, {**quote.request, "notes": quote.notes}),
        ):
            write_bytes_durably(aside / name, (json.dumps(document, indent=1, allow_nan=False) + "\n").encode())
        for name, frame in ((_NODES, quote.nodes), (_IMPULSES, quote.impulses)):
            sink = pa.BufferOutputStream()
            pq.write_table(pa.Table.from_pandas(frame, preserve_index=False), sink)
            write_bytes_durably(aside / name, sink.getvalue().to_pybytes())
    return path


def load_quote(folder: str | Path) -> Quote:
    """Read a quote back and check that it is the one that was priced.

    Raises
    ------
    CaseError
        No quote is there, a file is missing, unreadable or truncated, or the content was changed.
    """
    path = Path(folder)
    if not path.is_dir():
        what = "there is no such folder" if not path.exists() else "this is a file, not the folder of a quote"
        raise CaseError(Fault(str(path), what, "a folder written by farhold quote ... -o DIR"))
    summary = _document(path / _SUMMARY)
    request = _document(path / _REQUEST)
    nodes, impulses = _frame(path / _NODES), _frame(path / _IMPULSES)
    if summary.get("kind") != "quote" or summary.get("schema") != 1:
        raise CaseError(Fault(str(path / _SUMMARY), "this is not a quote of schema 1", "a quote of this version"))
    if digest_of_quote(summary, nodes, impulses) != summary.get("quote"):
        raise CaseError(
            Fault(
                str(path),
                "the quote's content does not match its digest: it was changed",
                hint="price it again",
            )
        )
    lacking = sorted(_ASKED - request.keys())
    if lacking:
        raise CaseError(Fault(str(path / _REQUEST), f"lacks {', '.join(lacking)}", hint="price the quote again"))
    notes = request.pop("notes", [])
    return Quote(summary, nodes, impulses, list(notes), request)


def _is_quote(name: str) -> bool:
    """Whether a file name belongs to a quote, so that ``--force`` may replace a folder of such files."""
    return name in {_SUMMARY, _NODES, _IMPULSES, _REQUEST}


def _document(path: Path) -> dict[str, Any]:
    """Read one JSON document."""
    try:
        document = json.loads(path.read_bytes())
    except FileNotFoundError:
        raise CaseError(Fault(str(path), "the file is missing", hint="price the quote again")) from None
    except (OSError, ValueError) as error:
        raise CaseError(Fault(str(path), f"unreadable: {error}", hint="price the quote again")) from None
    if not isinstance(document, dict):
        raise CaseError(Fault(str(path), "not a JSON document of a quote", hint="price the quote again"))
    return document


def _frame(path: Path) -> pd.DataFrame:
    """Read one Parquet table."""
    try:
        frame: pd.DataFrame = pq.read_table(path).to_pandas()
    except FileNotFoundError:
        raise CaseError(Fault(str(path), "the file is missing", hint="price the quote again")) from None
    except (OSError, pa.ArrowException):
        raise CaseError(
            Fault(str(path), "unreadable or truncated Parquet", hint="price the quote again")
        ) from None
    return frame
