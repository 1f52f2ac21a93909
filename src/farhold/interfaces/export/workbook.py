"""The ledger as a workbook whose balances stay live: change a speed change and the tank follows.

Every formula is written with its value, since a spreadsheet program may show a file without computing it.
Above `LIVE_ROWS` entries values stand in place of formulas, split over sheets where one is full.
"""

from __future__ import annotations

import io
import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import xlsxwriter

from farhold.constants import G0

if TYPE_CHECKING:
    import pandas as pd

    from farhold.study.book import Ledger

__all__ = ["LIVE_ROWS", "SHEET_ROWS", "render"]

LIVE_ROWS = 200_000
SHEET_ROWS = 1_048_576
CAUTION = (
    "Planning estimates, not flight-certified commands: the responsible flight-dynamics and safety "
    "authority decides."
)

ENTRY_COLUMNS = {
    "seq": 8,
    "node": 12,
    "class": 12,
    "epoch_tdb": 20,
    "cause": 11,
    "source": 20,
    "dv_m_s": 14,
    "isp_s": 10,
    "mass_before_kg": 18,
    "mass_after_kg": 18,
    "propellant_kg": 18,
    "margin_kg": 16,
    "note": 40,
}
BALANCE_COLUMNS = {
    "node": 12,
    "class": 12,
    "status": 9,
    "formation": 14,
    "slot": 16,
    "dry_mass_kg": 14,
    "isp_s": 10,
    "loaded_kg": 14,
    "spent_kg": 16,
    "mass_kg": 16,
    "margin_kg": 16,
    "usable_kg": 16,
    "life_years": 12,
}
_NUMBERS = {"seq", "isp_s", "dv_m_s", "life_years", "nodes", "value"}
_NUMBERS |= {name for name in (*ENTRY_COLUMNS, *BALANCE_COLUMNS) if name.endswith("_kg")}
_FORMATS = {
    "text": {"num_format": "@", "indent": 1},
    "head": {"bold": True, "bottom": 1, "align": "left", "indent": 1},
    "head of numbers": {"bold": True, "bottom": 1, "align": "right"},
    "title": {"bold": True, "font_size": 14},
    "epoch": {"num_format": "yyyy-mm-dd hh:mm:ss", "align": "left", "indent": 1},
    "kg": {"num_format": "0.000000000"},
    "dv": {"num_format": "0.000000"},
    "share": {"num_format": "0.0##%"},
    "plain": {"num_format": "0.0########"},
    "whole": {"num_format": "0"},
}


def render(ledger: Ledger, nodes: Sequence[str] | None) -> bytes:
    """Return the workbook of `ledger` (of `nodes` only, if given) as bytes."""
    balances = _balances(ledger, nodes)
    entries = _entries(ledger, nodes, [str(name) for name in balances["node"]])
    buffer = io.BytesIO()
    options = {"constant_memory": True, "strings_to_formulas": False, "strings_to_urls": False}
    with xlsxwriter.Workbook(buffer, options) as book:
        _Pages(book, live=len(entries) <= LIVE_ROWS).write(ledger, balances, entries)
    return buffer.getvalue()


def _balances(ledger: Ledger, nodes: Sequence[str] | None) -> pd.DataFrame:
    frame: pd.DataFrame = ledger.balances().merge(
        ledger.terms[["node", "dry_mass_kg", "isp_s"]], on="node", validate="1:1"
    )
    if nodes is not None:
        frame = frame[frame["node"].isin(list(nodes))].reset_index(drop=True)
    return frame


def _entries(ledger: Ledger, nodes: Sequence[str] | None, order: list[str]) -> pd.DataFrame:
    frame: pd.DataFrame = ledger.entries(nodes)
    rank = frame["node"].map({name: place for place, name in enumerate(order)})
    return frame.assign(_rank=rank).sort_values(["_rank", "seq"], kind="stable").reset_index(drop=True)


