"""Words and numbers for people: what leaves here is safe to print on a terminal."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Iterable, Sequence

__all__ = ["CAUTION", "NOTHING", "listed", "nearest", "number", "plain_text", "plural", "years"]

CAUTION = (
    "Planning estimate, not a flight-certified command: the responsible flight-dynamics and safety authority "
    "decides."
)
NOTHING = "-"
_UNPRINTABLE = re.compile("[\x00-\x1f\x7f-\x9f\u200e\u200f\u2028-\u202e\u2066-\u2069\ud800-\udfff]")


def plain_text(value: object) -> str:
    """Return `value` as text in which control and direction characters are written out, never obeyed."""
    return _UNPRINTABLE.sub(lambda match: match.group().encode("unicode_escape").decode(), str(value))


def number(value: float | None, digits: int = 4) -> str:
    """Write `value` with about `digits` significant digits, without an exponent between 1e-4 and 1e7."""
    if value is None or math.isnan(value):
        return NOTHING
    if value == 0 or math.isinf(value):
        return "0" if value == 0 else str(value)
    size = abs(value)
    if not 1e-4 <= size < 1e7:
        return f"{value:.{digits - 1}e}"
    return f"{value:,.{max(0, digits - 1 - math.floor(math.log10(size)))}f}"


def years(value: float | None, cap_years: float = 100.0) -> str:
    """Write a life in years; the cap reads as a lower bound."""
    if value is None or math.isnan(value):
        return NOTHING
    return f"over {cap_years:.0f}" if value >= cap_years else f"{value:.1f}"


def plural(count: int, word: str, many: str | None = None) -> str:
    """Write ``1 node`` or ``12 nodes``."""
    return f"{count:,} {word if count == 1 else many or word + 's'}"


def listed(names: Sequence[object], most: int = 8) -> str:
    """Write up to `most` names, then how many more there are."""
    shown = ", ".join(plain_text(name) for name in names[:most])
    return shown if len(names) <= most else f"{shown} and {len(names) - most:,} more"


def nearest(word: str, known: Iterable[str]) -> str:
    """Write ``did you mean 'x'?`` for the known word nearest to `word`, or nothing."""
    close = difflib.get_close_matches(word, list(known), n=1, cutoff=0.5)
    return f"did you mean {close[0]!r}?" if close else ""
