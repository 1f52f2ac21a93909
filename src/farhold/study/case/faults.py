"""Faults of a case: collected over the whole file, each with its file, line and field."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, field

from farhold.errors import CaseError, FarholdError, Fault
from farhold.study.case.lines import KeyPath, Lines

__all__ = ["FaultList", "did_you_mean", "say_path", "some_names", "unknown_fault", "unknown_name"]


def did_you_mean(name: str, known: Iterable[str]) -> str:
    """Return ``did you mean 'x'?`` for the known name nearest to `name`, or an empty text."""
    names = list(known)
    folded = {item.lower(): item for item in names}
    close = difflib.get_close_matches(name.lower(), list(folded), 1, 0.6)
    return f"did you mean {folded[close[0]]!r}?" if close else ""


def some_names(names: Iterable[object], most: int = 8) -> str:
    """List up to `most` names and say how many more there are."""
    listed = [str(name) for name in names]
    text = ", ".join(listed[:most])
    return text if len(listed) <= most else f"{text} and {len(listed) - most} more"


def unknown_fault(where: str, name: str, noun: str, known: Iterable[str]) -> Fault:
    """Say that no `noun` is called `name`, and which are."""
    names = list(known)
    return Fault(where, f"there is no {noun} {name!r}", some_names(names), did_you_mean(name, names))


def unknown_name(where: str, name: str, noun: str, known: Iterable[str]) -> CaseError:
    """Make the error that says so."""
    return CaseError(unknown_fault(where, name, noun, known))


def say_path(path: KeyPath) -> str:
    """Write a key path for people; places in a list count from 1: ``formation.wide.slots[1].radius``."""
    text = ""
    for part in path:
        text += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if text else part
    return text


@dataclass(slots=True)
class FaultList:
    """Gathers the faults of one case file, so that all are said at once."""

    file: str
    lines: Lines
    faults: list[tuple[int, Fault]] = field(default_factory=list)

    def add(self, path: KeyPath, what: str, allowed: str = "", hint: str = "") -> None:
        """Note that the value at `path` is wrong."""
        line = self.lines.at(path)
        place = f"{self.file}:{line}: {say_path(path)}" if path else f"{self.file}"
        self.faults.append((line, Fault(place, what, allowed, hint)))

    def add_fault(self, path: KeyPath, fault: Fault) -> None:
        """Note `fault` at `path`; the place it names itself is left out."""
        self.add(path, fault.what, fault.allowed, fault.hint)

    def add_plain(self, path: KeyPath, faults: Iterable[Fault]) -> None:
        """Note faults of a table named at `path`, which say their own place."""
        self.faults.extend((self.lines.at(path), fault) for fault in faults)

    def take(self, path: KeyPath, error: FarholdError) -> None:
        """Note every fault of `error` at `path`."""
        for fault in error.faults:
            self.add_fault(path, fault)

    def raise_if_any(self) -> None:
        """Raise what was gathered, in the order of the file's lines, each sentence once."""
        if self.faults:
            ordered = dict.fromkeys(fault for _, fault in sorted(self.faults, key=lambda item: item[0]))
            raise CaseError(ordered)
