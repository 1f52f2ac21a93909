"""The setting of a study: the reference of a case and its swarm, from the case or from a ledger's roster."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import Epoch
from farhold.domain.formation import Formation
from farhold.domain.state import SwarmState
from farhold.dynamics.circular import lightness
from farhold.dynamics.reference import make_reference
from farhold.dynamics.trajectory import Reference
from farhold.errors import CaseError, Fault, LedgerError
from farhold.ledger.book import Book
from farhold.ledger.commits import opening
from farhold.ledger.terms import Terms
from farhold.planning.holding.price import holding_m_s_yr
from farhold.planning.slots import slot_states
from farhold.study.case.record import Case

__all__ = ["Setting", "reference_of", "setting_of", "states_of", "terms_of", "yearly_demand"]


@dataclass(frozen=True, slots=True, eq=False)
class Setting:
    """What a study starts from.

    Attributes
    ----------
    case, reference : as read and as built
    state : the swarm, in the order of the case
    excess_beta : (n,) pressure over gravity of each node beyond the reference's, at its present mass
    planned_margin_kg : (n,) margins of burns that are posted but not yet flown
    head : digest of the ledger head that the state is
    earliest : the first epoch at which something may be planned
    """

    case: Case
    reference: Reference
    state: SwarmState
    excess_beta: NDArray[np.float64]
    planned_margin_kg: NDArray[np.float64]
    head: str
    earliest: Epoch

    @property
    def in_force(self) -> str:
        """The formation that most nodes alive sit in."""
        names, counts = np.unique(self.state.formation[self.state.alive], return_counts=True)
        return str(names[np.argmax(counts)]) if names.size else ""

    def seconds(self, epoch: Epoch) -> float:
        """Seconds from the case's epoch."""
        return epoch.seconds_since(self.case.epoch)


def reference_of(case: Case) -> Reference:
    """Build the reference that a case asks for.

    Raises
    ------
    DomainError, ConvergenceError
        There is no such orbit.
    """
    spec = case.reference
    return make_reference(
        spec.kind,
        point=spec.point,
        epoch=case.epoch,
        pressure_area_m2_kg=case.reference_pressure_m2_kg,
        **spec.options,
    )


def terms_of(case: Case, state: SwarmState | None = None) -> Terms:
    """Terms of a ledger opened with `case`."""
    swarm = case.initial_state(allow_unplaced=True) if state is None else state
    return Terms.of(swarm, title=case.title, epoch=case.epoch, margins=case.margins)


def excess_of(reference: Reference, state: SwarmState) -> NDArray[np.float64]:
    """Pressure over gravity of each node beyond the reference's, at its present mass, (n,)."""
    return (state.pressure_area_m2_kg - reference.pressure_area_m2_kg) * lightness(1.0)


def setting_of(case: Case, from_: str | None = None, ledger: str | None = None) -> Setting:
    """Place the swarm: by a ledger's roster, else in `from_`, else where the case opens.

    Raises
    ------
    CaseError
        `from_` is unknown, contradicts the ledger's roster, or leaves a node without a place.
    LedgerError
        The ledger was opened with another swarm.
    """
    reference = reference_of(case)
    if ledger is None:
        state = case.initial_state(from_)
        head = opening(terms_of(case, state), state, case.epoch).digest
        return Setting(case, reference, state, excess_of(reference, state), np.zeros(len(state)), head, case.epoch)
    book = Book.open(ledger)
    refuse_another_swarm(book, case)
    state = book.state()
    margin_kg = book.balances()["margin_kg"].to_numpy(dtype=float)
    found = Setting(case, reference, state, excess_of(reference, state), margin_kg, book.head, book.last_epoch)
    if from_ is not None and from_ != found.in_force:
        raise CaseError(
            Fault(
                "--from",
                f"the ledger has the swarm in {found.in_force!r}, not in {from_!r}",
                found.in_force,
                "leave --from out: with a ledger its roster says where nodes sit",
            )
        )
    return found


def refuse_another_swarm(book: Book, case: Case) -> None:
    """Refuse a ledger whose terms are not those of the case."""
    if book.terms.digest() != terms_of(case).digest():
        raise LedgerError(
            Fault(
                str(book.path),
                f"this ledger was opened with another swarm or other margins ({book.terms.title!r})",
                "the ledger of this case",
                "open one for this case with: farhold ledger create LEDGER CASE",
            )
        )


def states_of(
    setting: Setting, t_s: float, formation: NDArray[np.str_], slot: NDArray[np.str_]
) -> tuple[NDArray[np.float64], NDArray[np.str_]]:
    """States (n, 6) at `t_s` of the named slots, rotating axes, and the rules (n,) they follow.

    Raises
    ------
    CaseError
        A node has no slot, or one that the case does not have.
    """
    states = np.zeros((len(slot), 6))
    rule = np.full(len(slot), "rotating", dtype="<U16")
    for name in np.unique(formation):
        rows = np.flatnonzero(formation == name)
        if not name:
            raise CaseError(
                Fault("swarm", f"{rows.size} nodes sit in no slot", "every node alive in a slot", "give --from")
            )
        found: Formation = setting.case.formation(str(name), "roster")
        order = np.argsort(found.slots.slot)
        at = np.minimum(np.searchsorted(found.slots.slot, slot[rows], sorter=order), len(found.slots) - 1)
        index = order[at]
        wrong = found.slots.slot[index] != slot[rows]
        if wrong.any():
            raise CaseError(
                Fault(
                    f"formation.{name}",
                    f"has no slot {str(slot[rows][wrong][0])!r}, where the ledger has a node",
                    "the formations that the ledger was kept with",
                )
            )
        states[rows] = slot_states(setting.reference, found, t_s)[index]
        rule[rows] = found.rule
    return states, rule


def yearly_demand(setting: Setting, t_s: float) -> NDArray[np.float64]:
    """Price (n,) of holding the present slots for a year from `t_s` [m/s per year]; 0 for nodes not alive."""
    demand = np.zeros(len(setting.state))
    alive = np.flatnonzero(setting.state.alive)
    states, rule = states_of(setting, t_s, setting.state.formation[alive], setting.state.slot[alive])
    demand[alive] = holding_m_s_yr(setting.reference, rule, states[:, :3], t_s, setting.excess_beta[alive])
    return demand
