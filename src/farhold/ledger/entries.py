"""Entries: one line per node and cause, chained by mass through the rocket equation.

`propellant_kg` is always mass before less mass after: positive for what is spent, negative for the load (dry
mass to loaded mass) and for a correction. So the mass of a node is its dry mass less the sum of its
propellant column, and what it spent is that sum without the load.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import Epoch
from farhold.errors import DomainError, Fault, LedgerError
from farhold.ledger import schema
from farhold.ledger.terms import Terms
from farhold.propellant.rocket import propellant_kg as burnt_kg

__all__ = ["NewEntries", "broadcast_text", "chain", "epochs_ns", "propellant_of", "reversal"]


def epochs_ns(epoch: Epoch | ArrayLike, k: int) -> NDArray[np.int64]:
    """Spread one epoch, or k of them as whole nanoseconds or datetime64, over k lines."""
    values = np.asarray(epoch.ns if isinstance(epoch, Epoch) else epoch)
    if values.dtype.kind == "M":
        values = values.astype("datetime64[ns]")
    return np.array(np.broadcast_to(values.astype(np.int64), (k,)))


def broadcast_text(value: Any, k: int) -> NDArray[np.object_]:
    """Spread one text, or k of them, over k lines, (k,) of str."""
    if isinstance(value, str):
        return np.full(k, value, dtype=object)
    values = np.asarray(value).astype(object)
    return np.array(np.broadcast_to(values, (k,)))


@dataclass(frozen=True, slots=True, eq=False)
class NewEntries:
    """Lines to be entered, k of them, in any order; :meth:`of` spreads single values.

    Attributes
    ----------
    node : (k,) str
    epoch_ns : (k,) int, TDB
    cause : (k,) str, one of the causes but `load` and `correction`
    dv_m_s : (k,) 0 or above
    isp_s : (k,) specific impulse; NaN takes the node's own (the attitude thruster's for `attitude`)
    propellant_kg : (k,) for `leak` the mass lost, 0 or above; NaN elsewhere: the rocket equation says it
    margin_kg : (k,) memo
    source, note : (k,) str
    """

    node: NDArray[np.object_]
    epoch_ns: NDArray[np.int64]
    cause: NDArray[np.object_]
    dv_m_s: NDArray[np.float64]
    isp_s: NDArray[np.float64]
    propellant_kg: NDArray[np.float64]
    margin_kg: NDArray[np.float64]
    source: NDArray[np.object_]
    note: NDArray[np.object_]

    @classmethod
    def of(
        cls,
        node: Any,
        epoch: Epoch | ArrayLike,
        cause: Any,
        dv_m_s: ArrayLike = 0.0,
        *,
        isp_s: ArrayLike = np.nan,
        propellant_kg: ArrayLike = np.nan,
        margin_kg: ArrayLike = 0.0,
        source: Any = "",
        note: Any = "",
    ) -> NewEntries:
        """Make k lines for k nodes; every other value is one for all or one each."""
        nodes = np.atleast_1d(np.asarray(node)).astype(object)
        k = nodes.size

        def floats(values: ArrayLike) -> NDArray[np.float64]:
            return np.array(np.broadcast_to(np.asarray(values, dtype=np.float64), (k,)))

        return cls(
            node=nodes,
            epoch_ns=epochs_ns(epoch, k),
            cause=broadcast_text(cause, k),
            dv_m_s=floats(dv_m_s),
            isp_s=floats(isp_s),
            propellant_kg=floats(propellant_kg),
            margin_kg=floats(margin_kg),
            source=broadcast_text(source, k),
            note=broadcast_text(note, k),
        )

    @classmethod
    def none(cls) -> NewEntries:
        """No lines at all: a commit that only moves the roster."""
        return cls.of(np.empty(0, dtype=np.str_), 0, "hold")

    @classmethod
    def joined(cls, parts: list[NewEntries]) -> NewEntries:
        """Put several sets of lines into one."""
        if not parts:
            return cls.none()
        names = cls.__dataclass_fields__
        return cls(**{name: np.concatenate([getattr(part, name) for part in parts]) for name in names})

    def sourced(self, source: str) -> NewEntries:
        """Give lines that have no source this one."""
        return replace(self, source=np.where(self.source == "", source, self.source).astype(object))

    def __len__(self) -> int:
        return int(self.node.size)


def _refuse_unlawful(new: NewEntries) -> None:
    lawful_cause = np.isin(
        new.cause.astype(np.str_), [c for c in schema.CAUSES if c not in ("load", "correction")]
    )
    is_leak = new.cause == "leak"
    rules = (
        ("cause", lawful_cause, "load only opens a book, correction is made by correcting a seq"),
        ("dv_m_s", np.isfinite(new.dv_m_s) & (new.dv_m_s >= 0), "a finite number, 0 or above"),
        ("dv_m_s", ~is_leak | (new.dv_m_s == 0), "0 for a leak, which gives no speed"),
        (
            "isp_s",
            np.isnan(new.isp_s) | ((new.isp_s > 0) & np.isfinite(new.isp_s)),
            "a finite number above 0",
        ),
        (
            "propellant_kg",
            np.where(
                is_leak,
                np.isfinite(new.propellant_kg) & (new.propellant_kg >= 0),
                np.isnan(new.propellant_kg),
            ),
            "for a leak a finite number, 0 or above; else left to the rocket equation",
        ),
        ("margin_kg", np.isfinite(new.margin_kg), "a finite number"),
    )
    for name, lawful, allowed in rules:
        if not np.all(lawful):
            k = int(np.argmin(lawful))
            got = getattr(new, name)[k]
            raise DomainError(
                Fault(
                    f"entry of node {new.node[k]}.{name}",
                    f"got {got if isinstance(got, str) else float(got)!r}",
                    allowed,
                )
            )


def propellant_of(
    mass_kg: NDArray[np.float64],
    dv_m_s: NDArray[np.float64],
    isp_s: NDArray[np.float64],
    stated_kg: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Propellant of lines at the masses before them [kg]: as stated, else by the rocket equation; (k,)."""
    return np.where(np.isnan(stated_kg), burnt_kg(mass_kg, dv_m_s, isp_s), stated_kg)


