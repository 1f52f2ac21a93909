"""Options that several commands share, and the types of their values; a wrong value is a fault of ours."""

from __future__ import annotations

import functools
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, TypeVar

import click

from farhold.errors import CaseError, Fault
from farhold.interfaces.cli.text import nearest

__all__ = [
    "Going",
    "Manner",
    "OneOf",
    "accuracy",
    "days",
    "force",
    "going",
    "manner",
    "out",
    "samples",
    "seed",
    "threads",
    "whole",
    "words_of",
]

F = TypeVar("F", bound=Callable[..., Any])


@dataclass(frozen=True, slots=True)
class Manner:
    """How a command answers: one JSON document or text, with or without words on standard error."""

    json: bool = False
    quiet: bool = False
    verbose: bool = False


@dataclass(frozen=True, slots=True)
class Going:
    """How a study goes about its chunks; nothing here changes what it finds, save `pair_samples`.

    Attributes
    ----------
    resume : go on with what the folder holds
    cluster : None, ``local:N`` or the address of a scheduler
    allow_mixed : go on on a machine whose last bits may differ
    pair_samples : on how many samples closest pairs, baselines and links are looked at
    words : the command line without the folder, ``--resume`` and ``--force``
    """

    resume: bool = False
    cluster: str | None = None
    allow_mixed: bool = False
    pair_samples: int = 3
    words: tuple[str, ...] = ()


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

    def _read(self, _context: click.Context, param: click.Parameter, text: str | None) -> str | None:
        known = self._names()
        if text is not None and text not in known:
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


def samples(function: F) -> F:
    """Add ``--samples``; None where it is not given."""
    return click.option("--samples", callback=whole(1), metavar="N", help="How many times chance is drawn.")(
        function
    )


def seed(function: F) -> F:
    """Add ``--seed``; None where it is not given."""
    return click.option(
        "--seed", callback=whole(0), metavar="N", help="Where chance begins; default the case's seed."
    )(function)


def going(function: F) -> F:
    """Add ``--resume``, ``--cluster``, ``--allow-mixed`` and ``--pair-samples``, handed in as one `going`."""

    @click.option("--resume", is_flag=True, help="Go on with what -o DIR holds; finished chunks stay.")
    @click.option(
        "--cluster",
        metavar="WHERE",
        help="Compute with Dask: local:N worker processes, or the address of a scheduler.",
    )
    @click.option(
        "--allow-mixed", is_flag=True, help="Go on on another machine: equal to tolerance, not to the bit."
    )
    @click.option(
        "--pair-samples",
        callback=whole(0),
        metavar="N",
        default="3",
        help="Samples in which pairs and links are looked at; default 3.",
    )
    @functools.wraps(function)
    def packed(
        *args: Any, resume: bool, cluster: str | None, allow_mixed: bool, pair_samples: int, **kwargs: Any
    ) -> Any:
        words = tuple(words_of(click.get_current_context()))
        how = Going(resume, cluster, allow_mixed, pair_samples, words)
        return function(*args, going=how, **kwargs)

    return packed  # type: ignore[return-value]


_NOT_KEPT = {"out", "resume", "force", "as_json", "quiet", "verbose"}


def words_of(context: click.Context) -> list[str]:
    """Write the command line again, without the folder, ``--resume``, ``--force`` and the manner of answering."""
    words = context.command_path.split()
    for param in context.command.params:
        value = context.params.get(param.name or "")
        given = context.get_parameter_source(param.name or "") is click.core.ParameterSource.COMMANDLINE
        if param.name in _NOT_KEPT or value is None or not given:
            continue
        if isinstance(param, click.Option):
            name = max(param.opts, key=len)
            words += [name] if param.is_flag else [name, str(value)]
        else:
            words += [str(item) for item in (value if isinstance(value, tuple) else (value,))]
    return words


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
