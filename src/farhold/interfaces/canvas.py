"""The look that all pictures share: palette safe for colour-blind eyes, plain axes, units in the labels."""

from __future__ import annotations

import io
from collections.abc import Callable
from pathlib import Path
from typing import Any

from farhold.files import write_bytes_durably

__all__ = ["AMBER", "GREY", "INK", "PLUM", "TEAL", "decades", "picture"]

INK, GREY, TEAL, AMBER, PLUM = "#20262e", "#8a93a0", "#117a8b", "#d08a1d", "#7d3c78"
_STYLE: Any = {
    "font.size": 10.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": GREY,
    "axes.labelcolor": INK,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "axes.grid": True,
    "axes.axisbelow": True,
    "axes.titleweight": "bold",
    "axes.titlepad": 10.0,
    "grid.color": "#e4e7ea",
    "grid.linewidth": 0.8,
    "legend.frameon": False,
    "svg.hashsalt": "farhold",
}


def decades(axis: Any) -> None:
    """Label an axis that goes by powers of ten with plain numbers."""
    from matplotlib.ticker import FuncFormatter, NullFormatter

    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:,.6g}"))
    axis.set_minor_formatter(NullFormatter())


def picture(
    folder: Path, name: str, paint: Callable[[Any], None], width_in: float = 7.0, height_in: float = 4.2
) -> list[Path]:
    """Paint one pair of axes and write it as ``name.png`` and ``name.svg``.

    Parameters
    ----------
    folder : where to write; it exists
    paint : given the axes
    """
    import matplotlib as mpl
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    written = []
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(width_in, height_in), layout="constrained")
        FigureCanvasAgg(figure)
        paint(figure.add_subplot())
        for ending in ("png", "svg"):
            sink = io.BytesIO()
            # no date inside: equal findings give equal pictures
            extra: dict[str, Any] = {"metadata": {"Date": None}} if ending == "svg" else {"dpi": 160}
            figure.savefig(sink, format=ending, **extra)
            path = folder / f"{name}.{ending}"
            write_bytes_durably(path, sink.getvalue())
            written.append(path)
    return written
