"""How results look on a terminal: labelled lines, and tables without frames."""

from __future__ import annotations

import sys
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

from farhold.interfaces.cli.text import plain_text

if TYPE_CHECKING:
    from rich.console import Console

__all__ = ["Sheet", "spread"]

_LABEL_WIDTH = 12


class Sheet:
    """A page of text on standard output, as wide as the terminal (80 columns where there is none)."""

    def __init__(self) -> None:
        from rich.console import Console

        class Pipe(Console):
            def on_broken_pipe(self) -> None:
                # rich would leave with 1; whoever reads no further has what he wanted
                raise BrokenPipeError

        self.console: Console = Pipe(file=sys.stdout, markup=False, highlight=False, emoji=False)

    def line(self, text: str = "", style: str = "", hang: int = 0) -> None:
        """Write one paragraph; its lines after the first stand `hang` columns in."""
        self._fold("", text, style, hang)

    def labelled(self, lines: Iterable[tuple[str, ...]], width: int = _LABEL_WIDTH) -> None:
        """Write lines of (label, text [, style]), the texts under each other `width` columns in."""
        for label, text, *style in lines:
            self._fold(label.ljust(width), text, "".join(style), width)

    def _fold(self, head: str, text: str, style: str, hang: int) -> None:
        from rich.text import Text

        room = max(self.console.width - hang, 20)
        parts = Text(plain_text(text), style=style).wrap(self.console, room)
        for place, part in enumerate(parts):
            part.rstrip()
            self.console.print(Text.assemble((" " * hang if place else head, "dim"), part), soft_wrap=True)

    def table(
        self, title: str, heads: Sequence[str], rows: Iterable[Sequence[str]], text_columns: int = 1
    ) -> None:
        """Write a table under `title`; the first `text_columns` columns hold names, the others numbers."""
        from rich.table import Table
        from rich.text import Text

        self.console.print()
        self.line(title, style="bold")
        table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
        for position, head in enumerate(heads):
            # two header lines keep nine columns inside 80
            table.add_column(
                Text(head),
                justify="left" if position < text_columns else "right",
                overflow="fold",
                vertical="bottom",
            )
        for row in rows:
            table.add_row(*(Text(plain_text(cell)) for cell in row))
        self.console.print(table)


def spread(values: Sequence[float], most: float, cells: int = 10) -> str:
    """Draw how `values` spread from 0 to `most`, one character for each tenth of the way."""
    counts = [0] * cells
    for value in values:
        place = int(cells * value / most) if most > 0 else 0
        counts[min(max(place, 0), cells - 1)] += 1
    marks = "▁▂▃▄▅▆▇█" if (getattr(sys.stdout, "encoding", "") or "").lower().startswith("utf") else ".:-=+*#@"
    tallest = max(counts) or 1
    return "".join(" " if not count else marks[(len(marks) - 1) * count // tallest] for count in counts)
