"""The command line: one file per command, one line each in the literal table below.

Only the standard library and click are imported here, so that ``farhold --help`` answers at once; a command's
own module, and all that computes, is imported when the command runs.
"""

from __future__ import annotations

from collections.abc import Sequence

from farhold.interfaces.cli.group import Root

__all__ = ["COMMANDS", "cli", "main"]

COMMANDS: dict[str, tuple[str, str]] = {
    "start": ("start_command", "Write a ready case to edit."),
    "check": ("check_command", "Validate a case and say what would be flown."),
    "quote": ("quote_command", "Price a change of formation, who pays and who cannot."),
    "drift": ("drift_command", "See how a formation drifts apart when left alone."),
    "hold": ("hold_command", "See what holding a formation costs in a closed loop."),
    "status": ("status_command", "Say how far a kept study is and how to go on with it."),
    "post": ("post_command", "Enter a quote in a ledger."),
    "ledger": ("ledger_command", "Create, read, audit, correct or export a ledger."),
}

cli = Root(
    name="farhold",
    package=__name__,
    table=COMMANDS,
    help="Price, plan and keep the propellant books of very large formations near Sun-Earth libration points.",
    epilog="Planning estimates, not flight-certified commands: the responsible flight-dynamics and safety "
    "authority decides.",
)


def main(args: Sequence[str] | None = None) -> int:
    """Run one command line and return its exit code.

    Parameters
    ----------
    args : sequence of str, optional
        The words after the program's name; default those the process was started with.

    Returns
    -------
    int
        0 done, 1 an unexpected failure, 2 bad input, 3 priced but not affordable, 4 the ledger refuses,
        5 no solution, 130 interrupted.
    """
    return cli.run(args)
