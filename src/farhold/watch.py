"""Progress and cancel protocol.

Lower floors report through a :class:`Watch` and know nothing of terminals; the interfaces hand in one that
draws. A watch may raise :class:`KeyboardInterrupt` from any call to stop the work at a clean place.
"""

from __future__ import annotations

from typing import Protocol, runtime_checkable

__all__ = ["SILENT", "Watch"]


@runtime_checkable
class Watch(Protocol):
    """What a long piece of work may say while it runs."""

    def note(self, text: str) -> None:
        """Say one line, such as a first compilation that takes a while."""

    def stage(self, name: str, total: int | None = None) -> None:
        """Begin a named part of the work of `total` steps (None: unknown)."""

    def advance(self, steps: int = 1) -> None:
        """Report that `steps` more steps of the present stage are done."""


class _Silent:
    """Says nothing."""

    def note(self, text: str) -> None:
        """Say nothing of `text`."""

    def stage(self, name: str, total: int | None = None) -> None:
        """Say nothing of the stage `name` and its `total`."""

    def advance(self, steps: int = 1) -> None:
        """Say nothing of `steps`."""


SILENT: Watch = _Silent()
