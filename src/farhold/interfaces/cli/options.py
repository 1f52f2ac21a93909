"""Options that several commands share, and the types of their values; a wrong value is a fault of ours."""

from __future__ import annotations

import functools
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, TypeVar

import click

from farhold.errors import CaseError, Fault
from farhold.interfaces.cli.text import nearest

__all__ = ["Manner", "OneOf", "accuracy", "days", "force", "manner", "out", "threads", "whole"]

F = TypeVar("F", bound=Callable[..., Any])


@dataclass(frozen=True, slots=True)
class Manner:
    """How a command answers: one JSON document or text, with or without words on standard error."""

    json: bool = False
    quiet: bool = False
    verbose: bool = False


def _where(param: click.Parameter | None) -> str:
    if param is None:
        return ""
    return (
        max(param.opts, key=len)
        if isinstance(param, click.Option)
        else (param.metavar or param.name or "").upper()
    )


def whole(least: int) -> Callable[[click.Context, click.Parameter, str | None], int | None]:
    """Return a callback that reads a whole number, `least` or above."""

    def read(_context: click.Context, param: click.Parameter, text: str | None) -> int | None:
        if text is None:
            return None
        try:
            number = int(text)
        except ValueError:
            number = least - 1
        if number < least:
            raise CaseError(Fault(_where(param), f"got {text!r}", f"a whole number, {least} or above"))
        return number

    return read


class OneOf(click.Option):
    """One name out of those that `names` returns; it is called late, so that start stays light."""

    def __init__(self, *declarations: Any, names: Callable[[], tuple[str, ...]], **options: Any) -> None:
        super().__init__(*declarations, callback=self._read, **options)
        self._names = names

    def get_help_record(self, ctx: click.Context) -> tuple[str, str] | None:
        """Show the names after the help."""
        record = super().get_help_record(ctx)
        return record and (record[0], f"{record[1]} One of: {', '.join(self._names())}.")

    def _read(self, _context: click.Context, param: click.Parameter, text: str) -> str:
        known = self._names()
        if text not in known:
            raise CaseError(Fault(_where(param), f"got {text!r}", ", ".join(known), nearest(text, known)))
        return text


def manner(function: F) -> F:
    """Add ``--json``, ``--quiet`` and ``--verbose`` and hand them in as one `manner`."""

    @click.option("--json", "as_json", is_flag=True, help="One JSON document on standard output, nothing else.")
    @click.option(
        "--quiet", is_flag=True, help="No progress and no remarks on standard error; faults are still said."
    )
    @click.option("--verbose", is_flag=True, help="Say each step and its seconds; show tracebacks.")
    @functools.wraps(function)
    def packed(*args: Any, as_json: bool, quiet: bool, verbose: bool, **kwargs: Any) -> Any:
        return function(*args, manner=Manner(as_json, quiet, verbose), **kwargs)

    return packed  # type: ignore[return-value]


def out(meaning: str, required: bool = False, metavar: str = "DIR") -> Callable[[F], F]:
    """Add ``-o/--out``."""
    return click.option("-o", "--out", metavar=metavar, required=required, help=meaning)


def force(function: F) -> F:
    """Add ``--force``."""
    return click.option("--force", is_flag=True, help="Overwrite what is there.")(function)


def threads(function: F) -> F:
    """Add ``--threads``."""
    return click.option(
        "--threads", callback=whole(1), metavar="N", help="Threads to compute with; default all cores."
    )(function)


def accuracy(function: F) -> F:
    """Add ``--accuracy``."""
    return click.option(
        "--accuracy",
        cls=OneOf,
        names=lambda: ("draft", "default", "fine"),
        metavar="NAME",
        default="default",
        help="Position after a year at 1000 km to 1 m, 1 mm (default) or 10 micrometres.",
    )(function)


def days(text: str, where: str) -> float:
    """Read a time with its unit, such as ``"30 d"``, and return days.

    Raises
    ------
    FarholdError
        The text has no unit, a unit that is no time, or is not above zero (exit 2).
    """
    from farhold.units import si

    seconds = si(text, "time", where)
    if not seconds > 0:
        raise CaseError(Fault(where, f"got {text!r}", 'a time above zero, such as "30 d"'))
    return seconds / 86400.0
