"""The tables a case names: looked for in its folder, read once, kept for the digest."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from farhold.errors import CaseError, Fault
from farhold.study.case.faults import did_you_mean
from farhold.study.case.tables import Columns, Table, read_table

__all__ = ["Sources"]

_ENDINGS = (".csv", ".parquet")


@dataclass(slots=True)
class Sources:
    """Reads tables relative to `folder`; `read` keeps their bytes in the order of first use."""

    folder: Path
    read: dict[str, bytes] = field(default_factory=dict)

    def table(self, name: str, columns: Columns) -> Table:
        """Read the table called `name`.

        Raises
        ------
        CaseError
            The file is not there or has another ending (a fault without a place: it belongs to the key that
            names the file), or its content is wrong (faults with the place in the file).
        """
        file = self.folder / name
        if file.suffix.lower() not in _ENDINGS:
            raise CaseError(Fault("", f"got {name!r}", "a .csv or .parquet file"))
        if name not in self.read:
            self.read[name] = self._bytes(file, name)
        return read_table(self.read[name], file.name, columns)

    def _bytes(self, file: Path, name: str) -> bytes:
        try:
            return file.read_bytes()
        except FileNotFoundError:
            fault = Fault("", f"there is no file {name!r} beside the case", hint=self._near(file))
        except IsADirectoryError:
            fault = Fault("", f"{name!r} is a folder", "a .csv or .parquet file")
        except (OSError, ValueError) as error:
            fault = Fault("", f"{name!r} cannot be read: {getattr(error, 'strerror', None) or error}")
        raise CaseError(fault)

    @staticmethod
    def _near(file: Path) -> str:
        try:
            tables = [item.name for item in file.parent.iterdir() if item.suffix.lower() in _ENDINGS]
        except OSError:
            return ""
        return did_you_mean(file.name, sorted(tables))
