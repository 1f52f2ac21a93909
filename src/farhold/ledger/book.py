"""The book: the ledger as its users see it, read without a lock and written under one."""

from __future__ import annotations

import contextlib
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import Epoch
from farhold.domain.state import SwarmState
from farhold.errors import DomainError, Fault
from farhold.files import FolderLock, durable_folder, refuse_existing
from farhold.ledger import roster as rosters
from farhold.ledger import rules, schema, store
from farhold.ledger.balances import balances_after
from farhold.ledger.commits import demand_of, demand_table, opening, sealed
from farhold.ledger.entries import NewEntries, chain, reversal
from farhold.ledger.head import HEAD, LOCK, Head, Record, is_ours, read_head
from farhold.ledger.roster import RosterChange
from farhold.ledger.terms import Terms

__all__ = ["Book"]


class Book:
    """A ledger on disk; make one with :meth:`create` or :meth:`open`.

    A book object reads the head once and keeps that view until it writes or :meth:`refresh` is called; what
    another process commits meanwhile does not disturb it. Writing always starts from the newest head.
    """

    def __init__(self, folder: Path, head: Head, terms: Terms) -> None:
        self._folder = folder
        self._head = head
        self._terms = terms

    @classmethod
    def create(
        cls,
        path: Path | str,
        terms: Terms,
        state: SwarmState,
        *,
        epoch: Epoch | None = None,
        demand_m_s_yr: ArrayLike = 0.0,
        status: Any = None,
        force: bool = False,
    ) -> Book:
        """Open a new book with one `load` entry per node; see :func:`farhold.ledger.commits.opening`.

        Raises
        ------
        OutputExistsError
            `path` exists and `force` is false; or it holds files that are no ledger's.
        DomainError
            The state is not lawful; nothing is written.
        LedgerError
            `force` would replace a ledger that is being written.
        FarholdError
            The folder above is missing or may not be written.
        """
        folder = Path(path).resolve()
        refuse_existing(folder, force)
        commit = opening(terms, state, epoch, demand_m_s_yr, status)
        if (folder / HEAD).exists():
            with FolderLock(folder, LOCK), durable_folder(folder, force, is_ours) as aside:
                head = store.write_opening(aside, terms, commit)
        else:
            with durable_folder(folder, force, is_ours) as aside:
                head = store.write_opening(aside, terms, commit)
        return cls(folder, head, terms)

    @classmethod
    def open(cls, path: Path | str) -> Book:
        """Open a book for reading and writing.

        Raises
        ------
        DomainError
            The folder does not exist or is no ledger (exit 2).
        LedgerError
            Its head or terms are missing, damaged or of another schema version (exit 4).
        """
        folder = Path(path).resolve()
        head = read_head(folder)
        return cls(folder, head, store.read_terms(folder, head))

    def refresh(self) -> None:
        """Take the newest head into view."""
        head = read_head(self._folder)
        if head.terms != self._head.terms:
            self._terms = store.read_terms(self._folder, head)
        self._head = head

    @property
    def path(self) -> Path:
        """The ledger's folder."""
        return self._folder

    @property
    def head(self) -> str:
        """Digest of the last commit, 64 hexadecimal digits."""
        return self._head.digest

    @property
    def terms(self) -> Terms:
        """What was fixed at creation."""
        return self._terms

    @property
    def commits(self) -> tuple[Record, ...]:
        """Every commit from the opening on."""
        return self._head.commits

    @property
    def last_epoch(self) -> Epoch:
        """Latest epoch of any entry or roster change."""
        return self._head.last_epoch

    def posted_sources(self) -> frozenset[str]:
        """Digests of the quotes that were posted."""
        return frozenset(rules.posted(self._head))

    def _table(self, kind: str, record: Record | None = None) -> Any:
        record = record or self._head.commits[-1]
        return store.read_table(self._folder, record.files[kind], store.TABLES[kind])

    def entries(self, nodes: Iterable[str] | None = None) -> pd.DataFrame:
        """Give the entries, of all nodes or of some, in the order of their seq; columns as in the schema.

        Raises
        ------
        DomainError
            A node is not in the ledger.
        """
        names = None if nodes is None else [str(one) for one in nodes]
        if names:
            self._terms.index_of(names, "nodes")
        frame: pd.DataFrame = store.read_entries(self._folder, self._head, names).to_pandas()
        return frame

    def statement(self, node: str) -> pd.DataFrame:
        """Give one node's entries; `mass_after_kg` is its running mass."""
        return self.entries([node])

    def balances(self) -> pd.DataFrame:
        """What is left per node after the last commit."""
        frame: pd.DataFrame = self._table("balances").to_pandas()
        return frame

    def roster(self) -> pd.DataFrame:
        """Who is alive and sits where after the last commit."""
        frame: pd.DataFrame = self._table("roster").to_pandas()
        return frame

    def demand_m_s_yr(self) -> NDArray[np.float64]:
        """Price of holding the present slots as last stated, (n,) [m/s per year]."""
        values: NDArray[np.float64] = schema.column(self._table("demand"), "demand_m_s_yr")
        return values

    def state(self) -> SwarmState:
        """Give the swarm after the last commit: masses now, places, who is alive."""
        mass_kg = schema.column(self._table("balances"), "mass_kg")
        return rosters.swarm_state(self._terms, self._table("roster"), mass_kg)

    def changed_since(self, digest: str) -> set[str] | None:
        """Nodes with an entry or another place since a head; None when that head is not of this ledger."""
        return rules.changed_since(self._folder, self._head, self._terms, digest)

    def commit(
        self,
        entries: NewEntries,
        changes: RosterChange | None = None,
        demand_m_s_yr: ArrayLike | None = None,
        *,
        source: str = "",
    ) -> str:
        """Enter lines and roster changes as one commit, all or nothing.

        Parameters
        ----------
        entries : lines to enter (:meth:`NewEntries.none` for a commit of the roster alone)
        changes : roster changes of the same commit
        demand_m_s_yr : (n,) or one, price of holding the slots after it (None: as before)
        source : where the commit came from; entries without a source of their own take it

        Returns
        -------
        str
            The new head.

        Raises
        ------
        DomainError
            A node is unknown or a value unlawful.
        LedgerError
            A lost or retired node would act, one would burn more than it has, a slot would be taken twice, or
            another process is writing.
        """
        with self._writing():
            return self._append("commit", entries, changes, demand_m_s_yr, source)

    def post(
        self,
        bound_head: str,
        source: str,
        entries: NewEntries,
        changes: RosterChange | None = None,
        demand_m_s_yr: ArrayLike | None = None,
        *,
        nodes: Iterable[str] = (),
    ) -> str:
        """Enter a quote that was priced on the head `bound_head`; masses are run anew from the ledger's own.

        Parameters
        ----------
        bound_head, source : digest of the head the quote was priced on, digest of the quote
        entries, changes, demand_m_s_yr : as :meth:`commit`
        nodes : further nodes whose state the quote rests on

        Returns
        -------
        str
            The new head.

        Raises
        ------
        LedgerError
            The quote was posted already, was priced on another ledger, or rests on nodes that changed since;
            or as :meth:`commit`.
        """
        with self._writing():
            touched = {*nodes, *entries.node, *(changes.node if changes else ())}
            rules.refuse_post(self._folder, self._head, self._terms, bound_head, source, touched)
            return self._append("post", entries, changes, demand_m_s_yr, source)

    def correct(self, seq: int, why: str, epoch: Epoch | None = None) -> str:
        """Reverse one entry by a new one; nothing is edited.

        The correction carries the reversed speed change with a minus sign and gives back what the rocket
        equation says at the present mass, so the mass becomes what it would be without the reversed burn; its
        memo margin is released too. The roster is not changed: a node that moved stays where the roster says.

        Parameters
        ----------
        seq : number of the entry to reverse
        why : the reason, kept as the note
        epoch : of the correction (None: the ledger's last epoch)

        Returns
        -------
        str
            The new head.

        Raises
        ------
        LedgerError
            There is no such entry; it is a load or a correction; it was corrected already.
        DomainError
            No reason is given.
        """
        if not why.strip():
            raise DomainError(Fault("--why", "no reason is given", "a text that says why the entry is wrong"))
        with self._writing():
            line = rules.line_to_correct(self._folder, self._head, seq)
            lines = reversal(line, why, epoch or self.last_epoch)
            return self._append("correction", lines, None, None, f"seq:{seq}")

    @contextlib.contextmanager
    def _writing(self) -> Iterator[None]:
        """Hold the lock, the newest head and a swept folder for the length of one commit."""
        read_head(self._folder)
        with FolderLock(self._folder, LOCK):
            self.refresh()
            store.sweep(self._folder, self._head)
            yield

    def _append(
        self,
        kind: str,
        new: NewEntries,
        changes: RosterChange | None,
        demand_m_s_yr: ArrayLike | None,
        source: str,
    ) -> str:
        terms, head = self._terms, self._head
        new = new.sourced(source)
        former, seats = self._table("balances"), self._table("roster")
        entries = chain(terms, new, schema.column(former, "mass_kg"), head.next_seq, kind == "correction")
        roster = rosters.applied(terms, seats, changes)
        if kind != "correction":
            rosters.refuse_the_dead(terms, seats, roster, new.node)
        demand = self.demand_m_s_yr() if demand_m_s_yr is None else demand_of(terms, demand_m_s_yr)
        commit = sealed(
            terms,
            number=len(head.commits),
            kind=kind,
            source=source,
            previous=head.digest,
            entries=entries,
            roster=roster,
            balances=balances_after(terms, former, entries, roster, demand),
            demand=demand_table(terms, demand),
        )
        self._head = store.write_commit(self._folder, head, commit)
        return self._head.digest
