"""The quote: a change of formation, priced end to end, not yet committed."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from farhold.domain.epoch import DAY_S, Epoch
from farhold.errors import CaseError, Fault
from farhold.files import digest_of
from farhold.kernels.jit import kernels_are_cold
from farhold.planning.assignment.objectives import OBJECTIVES
from farhold.pool import set_threads
from farhold.study.case.faults import unknown_name
from farhold.study.case.record import Case
from farhold.study.provenance import provenance
from farhold.study.quote_numbers import Priced, impulses_frame, nodes_frame, price, summary_of
from farhold.study.reshape import reshape
from farhold.study.setting import Setting, setting_of
from farhold.watch import SILENT, Watch

__all__ = ["Quote", "quote"]


@dataclass(frozen=True, slots=True, eq=False)
class Quote:
    """A priced change of formation.

    Attributes
    ----------
    summary : the JSON document "quote"
    nodes, impulses : per node and per impulse, columns with units in their names
    notes : remarks in plain words
    request : what was asked, so that it can be priced again
    """

    summary: dict[str, Any]
    nodes: pd.DataFrame
    impulses: pd.DataFrame
    notes: list[str] = field(default_factory=list)
    request: dict[str, Any] = field(default_factory=dict)

    @property
    def affordable(self) -> bool:
        """Whether every node can afford it."""
        return bool(self.summary["affordable"])

    def save(self, folder: str | Path, *, force: bool = False) -> Path:
        """Write the quote to a new folder; see :func:`farhold.study.quote_folder.save_quote`."""
        from farhold.study.quote_folder import save_quote

        return save_quote(self, folder, force=force)


def quote(
    case: Case,
    to: str,
    *,
    over_days: float,
    from_: str | None = None,
    depart: str | Epoch | None = None,
    objective: str = "least-total",
    horizon_days: float | None = None,
    ledger: str | Path | None = None,
    accuracy: str = "default",
    threads: int | None = None,
    watch: Watch = SILENT,
) -> Quote:
    """Price a reshape: who flies where, what each pays, who cannot afford it, what life is left.

    Parameters
    ----------
    case : from :func:`farhold.load`
    to : name of the formation to go to
    over_days : transfer time [d]
    from_ : formation to leave (None: where the swarm is)
    depart : epoch of departure, TDB (None: the ledger's last epoch, else the case's)
    objective : one of least-total, least-propellant, least-worst
    horizon_days : days from departure to which holding is counted in the net price (None: the transfer)
    ledger : folder of the ledger whose roster and masses to start from
    accuracy : "draft", "default" or "fine"
    threads : None for one per core

    Raises
    ------
    CaseError
        An argument is unknown or out of range (exit 2).
    LedgerError
        The ledger does not belong to the case, or is damaged (exit 4).
    NoSolutionError
        The transfer time is singular for some node, or no path was found (exit 5).
    """
    days = _checked(case, to, over_days, objective, horizon_days)
    set_threads(threads)
    if kernels_are_cold():
        watch.note("compiling the kernels for this machine, once (about 15 s)")
    setting = setting_of(case, from_, None if ledger is None else str(ledger))
    start = _departure(setting, depart)
    depart_s = setting.seconds(start)
    numbers = reshape(
        setting,
        case.formation(to, "--to"),
        depart_s,
        depart_s + over_days * DAY_S,
        depart_s + days * DAY_S,
        objective,
        accuracy,
        watch,
    )
    priced = price(setting, numbers)
    request = {
        "to": to,
        "from": from_,
        "depart": start.iso(),
        "over_days": over_days,
        "objective": objective,
        "horizon_days": days,
        "accuracy": accuracy,
        "case_path": str(case.path.resolve()),
    }
    nodes = nodes_frame(setting, numbers, priced)
    impulses = impulses_frame(setting, numbers, priced, start, over_days)
    summary = summary_of(setting, numbers, priced, request, nodes)
    summary["provenance"] = provenance(case.sha256, case.seed, setting.head)
    summary["quote"] = digest_of_quote(summary, nodes, impulses)
    return Quote(summary, nodes, impulses, _notes(setting, numbers.moves.size, priced), request)


def digest_of_quote(summary: dict[str, Any], nodes: pd.DataFrame, impulses: pd.DataFrame) -> str:
    """Digest of a quote's content; the seconds it took and the digest itself are left out."""
    content = {key: value for key, value in summary.items() if key not in ("seconds", "quote")}
    content["nodes"] = _columns(nodes)
    content["impulses"] = _columns(impulses)
    return digest_of(content)


def _columns(frame: pd.DataFrame) -> dict[str, list[Any]]:
    """Give a frame as plain lists; times as whole nanoseconds, NaN as None."""
    columns: dict[str, list[Any]] = {}
    for name in frame.columns:
        values = frame[name]
        if values.dtype.kind == "M":
            columns[name] = values.astype("datetime64[ns]").astype("int64").tolist()
        else:
            columns[name] = [None if value != value else value for value in values.tolist()]
    return columns


def _checked(case: Case, to: str, over_days: float, objective: str, horizon_days: float | None) -> float:
    """Check what was asked; return the horizon in days."""
    case.formation(to, "--to")
    if objective not in OBJECTIVES:
        raise unknown_name("--objective", objective, "objective", OBJECTIVES)
    if not (0.0 < over_days <= 3652.5):
        raise CaseError(Fault("--over", f"got {over_days:g} d", "above 0 d, up to 10 years"))
    horizon = over_days if horizon_days is None else horizon_days
    if not (over_days <= horizon <= 36525.0):
        raise CaseError(Fault("--horizon", f"got {horizon:g} d", f"{over_days:g} d (the transfer) to 100 years"))
    return horizon


def _departure(setting: Setting, depart: str | Epoch | None) -> Epoch:
    """Return the epoch of departure; refuse one before the ledger's last entry."""
    if depart is None:
        return setting.earliest
    epoch = depart if isinstance(depart, Epoch) else Epoch.from_iso(depart, "--depart")
    if epoch < setting.earliest:
        raise CaseError(
            Fault(
                "--depart",
                f"got {epoch.iso()}",
                f"{setting.earliest.iso()} TDB, where the swarm is known, or later",
            )
        )
    return epoch


def _notes(setting: Setting, nodes: int, priced: Priced) -> list[str]:
    """Say what a reader of the prices should know."""
    notes = []
    if priced.idle:
        notes.append(f"{priced.idle} of {nodes} nodes keep the slot they hold and pay nothing")
    bit = setting.state.per_class("impulse_bit_n_s")[priced.alive] / setting.state.mass_kg[priced.alive]
    below = int(np.sum((priced.dv_m_s > 0.0) & (priced.least_impulse_m_s < bit)))
    if below:
        notes.append(
            f"{below} nodes have an impulse below their thruster's impulse bit; it is priced as it stands"
        )
    if setting.reference.model == "circular":
        notes.append("circular model: no planets, no shadow of the Earth")
    return notes
