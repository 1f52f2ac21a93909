"""farhold: prices, plans and keeps the books of very large formations near Sun-Earth libration points.

Everything the commands do is one call here. Names are resolved when first used, so ``import farhold`` is
quick. Prices are planning estimates, not flight-certified commands.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from farhold.errors import (
        CaseError,
        ConvergenceError,
        DomainError,
        FarholdError,
        LedgerError,
        NoSolutionError,
        OutputExistsError,
        UnaffordableError,
    )
    from farhold.interfaces.export import export
    from farhold.study.book import Ledger
    from farhold.study.case import load
    from farhold.study.check import check
    from farhold.study.drift import drift
    from farhold.study.hold import hold
    from farhold.study.quote import Quote, quote
    from farhold.study.quote_folder import load_quote
    from farhold.study.reference import assign, reference
    from farhold.study.start import start
    from farhold.study.status import status

__all__ = [
    "CaseError",
    "ConvergenceError",
    "DomainError",
    "FarholdError",
    "Ledger",
    "LedgerError",
    "NoSolutionError",
    "OutputExistsError",
    "Quote",
    "UnaffordableError",
    "assign",
    "check",
    "drift",
    "export",
    "hold",
    "load",
    "load_quote",
    "quote",
    "reference",
    "start",
    "status",
]

_HOMES = {
    "CaseError": "errors",
    "ConvergenceError": "errors",
    "DomainError": "errors",
    "FarholdError": "errors",
    "LedgerError": "errors",
    "NoSolutionError": "errors",
    "OutputExistsError": "errors",
    "UnaffordableError": "errors",
    "Ledger": "study.book",
    "Quote": "study.quote",
    "assign": "study.reference",
    "check": "study.check",
    "drift": "study.drift",
    "hold": "study.hold",
    "export": "interfaces.export",
    "load": "study.case",
    "load_quote": "study.quote_folder",
    "quote": "study.quote",
    "reference": "study.reference",
    "start": "study.start",
    "status": "study.status",
}


def __getattr__(name: str) -> Any:
    """Import a public name when it is first asked for."""
    if name not in _HOMES:
        raise AttributeError(f"module 'farhold' has no attribute {name!r}")
    value = getattr(import_module(f"farhold.{_HOMES[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    """List the public names."""
    return sorted(__all__)
