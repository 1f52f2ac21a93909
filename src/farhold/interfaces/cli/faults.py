"""From whatever went wrong to an exit code and one sentence each (or the JSON document of a fault)."""

from __future__ import annotations

import re
import traceback
from collections.abc import Iterator, Sequence

import click
from click.exceptions import NoArgsIsHelpError

from farhold.errors import CaseError, Fault
from farhold.interfaces.cli.documents import emit, fault_document
from farhold.interfaces.cli.text import nearest, plain_text

__all__ = ["INTERRUPTED", "UNEXPECTED", "from_click", "is_help", "report", "unexpected"]

UNEXPECTED = 1
INTERRUPTED = 130
_LONG_LIST = re.compile(r"((?:[\w.-]+, ){12})((?:[\w.-]+, )+[\w.-]+)")


def _names(parameters: Sequence[click.Parameter]) -> Iterator[str]:
    for parameter in parameters:
        if isinstance(parameter, click.Option):
            yield from (*parameter.opts, *parameter.secondary_opts)


def _called(parameter: click.Parameter) -> str:
    if isinstance(parameter, click.Argument):
        return (parameter.metavar or parameter.name or "").upper()
    return max(parameter.opts, key=len)


def from_click(error: click.ClickException, command: str) -> CaseError:
    """Say a complaint of the parser as one fault of ours; `command` is where, unless it knows better."""
    context = getattr(error, "ctx", None)
    path = context.command_path if context is not None else command
    see = f"see {path} --help"
    if isinstance(error, click.NoSuchOption):
        known = ["--help", *(_names(context.command.params) if context is not None else ())]
        return CaseError(
            Fault(path, f"no option {error.option_name!r}", hint=nearest(error.option_name, known) or see)
        )
    if isinstance(error, click.MissingParameter) and error.param is not None:
        name = _called(error.param)
        meaning = getattr(error.param, "help", None)
        return CaseError(Fault(path, f"{name} is missing", hint=f"{name}: {meaning}" if meaning else see))
    if isinstance(error, click.BadOptionUsage):
        return CaseError(Fault(path, f"{error.option_name} needs a value", hint=see))
    return CaseError(
        Fault(path, error.format_message().rstrip(".").replace("Got unexpected", "unexpected"), hint=see)
    )


def _shortened(sentence: str) -> str:
    """Cut a list of very many names; the JSON document has them all."""
    return _LONG_LIST.sub(lambda run: f"{run[1]}and {run[2].count(',') + 1} more (--json names all)", sentence)


def unexpected(error: BaseException) -> Fault:
    """Say an error that nobody foresaw."""
    said = plain_text(error).strip()
    what = f"unexpected {type(error).__name__}: {said}" if said else f"unexpected {type(error).__name__}"
    return Fault("farhold", what, hint="--verbose shows the traceback")


def report(exit_code: int, faults: Sequence[Fault], as_json: bool, cause: BaseException | None = None) -> int:
    """Print `faults` and return `exit_code`; the traceback of `cause` goes before them."""
    if cause is not None:
        click.echo("".join(traceback.format_exception(cause)), err=True, nl=False)
    if as_json:
        emit(fault_document(exit_code, faults))
        return exit_code
    for fault in faults:
        click.echo(_shortened(plain_text(fault.sentence())), err=True)
    if len(faults) > 1:
        click.echo(f"{len(faults)} faults; nothing was written.", err=True)
    return exit_code


def is_help(error: click.ClickException) -> bool:
    """Tell whether `error` only stands for a group called without a word after it."""
    return isinstance(error, NoArgsIsHelpError)
