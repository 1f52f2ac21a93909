"""Commits in memory: what one adds to the book, and the digest that chains it to the former."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import Epoch
from farhold.domain.state import SwarmState
from farhold.errors import DomainError, Fault
from farhold.ledger import schema
from farhold.ledger.balances import balances_after
from farhold.ledger.roster import opening_roster
from farhold.ledger.terms import Terms

__all__ = ["KINDS", "Commit", "demand_of", "demand_table", "opening", "sealed"]

KINDS = ("opening", "commit", "post", "correction")


@dataclass(frozen=True, slots=True, eq=False)
class Commit:
    """One step of the book: its tables, and `digest`, the head after it.

    `kind` is one of opening, commit, post, correction; `source` says where it came from (for a post the
    quote's digest, for a correction the seq); `previous` is the head before, "" at the opening.
    """

    number: int
    kind: str
    source: str
    previous: str
    digest: str
    entries: Any
    roster: Any
    balances: Any
    demand: Any


def demand_of(terms: Terms, demand_m_s_yr: ArrayLike) -> NDArray[np.float64]:
    """Spread and check a holding demand over the nodes, (n,) [m/s per year].

    Raises
    ------
    DomainError
        The shape is wrong, or a value is negative or not finite.
    """
    values = np.asarray(demand_m_s_yr, dtype=np.float64)
    if values.shape not in ((), (len(terms),)):
        raise DomainError(Fault("demand_m_s_yr", f"shape {values.shape}", f"one value or shape ({len(terms)},)"))
    spread = np.array(np.broadcast_to(values, (len(terms),)))
    lawful = np.isfinite(spread) & (spread >= 0)
    if not lawful.all():
        k = int(np.argmin(lawful))
        raise DomainError(
            Fault(
                "demand_m_s_yr",
                f"node {terms.node[k]}: got {float(spread[k])!r}",
                "a finite number, 0 or above",
            )
        )
    return spread


def demand_table(terms: Terms, demand_m_s_yr: NDArray[np.float64]) -> Any:
    """Give a demand as an Arrow table of :data:`farhold.ledger.schema.DEMAND`."""
    return schema.table_of(schema.DEMAND, {"node": terms.node, "demand_m_s_yr": demand_m_s_yr})


def sealed(
    terms: Terms,
    *,
    number: int,
    kind: str,
    source: str,
    previous: str,
    entries: Any,
    roster: Any,
    balances: Any,
    demand: Any,
) -> Commit:
    """Close a commit with its digest.

    The digest covers the former head, the terms, the entries and the roster, and from the second commit on
    the balances and the demand. At the opening these two are left out: they come from logarithms and
    dynamics, whose last bit differs between processors, and a quote priced on one machine must find its head
    in the book opened on another. The files of every commit are covered by the head file in any case.
    """
    parts = {
        "format": f"{schema.FORMAT}-{schema.SCHEMA_VERSION}",
        "previous": previous,
        "terms": terms.digest(),
        "number": str(number),
        "kind": kind,
        "source": source,
        "entries": entries,
        "roster": roster,
    }
    if number > 0:
        parts |= {"balances": balances, "demand": demand}
    digest = schema.content_digest(parts)
    return Commit(number, kind, source, previous, digest, entries, roster, balances, demand)


def opening(
    terms: Terms,
    state: SwarmState,
    epoch: Epoch | None = None,
    demand_m_s_yr: ArrayLike = 0.0,
    status: Any = None,
) -> Commit:
    """Open a book in memory: one `load` entry per node; a pure function of its arguments.

    A load goes from the dry mass to the mass in `state`, so its propellant is negative. The digest is that of
    a ledger created from the same case, so a quote without a ledger is bound to it.

    Parameters
    ----------
    terms, state : the same n nodes in the same order
    epoch : of the load (None: the case's)
    demand_m_s_yr : (n,) or one, price of holding the present slots; not part of this commit's digest
    status : (n,) str or one for all (None: active, lost where not alive)

    Raises
    ------
    DomainError
        The nodes differ, a mass is below the dry mass, a slot is taken twice, a status or demand is unlawful.
    """
    epoch = epoch or terms.epoch
    n = len(terms)
    roster = opening_roster(terms, state, epoch, status)
    light = ~(state.mass_kg >= terms.dry_mass_kg * (1 - 1e-12))
    if light.any():
        k = int(np.argmax(light))
        raise DomainError(
            Fault(
                f"node {terms.node[k]}",
                f"weighs {float(state.mass_kg[k]):.6g} kg",
                f"its dry mass of {float(terms.dry_mass_kg[k]):.6g} kg or more",
            )
        )
    entries = schema.table_of(
        schema.ENTRIES,
        {
            "seq": np.arange(n),
            "node": terms.node,
            "class": terms.class_name,
            "epoch_tdb": np.full(n, epoch.ns),
            "cause": ["load"] * n,
            "source": ["case"] * n,
            "dv_m_s": np.zeros(n),
            "isp_s": terms.isp_s,
            "mass_before_kg": terms.dry_mass_kg,
            "mass_after_kg": state.mass_kg,
            "propellant_kg": terms.dry_mass_kg - state.mass_kg,
            "margin_kg": np.zeros(n),
            "note": [""] * n,
        },
    )
    demand = demand_of(terms, demand_m_s_yr)
    return sealed(
        terms,
        number=0,
        kind="opening",
        source="case",
        previous="",
        entries=entries,
        roster=roster,
        balances=balances_after(terms, None, entries, roster, demand),
        demand=demand_table(terms, demand),
    )
