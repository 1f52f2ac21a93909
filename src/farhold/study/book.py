"""The ledger as users meet it: a case's swarm goes in, quotes are posted, frames come out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from farhold.domain.epoch import Epoch
from farhold.domain.margins import Margins
from farhold.errors import Fault, LedgerError, UnaffordableError
from farhold.ledger.audit import audit
from farhold.ledger.book import Book
from farhold.ledger.entries import NewEntries
from farhold.ledger.roster import RosterChange
from farhold.study.case import load
from farhold.study.case.record import Case
from farhold.study.quote import Quote, quote
from farhold.study.setting import Setting, excess_of, reference_of, terms_of, yearly_demand

__all__ = ["Ledger", "PostResult"]


@dataclass(frozen=True, slots=True)
class PostResult:
    """The JSON document "post" of an entered quote."""

    summary: dict[str, Any]


class Ledger:
    """The propellant book of one swarm, in a folder.

    Make one with :meth:`create` or :meth:`open`. Every method that reads gives a pandas frame with the
    columns of design section 6.
    """

    def __init__(self, book: Book) -> None:
        self._book = book

    @classmethod
    def create(cls, path: str | Path, case: Case, *, force: bool = False) -> Ledger:
        """Open a new book with the swarm of `case` as it is loaded.

        Raises
        ------
        OutputExistsError
            The folder exists and `force` is not given, or holds something else than a ledger.
        CaseError
            A node has no place.
        """
        state = case.initial_state()
        reference = reference_of(case)
        setting = Setting(
            case, reference, state, excess_of(reference, state), np.zeros(len(state)), "", case.epoch
        )
        demand = yearly_demand(setting, 0.0)
        return cls(Book.create(path, terms_of(case, state), state, demand_m_s_yr=demand, force=force))

    @classmethod
    def open(cls, path: str | Path) -> Ledger:
        """Open an existing book.

        Raises
        ------
        LedgerError
            There is none, or it is damaged.
        """
        return cls(Book.open(path))

    @property
    def path(self) -> Path:
        """The ledger's folder."""
        return self._book.path

    @property
    def head(self) -> str:
        """Digest of the present head."""
        return self._book.head

    @property
    def title(self) -> str:
        """Title of the case it was opened with."""
        return self._book.terms.title

    @property
    def margins(self) -> Margins:
        """Margin policy it was opened with."""
        return self._book.terms.margins

    @property
    def terms(self) -> pd.DataFrame:
        """What is fixed per node: class, dry mass, load, specific impulses, yearly demands."""
        frame: pd.DataFrame = self._book.terms.table().to_pandas()
        return frame

    def entries(self, nodes: Sequence[str] | None = None) -> pd.DataFrame:
        """All entries, or those of `nodes`, by seq."""
        return self._book.entries(nodes)

    def statement(self, node: str) -> pd.DataFrame:
        """All entries of one node, by seq."""
        return self._book.statement(node)

    def balances(self) -> pd.DataFrame:
        """What each node has left, one row per node."""
        return self._book.balances()

    def roster(self) -> pd.DataFrame:
        """Who is alive and sits in which slot, one row per node."""
        return self._book.roster()

    def audit(self) -> pd.DataFrame:
        """Compute everything again from the first entry; one row per check.

        Raises
        ------
        LedgerError
            Damage was found; the first entry or file that fails is named.
        """
        return audit(self._book.path)

    def correct(self, seq: int, why: str) -> str:
        """Reverse entry `seq` by a new entry, nothing is edited; returns the new head.

        Raises
        ------
        LedgerError
            No such entry, or one that cannot be reversed.
        """
        return self._book.correct(seq, why)

    def post(self, quote: Quote, *, requote: bool = False) -> PostResult:
        """Enter a quote: two impulses per node that moves, its new slot and the price of holding it.

        Parameters
        ----------
        quote : from :func:`farhold.quote` or :func:`farhold.load_quote`
        requote : price it again on the ledger as it stands, and post that

        Raises
        ------
        UnaffordableError
            Some node cannot afford it (exit 3).
        LedgerError
            It was posted already, was priced on another ledger, or rests on nodes that changed (exit 4).
        CaseError
            To be priced again, but its case is no longer there.
        """
        chosen = self._priced_again(quote) if requote else quote
        summary = chosen.summary
        if not chosen.affordable:
            names = ", ".join(summary["cannot_afford"])
            raise UnaffordableError(
                Fault(
                    f"quote {summary['quote'][:12]}",
                    f"{len(summary['cannot_afford'])} nodes cannot afford it: {names}",
                    "a quote that every node can afford with its margins",
                    "another formation, time or objective",
                )
            )
        entries, changes = self._lines(chosen)
        if not entries.node.size:
            raise LedgerError(
                Fault(
                    f"quote {summary['quote'][:12]}",
                    f"nothing is to be entered: every node already sits in its slot of {summary['to']!r}",
                    "a quote in which some node moves",
                )
            )
        head = self._book.post(
            summary["provenance"]["ledger_head"],
            summary["quote"],
            entries,
            changes,
            self._demand(chosen),
            nodes=[str(node) for node in chosen.nodes["node"]],
        )
        return PostResult(
            {
                "kind": "post",
                "schema": 1,
                "quote": summary["quote"],
                "ledger_head": head,
                "entries": int(entries.node.size),
                "nodes": int(changes.node.size),
            }
        )

    def _priced_again(self, quote_: Quote) -> Quote:
        """Price the same change on the present head."""
        request = quote_.request
        case = load(request["case_path"])
        later = self._book.last_epoch
        depart = max(Epoch.from_iso(request["depart"]), later)
        return quote(
            case,
            request["to"],
            over_days=request["over_days"],
            depart=depart,
            objective=request["objective"],
            horizon_days=request["horizon_days"],
            ledger=self._book.path,
            accuracy=request["accuracy"],
        )

    def _lines(self, quote_: Quote) -> tuple[NewEntries, RosterChange]:
        """Entries and roster changes of a quote."""
        summary, impulses = quote_.summary, quote_.impulses
        dv = np.linalg.norm(impulses[["dv_r_m_s", "dv_t_m_s", "dv_n_m_s"]].to_numpy(), axis=1)
        note = np.where(impulses["epoch_tdb"].to_numpy() == impulses["epoch_tdb"].min(), "departure", "arrival")
        entries = NewEntries.of(
            impulses["node"].to_numpy(),
            impulses["epoch_tdb"].to_numpy(),
            "reshape",
            dv,
            margin_kg=impulses["margin_kg"].to_numpy(),
            source=summary["quote"],
            note=note,
        )
        moved = quote_.nodes[quote_.nodes["impulses"] > 0]
        arrive = Epoch.from_iso(summary["depart"]).plus(summary["over_days"] * 86400.0)
        changes = RosterChange.of(
            moved["node"].to_numpy(),
            arrive,
            status="active",
            formation=moved["formation"].to_numpy(),
            slot=moved["slot"].to_numpy(),
        )
        return entries, changes

    def _demand(self, quote_: Quote) -> Any:
        """Yearly holding price of every node after the quote."""
        demand = pd.Series(self._book.demand_m_s_yr(), index=self._book.terms.node)
        demand.loc[quote_.nodes["node"].to_numpy()] = quote_.nodes["holding_after_m_s_yr"].to_numpy()
        return demand.to_numpy()