def reversal(line: dict[str, Any], why: str, epoch: Epoch) -> NewEntries:
    """Make the line that reverses another; `line` holds its columns, `source` of the result names its seq."""
    return NewEntries.of(
        [line["node"]],
        epoch,
        "correction",
        0.0 - line["dv_m_s"],
        isp_s=line["isp_s"],
        propellant_kg=0.0 - line["propellant_kg"] if line["cause"] == "leak" else np.nan,
        margin_kg=0.0 - line["margin_kg"],
        source=f"seq:{line['seq']}",
        note=why,
    )


def chain(
    terms: Terms, new: NewEntries, mass_kg: NDArray[np.float64], first_seq: int, correcting: bool = False
) -> Any:
    """Order lines by node and epoch, number them and run each node's mass through them.

    Parameters
    ----------
    terms : Terms
    new : NewEntries, k lines
    mass_kg : (n,) masses before
    first_seq : number of the first line
    correcting : the lines are reversals, to which the rules of new lines do not apply

    Returns
    -------
    pyarrow.Table of :data:`farhold.ledger.schema.ENTRIES`, k rows

    Raises
    ------
    DomainError
        A node is unknown, or a value is not lawful.
    LedgerError
        A node would burn more than it has aboard.
    """
    if not correcting:
        _refuse_unlawful(new)
    index = terms.index_of(new.node, "entries") if len(new) else np.empty(0, dtype=np.int64)
    order = np.lexsort((new.epoch_ns, index))
    index = index[order]
    own = np.where(new.cause[order] == "attitude", terms.attitude_isp_s[index], terms.isp_s[index])
    isp_s = np.where(np.isnan(new.isp_s[order]), own, new.isp_s[order])
    return _run(terms, new, order, index, isp_s, mass_kg, first_seq)


def _run(
    terms: Terms,
    new: NewEntries,
    order: NDArray[np.int64],
    index: NDArray[np.int64],
    isp_s: NDArray[np.float64],
    mass_kg: NDArray[np.float64],
    first_seq: int,
) -> Any:
    k = index.size
    dv_m_s, stated_kg = new.dv_m_s[order], new.propellant_kg[order]
    before, spent = np.empty(k), np.empty(k)
    running = mass_kg.copy()
    starts = np.flatnonzero(np.r_[True, index[1:] != index[:-1]]) if k else np.empty(0, dtype=np.int64)
    rank = np.arange(k) - np.repeat(starts, np.diff(np.r_[starts, k]))
    for turn in range(int(rank.max()) + 1 if k else 0):
        rows = np.flatnonzero(rank == turn)
        who = index[rows]
        before[rows] = running[who]
        spent[rows] = propellant_of(before[rows], dv_m_s[rows], isp_s[rows], stated_kg[rows])
        running[who] = before[rows] - spent[rows]
    after = before - spent
    short = after < terms.dry_mass_kg[index] * (1 - 1e-12)
    short &= new.cause[order] != "correction"
    if short.any():
        row = int(np.argmax(short))
        aboard_kg = before[row] - terms.dry_mass_kg[index[row]]
        others = np.unique(index[short]).size - 1
        raise LedgerError(
            Fault(
                f"node {terms.node[index[row]]}",
                f"would burn {spent[row]:.6g} kg and has {aboard_kg:.6g} kg aboard"
                + (f"; so would {others} other nodes burn too much" if others else ""),
                hint="nothing was entered",
            )
        )
    return schema.table_of(
        schema.ENTRIES,
        {
            "seq": np.arange(first_seq, first_seq + k),
            "node": terms.node[index],
            "class": terms.class_name[index],
            "epoch_tdb": new.epoch_ns[order],
            "cause": new.cause[order],
            "source": new.source[order],
            "dv_m_s": dv_m_s,
            "isp_s": isp_s,
            "mass_before_kg": before,
            "mass_after_kg": after,
            "propellant_kg": spent,
            "margin_kg": new.margin_kg[order],
            "note": new.note[order],
        },
    )