class _Pages:
    """Writes the sheets; `live` says whether formulas or values go in."""

    def __init__(self, book: Any, live: bool) -> None:
        self.book = book
        self.live = live
        self.formats = {name: book.add_format(style) for name, style in _FORMATS.items()}

    def write(self, ledger: Ledger, balances: pd.DataFrame, entries: pd.DataFrame) -> None:
        """Write all sheets: the answer first, the assumptions last."""
        summary = self.book.add_worksheet("Summary")
        sheet = self.book.add_worksheet("Balances")
        self._write_entries(entries)
        self._write_assumptions(ledger)
        self._write_balances(sheet, balances, entries)
        self._write_summary(summary, ledger, balances, len(entries))

    def _number(self, sheet: Any, row: int, column: int, value: float, style: str) -> None:
        if math.isfinite(value):
            sheet.write_number(row, column, value, self.formats[style])

    def _formula(self, sheet: Any, row: int, column: int, formula: str, value: float, style: str) -> None:
        if self.live:
            sheet.write_formula(row, column, formula, self.formats[style], value)
        else:
            self._number(sheet, row, column, value, style)

    def _text(self, sheet: Any, row: int, column: int, value: object) -> None:
        text = "" if value is None or value != value else str(value)
        if text:
            sheet.write_string(row, column, text, self.formats["text"])

    def _head(self, sheet: Any, columns: dict[str, int], frozen: int) -> None:
        sheet.freeze_panes(1, frozen)
        sheet.repeat_rows(0)
        self._fit(sheet)
        for place, (name, width) in enumerate(columns.items()):
            sheet.set_column(place, place, width)
            self._head_cell(sheet, 0, place, name)

    def _head_cell(self, sheet: Any, row: int, column: int, name: str) -> None:
        style = "head of numbers" if name in _NUMBERS else "head"
        sheet.write_string(row, column, name, self.formats[style])

    def _fit(self, sheet: Any) -> None:
        sheet.set_landscape()
        sheet.set_paper(9)
        sheet.fit_to_pages(1, 0)

    def _write_entries(self, entries: pd.DataFrame) -> None:
        room = SHEET_ROWS - 1
        for part, start in enumerate(range(0, max(len(entries), 1), room), 1):
            sheet = self.book.add_worksheet("Entries" if part == 1 else f"Entries {part}")
            self._head(sheet, ENTRY_COLUMNS, 2)
            self._fill_entries(sheet, entries.iloc[start : start + room])

    def _fill_entries(self, sheet: Any, part: pd.DataFrame) -> None:
        follows, burns = _linked(part)
        columns = [part[name].tolist() for name in ENTRY_COLUMNS if name != "epoch_tdb"]
        epochs = part["epoch_tdb"].dt.floor("ms").dt.to_pydatetime() if len(part) else []
        for row, (values, epoch, follow, burn) in enumerate(
            zip(zip(*columns, strict=True), epochs, follows, burns, strict=True), 1
        ):
            seq, node, kind, cause, source, dv, isp, before, after, propellant, margin, note = values
            line = row + 1
            sheet.write_number(row, 0, seq, self.formats["whole"])
            self._text(sheet, row, 1, node)
            self._text(sheet, row, 2, kind)
            sheet.write_datetime(row, 3, epoch, self.formats["epoch"])
            self._text(sheet, row, 4, cause)
            self._text(sheet, row, 5, source)
            self._number(sheet, row, 6, dv, "dv")
            self._number(sheet, row, 7, isp, "plain")
            if follow:
                self._formula(sheet, row, 8, f"=J{line - 1}", before, "kg")
            else:
                self._number(sheet, row, 8, before, "kg")
            if burn:
                self._formula(sheet, row, 9, f"=I{line}*EXP(-G{line}/(H{line}*g0_m_s2))", after, "kg")
            elif cause == "load":
                self._number(sheet, row, 9, after, "kg")
            else:
                self._formula(sheet, row, 9, f"=I{line}-K{line}", after, "kg")
            if burn or cause == "load":
                self._formula(sheet, row, 10, f"=I{line}-J{line}", propellant, "kg")
            else:
                self._number(sheet, row, 10, propellant, "kg")
            self._number(sheet, row, 11, margin, "kg")
            self._text(sheet, row, 12, note)

    def _write_balances(self, sheet: Any, balances: pd.DataFrame, entries: pd.DataFrame) -> None:
        self._head(sheet, BALANCE_COLUMNS, 1)
        first, last = _ranges(entries, len(balances))
        for row, values in enumerate(balances[list(BALANCE_COLUMNS)].itertuples(index=False, name=None), 1):
            *texts, dry, isp, loaded, spent, mass, margin, usable, life = values
            line, top, end = row + 1, first[row - 1], last[row - 1]
            for column, text in enumerate(texts):
                self._text(sheet, row, column, text)
            self._number(sheet, row, 5, dry, "kg")
            self._number(sheet, row, 6, isp, "plain")
            self._number(sheet, row, 7, loaded, "kg")
            spends = f'=SUMIF(Entries!E{top}:E{end},"<>load",Entries!K{top}:K{end})'
            self._formula(sheet, row, 8, spends, spent, "kg")
            self._formula(sheet, row, 9, f"=Entries!J{end}", mass, "kg")
            self._formula(sheet, row, 10, f"=SUM(Entries!L{top}:L{end})", margin, "kg")
            residual = f"residual_share*H{line}"
            reserve = f"(F{line}+{residual})*(EXP(contingency_m_s/(G{line}*g0_m_s2))-1)"
            self._formula(sheet, row, 11, f"=J{line}-F{line}-{residual}-{reserve}", usable, "kg")
            self._number(sheet, row, 12, life, "plain")

    def _write_assumptions(self, ledger: Ledger) -> None:
        sheet = self.book.add_worksheet("Assumptions")
        margins = ledger.margins
        self._head(sheet, {"name": 20, "value": 14, "unit": 10, "why": 70}, 1)
        rows = [
            ("g0_m_s2", G0.value, "m/s2", G0.source, "plain"),
            ("residual_share", margins.residual, "of loaded", margins.residual_why, "share"),
            ("contingency_m_s", margins.contingency_m_s, "m/s", margins.contingency_why, "plain"),
            (
                "manoeuvre_share",
                margins.manoeuvre,
                "of dv",
                f"{margins.manoeuvre_why} (in margin_kg)",
                "share",
            ),
            ("attitude_share", margins.attitude, "of dv", f"{margins.attitude_why} (in life_years)", "share"),
        ]
        for row, (name, value, unit, why, style) in enumerate(rows, 1):
            self._text(sheet, row, 0, name)
            self._number(sheet, row, 1, value, style)
            self._text(sheet, row, 2, unit)
            self._text(sheet, row, 3, why)
            self.book.define_name(name, f"=Assumptions!$B${row + 1}")
        notes = (
            "Entries: mass_after_kg = mass_before_kg * EXP(-dv_m_s / (isp_s * g0_m_s2)).",
            "The masses of a load and the propellant of a leak are given.",
            "Balances: usable_kg = mass_kg - dry_mass_kg - residual - contingency.",
            "residual = residual_share * loaded_kg.",
            "contingency = (dry_mass_kg + residual) * (EXP(contingency_m_s / (isp_s * g0_m_s2)) - 1).",
            "life_years and the margin_kg of an entry are values; they do not follow changes made here.",
            "Epochs are TDB, shown to the second and kept to the millisecond.",
        )
        for row, note in enumerate(notes, len(rows) + 2):
            self._text(sheet, row, 0, note)

    def _write_summary(self, sheet: Any, ledger: Ledger, balances: pd.DataFrame, entries: int) -> None:
        self._fit(sheet)
        sheet.set_column(0, 0, 16)
        sheet.set_column(1, 6, 17)
        sheet.write_string(0, 0, str(ledger.title), self.formats["title"])
        whole = len(ledger.terms)
        nodes = f"{len(balances)}" if len(balances) == whole else f"{len(balances)} of {whole}"
        how = "formulas, live" if self.live else f"values (more than {LIVE_ROWS} entries)"
        about = (("ledger_head", ledger.head), ("nodes", nodes), ("entries", str(entries)), ("balances", how))
        for row, (name, text) in enumerate(about, 1):
            self._text(sheet, row, 0, name)
            self._text(sheet, row, 1, text)
        top = len(about) + 2
        heads = ("class", "nodes", "loaded_kg", "spent_kg", "mass_kg", "margin_kg", "usable_kg")
        for column, head in enumerate(heads):
            self._head_cell(sheet, top, column, head)
        end = len(balances) + 1
        row = top
        for row, (kind, group) in enumerate(balances.groupby("class", sort=False), top + 1):
            self._text(sheet, row, 0, kind)
            test = f"Balances!B$2:B${end},A{row + 1}"
            self._formula(sheet, row, 1, f"=COUNTIF({test})", len(group), "whole")
            for column, letter in enumerate("HIJKL", 2):
                total = float(group[heads[column]].sum())
                formula = f"=SUMIF({test},Balances!{letter}$2:{letter}${end})"
                self._formula(sheet, row, column, formula, total, "kg")
        self._text(sheet, row + 2, 0, CAUTION)


