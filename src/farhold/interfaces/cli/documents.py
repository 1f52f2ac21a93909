"""The one JSON document of a command: plain values only, a number that is not finite becomes null."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING, Any

import click

from farhold.errors import Fault

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["emit", "fault_document", "plain", "rows"]


def plain(value: Any) -> Any:
    """Return `value` built of dict, list, str, int, float, bool and None alone."""
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, str) or value is None or isinstance(value, bool):
        return value
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, int):
        return int(value)
    if hasattr(value, "isoformat"):
        text = value.isoformat()
        return None if text == "NaT" else text
    if hasattr(value, "tolist"):
        return plain(value.tolist())
    if isinstance(value, Iterable):
        return [plain(item) for item in value]
    # pandas' own missing value compares to nothing, itself included
    return None if type(value).__name__ == "NAType" else str(value)


def rows(frame: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of `frame` as dictionaries by column name."""
    return [plain(row) for row in frame.to_dict("records")]


def emit(document: Mapping[str, Any]) -> None:
    """Write `document` on standard output."""
    click.echo(json.dumps(plain(document), indent=2, allow_nan=False))


def fault_document(exit_code: int, faults: Iterable[Fault]) -> dict[str, Any]:
    """Return the document of a failure."""
    return {
        "kind": "fault",
        "exit": exit_code,
        "faults": [
            {"where": fault.where, "what": fault.what, "allowed": fault.allowed, "hint": fault.hint}
            for fault in faults
        ],
    }
