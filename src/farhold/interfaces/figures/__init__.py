"""ROOM of the pictures of studies: one file per study and one line in `FIGURES` adds one. Own palette, no logo."""

from __future__ import annotations

from collections.abc import Callable
from importlib import import_module
from pathlib import Path
from typing import Any

__all__ = ["FIGURES", "draw"]

FIGURES: dict[str, tuple[str, str]] = {
    "drift": ("drift", "how far nodes drift over time, and baselines before and after"),
    "hold": ("hold", "what nodes pay a year against the continuous price"),
}


def draw(study: str, findings: Any, folder: str | Path) -> list[Path]:
    """Write the pictures of a study's findings to `folder` as PNG and SVG; returns the files."""
    module = import_module(f"farhold.interfaces.figures.{FIGURES[study][0]}")
    drawers: Callable[[Any, Path], list[Path]] = module.draw
    return drawers(findings, Path(folder))
