"""What can go wrong, as a user meets it: one sentence with the place, the value, the allowed and the cure.

Every error that farhold raises on purpose is a :class:`FarholdError` carrying the exit code of the command
line and the list of :class:`Fault` records that the JSON document of a failure shows.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

__all__ = [
    "CaseError",
    "ConvergenceError",
    "DomainError",
    "FarholdError",
    "Fault",
    "LedgerError",
    "NoSolutionError",
    "OutputExistsError",
    "UnaffordableError",
]


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing that is wrong: the place, what is wrong (with the value given), what is allowed, the cure."""

    where: str
    what: str
    allowed: str = ""
    hint: str = ""

    def sentence(self) -> str:
        """Say the fault in one line, ``where: what (allowed ...; hint)``."""
        extra = "; ".join(part for part in (f"allowed: {self.allowed}" if self.allowed else "", self.hint) if part)
        head = f"{self.where}: {self.what}" if self.where else self.what
        return f"{head} ({extra})" if extra else head


class FarholdError(Exception):
    """Base of all errors raised on purpose; ``exit_code`` is what the command line returns."""

    exit_code = 2

    def __init__(self, faults: Fault | Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = (faults,) if isinstance(faults, Fault) else tuple(faults)
        super().__init__("\n".join(fault.sentence() for fault in self.faults))

    def __reduce__(self) -> tuple[type[FarholdError], tuple[tuple[Fault, ...]]]:
        """Keep the faults when the error travels between processes."""
        return type(self), (self.faults,)


class CaseError(FarholdError, ValueError):
    """A case file, a table it names or an option is not lawful (exit 2)."""


class DomainError(FarholdError, ValueError):
    """A value lies outside what a record or a function accepts (exit 2)."""


class OutputExistsError(FarholdError, FileExistsError):
    """The output exists and ``--force`` was not given (exit 2)."""


class UnaffordableError(FarholdError):
    """Some node cannot afford what was asked (exit 3)."""

    exit_code = 3


class LedgerError(FarholdError):
    """The ledger refuses, or an audit found damage (exit 4)."""

    exit_code = 4


class NoSolutionError(FarholdError):
    """The problem as asked has no solution, such as a transfer at a singular time (exit 5)."""

    exit_code = 5


class ConvergenceError(NoSolutionError, RuntimeError):
    """An iteration did not reach its tolerance (exit 5)."""
