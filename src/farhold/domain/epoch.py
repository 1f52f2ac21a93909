"""Epochs: barycentric dynamical time (TDB) as whole nanoseconds, so that no difference loses a metre."""

from __future__ import annotations

import datetime as dt
import re
from dataclasses import dataclass

from farhold.errors import DomainError, Fault

__all__ = ["DAY_S", "YEAR_S", "Epoch"]

DAY_S = 86400.0
YEAR_S = 365.25 * DAY_S

_FORM = re.compile(r"(\d{4})-(\d{2})-(\d{2})(?:[T ](\d{2}):(\d{2})(?::(\d{2})(?:\.(\d{1,9}))?)?)?")
_ORIGIN = dt.datetime(1970, 1, 1)


@dataclass(frozen=True, slots=True, order=True)
class Epoch:
    """One instant of TDB: `ns` is nanoseconds since 1970-01-01T00:00:00 TDB (which has no leap seconds)."""

    ns: int

    @classmethod
    def from_iso(cls, text: str, where: str = "epoch") -> Epoch:
        """Read ``YYYY-MM-DD[THH:MM[:SS[.fff]]]``, taken as TDB.

        Raises
        ------
        DomainError
            The text is no such date, or the date does not exist.
        """
        match = _FORM.fullmatch(text.strip())
        allowed = "ISO 8601 in TDB from 1900 to 2100, such as 2035-03-20T00:00:00"
        if match is None:
            raise DomainError(Fault(where, f"{text!r} is not an epoch", allowed))
        year, month, day, hour, minute, second = (int(part or 0) for part in match.groups()[:6])
        fraction = (match.group(7) or "").ljust(9, "0")
        try:
            whole = dt.datetime(year, month, day, hour, minute, second)
        except ValueError:
            raise DomainError(Fault(where, f"{text!r} is not a date that exists", allowed)) from None
        if not 1900 <= year <= 2100:
            raise DomainError(Fault(where, f"{text!r} lies outside 1900 to 2100", allowed))
        delta = whole - _ORIGIN
        return cls((delta.days * 86400 + delta.seconds) * 10**9 + int(fraction))

    def iso(self) -> str:
        """Write as ISO 8601, with a fraction only where there is one."""
        seconds, ns = divmod(self.ns, 10**9)
        text = (_ORIGIN + dt.timedelta(seconds=seconds)).isoformat()
        return text if ns == 0 else f"{text}.{ns:09d}".rstrip("0")

    def plus(self, seconds: float) -> Epoch:
        """Return the epoch `seconds` later, to the nearest nanosecond."""
        whole = int(seconds // 1)
        return Epoch(self.ns + whole * 10**9 + round((seconds - whole) * 1e9))

    def seconds_since(self, other: Epoch) -> float:
        """Seconds from `other` to this epoch."""
        whole, rest = divmod(self.ns - other.ns, 10**9)
        return whole + rest * 1e-9