def _linked(part: pd.DataFrame) -> tuple[list[bool], list[bool]]:
    """Tell for each row whether it begins where the node's former row ended, and whether it is a burn.

    A row that is no burn states what it takes: a load its masses, a leak its propellant.
    """
    before, after = part["mass_before_kg"].to_numpy(), part["mass_after_kg"].to_numpy()
    node = part["node"].to_numpy()
    follows = np.zeros(len(part), dtype=bool)
    follows[1:] = (node[1:] == node[:-1]) & (np.abs(before[1:] - after[:-1]) <= 1e-12 * np.abs(before[1:]))
    with np.errstate(all="ignore"):
        computed = before * np.exp(-part["dv_m_s"].to_numpy() / (part["isp_s"].to_numpy() * G0.value))
        burns = (part["cause"] != "load").to_numpy() & (np.abs(computed - after) <= 1e-12 * np.abs(before))
    return follows.tolist(), burns.tolist()


def _ranges(entries: pd.DataFrame, count: int) -> tuple[list[int], list[int]]:
    """Return for each node its first and last line in the sheet of entries, counted from 1 with the head."""
    rank = entries["_rank"].to_numpy()
    wanted = np.arange(count)
    first = np.searchsorted(rank, wanted, side="left") + 2
    last = np.searchsorted(rank, wanted, side="right") + 1
    return first.tolist(), last.tolist()
