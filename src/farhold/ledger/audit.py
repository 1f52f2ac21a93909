"""The audit: recompute the whole book from its first entry and name the first thing that fails."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from farhold.errors import DomainError, FarholdError, LedgerError
from farhold.files import sha256_hex
from farhold.ledger import roster as rosters
from farhold.ledger import schema, store
from farhold.ledger.balances import balances_after
from farhold.ledger.commits import sealed
from farhold.ledger.head import Head, Record, SegmentFile, damaged, is_ours, read_head
from farhold.ledger.rules import line_to_correct
from farhold.ledger.terms import Terms
from farhold.propellant.rocket import propellant_kg

__all__ = ["audit"]

# The last bits of exp and log differ between processors, so recomputed numbers are compared to this share.
_TOLERANCE = 1e-12
_LIFE_TOLERANCE_YEARS = 1e-6


@dataclass(frozen=True, slots=True, eq=False)
class _Step:
    """One commit under audit with what came before it."""

    folder: Path
    head: Head
    terms: Terms
    record: Record
    former: Record | None
    tables: dict[str, Any]
    former_tables: dict[str, Any]

    def fail(self, kind: str, what: str) -> LedgerError:
        """Name the segment of this commit that is wrong."""
        return damaged(self.folder / self.record.files[kind].name, what)


def audit(path: Path | str, *, raise_on_damage: bool = True) -> pd.DataFrame:
    """Recompute the ledger at `path` from the first entry; it is only read, without a lock.

    Returns
    -------
    pandas.DataFrame
        Columns check, result (``ok`` or ``damaged``), detail, one row per check. With `raise_on_damage` false
        a failure is the last row instead of an error.

    Raises
    ------
    LedgerError
        The first thing that fails, with its file and, in an entry, its seq and node (exit 4).
    DomainError
        The folder does not exist or is no ledger (exit 2).
    """
    folder = Path(path).resolve()
    rows: list[dict[str, str]] = []
    current = ["head"]
    try:
        _run(folder, rows, current)
    except DomainError:
        raise
    except FarholdError as error:
        if raise_on_damage:
            raise
        rows.append({"check": current[0], "result": "damaged", "detail": str(error)})
    return pd.DataFrame(rows, columns=["check", "result", "detail"])


def _run(folder: Path, rows: list[dict[str, str]], current: list[str]) -> None:
    def passed(check: str, detail: str) -> None:
        rows.append({"check": check, "result": "ok", "detail": detail})

    head = read_head(folder)
    passed("head", f"{head.digest[:12]}, {len(head.commits)} commits")
    current[0] = "files"
    passed("files", _check_files(folder, head))
    current[0] = "terms"
    terms = store.read_terms(folder, head)
    passed("terms", f"{len(terms)} nodes, {len(terms.classes)} classes")
    former: Record | None = None
    former_tables: dict[str, Any] = {}
    for record in head.commits:
        tables = {
            kind: store.read_table(folder, record.files[kind], expected) for kind, expected in store.TABLES.items()
        }
        step = _Step(folder, head, terms, record, former, tables, former_tables)
        for check, function in _CHECKS:
            current[0] = check
            function(step)
        former, former_tables = record, tables
    details = (
        f"{head.next_seq} entries",
        f"{sum(record.kind == 'correction' for record in head.commits)} corrections",
        f"{len(head.commits)} rosters",
        f"{len(head.commits)} sets of balances",
        f"chained to {head.digest[:12]}",
    )
    for (check, _), detail in zip(_CHECKS, details, strict=True):
        passed(check, detail)


def _check_files(folder: Path, head: Head) -> str:
    named: list[SegmentFile] = [*head.terms.values()]
    named += [one for record in head.commits for one in record.files.values()]
    for one in named:
        if sha256_hex(store.read_bytes(folder, one)) != one.sha256:
            raise damaged(folder / one.name, "its bytes are not those that were committed")
    known = {one.name for one in named} | {"head.json", "lock"}
    strays = sum(is_ours(entry.name) and entry.name not in known for entry in folder.iterdir())
    rest = f"; {strays} left by an unfinished commit, to be swept" if strays else ""
    return f"{len(named)} files as committed{rest}"


def _check_chain(step: _Step) -> None:
    record, former = step.record, step.former
    where = step.folder / record.files["entries"].name
    number, previous, first_seq = (
        (0, "", 0) if former is None else (former.number + 1, former.digest, former.first_seq + former.entries)
    )
    if (record.number, record.previous, record.first_seq) != (number, previous, first_seq):
        raise damaged(where, f"commit {record.number} does not follow the one before it")
    again = sealed(
        step.terms,
        number=record.number,
        kind=record.kind,
        source=record.source,
        previous=record.previous,
        **step.tables,
    )
    if again.digest != record.digest:
        raise damaged(where, f"commit {record.number} does not have the content that its digest was made of")


def _check_entries(step: _Step) -> None:
    table, record, terms = step.tables["entries"], step.record, step.terms
    if table.num_rows != record.entries:
        raise step.fail("entries", f"holds {table.num_rows} entries, the head says {record.entries}")
    if table.num_rows == 0:
        return
    get = {name: schema.column(table, name) for name in table.schema.names}
    known = np.isin(get["node"].astype(np.str_), terms.node)
    if not known.all():
        k = int(np.argmin(known))
        raise step.fail("entries", f"entry {get['seq'][k]} is of the unknown node {get['node'][k]!r}")
    index = terms.index_of(get["node"], "entries")
    first = np.flatnonzero(np.r_[True, index[1:] != index[:-1]])
    mass_kg = (
        terms.dry_mass_kg if step.former is None else schema.column(step.former_tables["balances"], "mass_kg")
    )
    expected_before = np.r_[np.nan, get["mass_after_kg"][:-1]]
    expected_before[first] = mass_kg[index[first]]
    before, spent = get["mass_before_kg"], get["propellant_kg"]
    cause = get["cause"].astype(np.str_)
    stated = np.isin(cause, ("load", "leak")) | ((cause == "correction") & (get["dv_m_s"] == 0))
    burnt = np.where(stated, spent, propellant_kg(before, get["dv_m_s"], get["isp_s"]))
    near = _TOLERANCE * np.abs(before)
    is_correction = record.kind == "correction"
    lawful = {"opening": ("load",), "correction": ("correction",)}.get(record.kind, schema.CAUSES[1:-1])
    rules = (
        ("seq does not follow", get["seq"] == record.first_seq + np.arange(index.size)),
        ("its cause is not one of this kind of commit", np.isin(cause, lawful)),
        ("its class is not the node's", get["class"] == terms.class_name[index].astype(object)),
        ("its nodes are out of order", np.r_[True, np.diff(index) >= 0]),
        ("mass_before_kg is not the mass that the node had", before == expected_before),
        ("dv_m_s is not lawful", np.isfinite(get["dv_m_s"]) & ((get["dv_m_s"] >= 0) | is_correction)),
        ("propellant_kg is not what the rocket equation gives", np.abs(spent - burnt) <= near),
        ("mass_after_kg is not mass less propellant", np.abs(before - spent - get["mass_after_kg"]) <= near),
        ("mass_after_kg is below the dry mass", get["mass_after_kg"] >= terms.dry_mass_kg[index] - near),
        ("margin_kg is no number", np.isfinite(get["margin_kg"])),
    )
    worst = min(((int(np.argmin(ok)), n) for n, (_, ok) in enumerate(rules) if not np.all(ok)), default=None)
    if worst:
        k, what = worst[0], rules[worst[1]][0]
        raise step.fail("entries", f"entry {record.first_seq + k} (node {get['node'][k]}): {what}")


def _check_correction(step: _Step) -> None:
    if step.record.kind != "correction":
        return
    line = step.tables["entries"].to_pylist()[0] if step.tables["entries"].num_rows == 1 else {}
    source = step.record.source
    if line.get("source") != source or not source.removeprefix("seq:").isdecimal():
        raise step.fail("entries", "a correction does not name the one entry that it reverses")
    before = Head(step.head.terms, step.head.commits[: step.record.number])
    wrong = line_to_correct(step.folder, before, int(source.removeprefix("seq:")))
    same = all(line[name] == wrong[name] for name in ("node", "isp_s"))
    opposite = all(line[name] == 0.0 - wrong[name] for name in ("dv_m_s", "margin_kg"))
    if wrong["cause"] == "leak":
        opposite &= line["propellant_kg"] == 0.0 - wrong["propellant_kg"]
    if not (same and opposite):
        raise step.fail("entries", f"entry {line['seq']} does not reverse entry {wrong['seq']}")


def _check_roster(step: _Step) -> None:
    roster = step.tables["roster"]
    for kind in ("roster", "demand", "balances"):
        if not np.array_equal(schema.column(step.tables[kind], "node").astype(np.str_), step.terms.node):
            raise step.fail(kind, "its nodes are not those of the ledger in their order")
    fault = rosters.first_fault(roster)
    if fault:
        raise step.fail("roster", fault)
    if step.record.kind in ("commit", "post"):
        nodes = schema.column(step.tables["entries"], "node")
        try:
            rosters.refuse_the_dead(step.terms, step.former_tables["roster"], roster, nodes)
        except LedgerError as error:
            raise step.fail("entries", error.faults[0].sentence()) from error
    if step.record.kind == "correction" and rosters.changed_nodes(step.former_tables["roster"], roster).any():
        raise step.fail("roster", "a correction moved a node")


def _check_balances(step: _Step) -> None:
    stored, demand = step.tables["balances"], schema.column(step.tables["demand"], "demand_m_s_yr")
    if not (np.isfinite(demand) & (demand >= 0)).all():
        raise step.fail("demand", "a demand is negative or no number")
    again = balances_after(
        step.terms, step.former_tables.get("balances"), step.tables["entries"], step.tables["roster"], demand
    )
    near_kg = _TOLERANCE * (step.terms.dry_mass_kg + step.terms.loaded_kg)
    for name in schema.BALANCES.names:
        mine, theirs = schema.column(again, name), schema.column(stored, name)
        if name == "life_years":
            right = np.abs(mine - theirs) <= _LIFE_TOLERANCE_YEARS
        elif name.endswith("_kg") and name != "mass_kg":
            right = np.abs(mine - theirs) <= near_kg
        else:
            right = mine == theirs
        if not np.all(right):
            k = int(np.argmin(right))
            raise step.fail(
                "balances",
                f"{name} of node {step.terms.node[k]} is {theirs[k]!s}, the entries give {mine[k]!s}",
            )


_CHECKS: tuple[tuple[str, Callable[[_Step], None]], ...] = (
    ("entries", _check_entries),
    ("corrections", _check_correction),
    ("roster", _check_roster),
    ("balances", _check_balances),
    ("digests", _check_chain),
)
