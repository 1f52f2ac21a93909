"""ROOM of the reference kinds: one file per kind and one line in `KINDS` adds one."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from farhold.dynamics.reference.equilibrium import Equilibrium
from farhold.dynamics.trajectory import Reference
from farhold.errors import CaseError, Fault

__all__ = ["KINDS", "make_reference"]

KINDS: dict[str, tuple[Callable[..., Reference], str]] = {
    "equilibrium": (Equilibrium.at, "the libration point itself, displaced by the reference's pressure"),
}


def make_reference(kind: str, **options: Any) -> Reference:
    """Build a reference of `kind` from the options its room asks for.

    Raises
    ------
    CaseError
        Unknown kind, or an option that the kind refuses.
    """
    if kind not in KINDS:
        raise CaseError(Fault("reference.kind", f"got {kind!r}", " ".join(KINDS)))
    return KINDS[kind][0](**options)
