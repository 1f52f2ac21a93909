"""What the book refuses: a second or a stale posting, a correction of what cannot be reversed."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any

from farhold.errors import Fault, LedgerError
from farhold.ledger import schema
from farhold.ledger.head import Head
from farhold.ledger.roster import changed_nodes
from farhold.ledger.store import read_table
from farhold.ledger.terms import Terms

__all__ = ["changed_since", "line_to_correct", "posted", "refuse_post"]

_NAMED_AT_MOST = 10


def _some(names: Iterable[str]) -> str:
    ordered = sorted(names)
    text = ", ".join(ordered[:_NAMED_AT_MOST])
    more = len(ordered) - _NAMED_AT_MOST
    return f"{text} and {more} more" if more > 0 else text


def posted(head: Head) -> dict[str, int]:
    """Digests of the quotes that were posted, with the number of their commit."""
    return {one.source: one.number for one in head.commits if one.kind == "post"}


def changed_since(folder: Path, head: Head, terms: Terms, digest: str) -> set[str] | None:
    """Nodes with an entry or another place since the head `digest`; None when it is not in the chain."""
    commits = head.commits
    at = next((k for k, one in enumerate(commits) if one.digest == digest), None)
    if at is None:
        return None
    changed: set[str] = set()
    if at + 1 == len(commits):
        return changed
    former = read_table(folder, commits[at].files["roster"], schema.ROSTER)
    for record in commits[at + 1 :]:
        present = read_table(folder, record.files["roster"], schema.ROSTER)
        entries = read_table(folder, record.files["entries"], schema.ENTRIES)
        changed.update(terms.node[changed_nodes(former, present)].tolist())
        changed.update(schema.column(entries, "node").tolist())
        former = present
    return changed


def refuse_post(folder: Path, head: Head, terms: Terms, bound_head: str, source: str, nodes: set[str]) -> None:
    """Refuse to post the quote `source`, priced on `bound_head` and resting on `nodes`.

    Raises
    ------
    LedgerError
        It was posted already, was priced on another ledger, or some of its nodes changed since.
    """
    where = str(folder)
    done = posted(head)
    if source in done:
        raise LedgerError(
            Fault(
                where,
                f"quote {source[:12]} was posted already, in commit {done[source]}",
                hint="price a new quote",
            )
        )
    changed = changed_since(folder, head, terms, bound_head)
    if changed is None:
        raise LedgerError(
            Fault(
                where,
                f"this quote was priced on another ledger: its head {bound_head[:12]} is not in this one",
                hint="price it again with --ledger, or post it with --requote",
            )
        )
    stale = changed & nodes
    if stale:
        raise LedgerError(
            Fault(
                where,
                f"{len(stale)} node(s) of this quote changed since it was priced: {_some(stale)}",
                hint="--requote prices it again on the present state",
            )
        )


def line_to_correct(folder: Path, head: Head, seq: int) -> dict[str, Any]:
    """Give the columns of the entry `seq` if it may be corrected.

    Raises
    ------
    LedgerError
        There is no such entry, it is a load or a correction, or it was corrected already.
    """
    where = f"entry {seq}"
    if not 0 <= seq < head.next_seq:
        raise LedgerError(Fault(where, "there is no such entry", f"0 to {head.next_seq - 1}", "see the statement"))
    if any(one.kind == "correction" and one.source == f"seq:{seq}" for one in head.commits):
        raise LedgerError(Fault(where, "was corrected already", hint="an entry is corrected once"))
    record = next(one for one in head.commits if one.first_seq <= seq < one.first_seq + one.entries)
    entries = read_table(folder, record.files["entries"], schema.ENTRIES)
    line: dict[str, Any] = entries.slice(seq - record.first_seq, 1).to_pylist()[0]
    if line["cause"] == "load":
        raise LedgerError(Fault(where, "is a load and cannot be corrected", hint="create the ledger anew"))
    if line["cause"] == "correction":
        raise LedgerError(Fault(where, "is itself a correction", hint="enter the burn again instead"))
    return line
