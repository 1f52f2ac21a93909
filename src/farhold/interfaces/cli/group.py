"""Groups whose commands are imported only when called, and the root that turns errors into exits."""

from __future__ import annotations

import contextlib
import importlib
import io
import os
import sys
from collections.abc import Mapping, Sequence
from typing import Any, NoReturn

import click

from farhold.errors import CaseError, FarholdError, Fault
from farhold.interfaces.cli.faults import (
    INTERRUPTED,
    UNEXPECTED,
    from_click,
    is_help,
    report,
    unexpected,
)
from farhold.interfaces.cli.text import nearest

__all__ = ["LazyGroup", "Root"]


class OurGroup(click.Group):
    """A group that names the nearest command when one is unknown."""

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Find the command named by the first word, or refuse it with the nearest known one."""
        if args and not args[0].startswith("-") and args[0] not in self.list_commands(ctx):
            known = self.list_commands(ctx)
            raise CaseError(
                Fault(ctx.command_path, f"no command {args[0]!r}", ", ".join(known), nearest(args[0], known))
            )
        return super().resolve_command(ctx, args)

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002 - click gives it
        """Return the names in the order they were added, which is the order of the work."""
        return list(self.commands)


class LazyGroup(OurGroup):
    """A group whose commands are modules of `package`, named in `table` and imported on use.

    Parameters
    ----------
    package : str
        The package that holds the modules; each defines `command`.
    table : mapping
        Command name to (module name, one line of help).
    """

    def __init__(self, *, package: str, table: Mapping[str, tuple[str, str]], **options: Any) -> None:
        super().__init__(**options)
        self._package = package
        self._table = dict(table)

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002 - click gives it
        """Return the names in the table's order."""
        return list(self._table)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        """Import the module of `cmd_name` and return its command."""
        if cmd_name not in self._table:
            return None
        module = importlib.import_module(f"{self._package}.{self._table[cmd_name][0]}")
        command: click.Command = module.command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002
        """Write the table, importing nothing."""
        with formatter.section("Commands"):
            formatter.write_dl([(name, line) for name, (_, line) in self._table.items()])


def _show_version(ctx: click.Context, _option: click.Parameter, wanted: bool) -> None:
    if wanted and not ctx.resilient_parsing:
        from importlib.metadata import version

        click.echo(f"farhold {version('farhold')}")
        ctx.exit()


class Root(LazyGroup):
    """The program: every outcome becomes an exit code, every failure one sentence or one document."""

    def __init__(self, **options: Any) -> None:
        shows = click.Option(
            ["--version"],
            is_flag=True,
            is_eager=True,
            expose_value=False,
            callback=_show_version,
            help="Show the version and leave.",
        )
        super().__init__(params=[shows], no_args_is_help=True, **options)

    def main(self, args: Sequence[str] | None = None, *_: Any, **__: Any) -> NoReturn:
        """Run and leave the process with the exit code."""
        sys.exit(self.run(args))

    def run(self, args: Sequence[str] | None = None) -> int:
        """Run the words `args` and return the exit code."""
        words = list(sys.argv[1:] if args is None else args)
        as_json, verbose = "--json" in words, "--verbose" in words
        for stream in (sys.stdout, sys.stderr):
            if isinstance(stream, io.TextIOWrapper):
                # a terminal that cannot show a letter gets its number, not a failure
                stream.reconfigure(errors="backslashreplace")
        code = 0
        try:
            code = self._invoke(words, as_json, verbose)
            sys.stdout.flush()
        except BrokenPipeError:
            _hush_stdout()
        except OSError as error:
            code = report(UNEXPECTED, [unexpected(error)], as_json=False, cause=error if verbose else None)
            _hush_stdout()
        return code

    def _command(self, words: list[str]) -> str:
        return f"farhold {words[0]}" if words and words[0] in self._table else "farhold"

    def _invoke(self, words: list[str], as_json: bool, verbose: bool) -> int:
        try:
            with self.make_context("farhold", words) as context:
                code = self.invoke(context)
            return code if isinstance(code, int) else 0
        except click.exceptions.Exit as leave:
            return leave.exit_code
        except click.ClickException as error:
            if is_help(error):
                click.echo(error.format_message())
                return 0
            fault = from_click(error, self._command(words))
            return report(fault.exit_code, fault.faults, as_json)
        except FarholdError as error:
            return report(error.exit_code, error.faults, as_json, cause=error if verbose else None)
        except (KeyboardInterrupt, click.Abort):
            return report(INTERRUPTED, [Fault("farhold", "interrupted")], as_json)
        except BrokenPipeError:
            raise
        except Exception as error:
            return report(UNEXPECTED, [unexpected(error)], as_json, cause=error if verbose else None)


def _hush_stdout() -> None:
    """Point standard output at nothing, so that the interpreter's last flush has no reader to miss."""
    with contextlib.suppress(OSError, ValueError):
        nothing = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nothing, sys.stdout.fileno())
        os.close(nothing)
