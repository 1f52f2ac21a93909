"""The propellant book: entries, roster and balances of every node, append-only, on disk.

The audit is taken from its own module, whose name it shares.
"""

from farhold.ledger.book import Book
from farhold.ledger.commits import Commit, opening
from farhold.ledger.entries import NewEntries
from farhold.ledger.roster import RosterChange
from farhold.ledger.schema import CAUSES, STATUSES
from farhold.ledger.terms import Terms

__all__ = [
    "CAUSES",
    "STATUSES",
    "Book",
    "Commit",
    "NewEntries",
    "RosterChange",
    "Terms",
    "opening",
]
