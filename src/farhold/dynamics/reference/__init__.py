"""ROOM of the reference kinds: one file per kind and one line in `KINDS` adds one."""

from __future__ import annotations

import inspect
from collections.abc import Callable
from functools import lru_cache
from typing import Any

from farhold.dynamics.reference import halo, lissajous, long_period, lyapunov, short_period
from farhold.dynamics.reference.equilibrium import Equilibrium
from farhold.dynamics.trajectory import Reference
from farhold.errors import CaseError, Fault

__all__ = ["KINDS", "make_reference", "options_of"]

KINDS: dict[str, tuple[Callable[..., Reference], str]] = {
    "equilibrium": (Equilibrium.at, "the libration point itself, displaced by the reference's pressure"),
    "halo": (halo.make, "a periodic orbit in space about L1 or L2, by az or period"),
    "lyapunov": (lyapunov.make, "a periodic orbit in the plane about L1, L2 or L3, by ay"),
    "lissajous": (lissajous.make, "an orbit about L1, L2 or L3 that never closes, by ay and az over a span"),
    "short-period": (short_period.make, "a periodic orbit of about a year about L4 or L5, by amplitude"),
    "long-period": (long_period.make, "a periodic orbit of about 221 years about L4 or L5, by amplitude"),
}
_EVERY_KIND = ("point", "epoch", "pressure_area_m2_kg", "system")


def options_of(kind: str) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Names of the options that `kind` needs and of those it may be given beyond.

    Raises
    ------
    CaseError
        Unknown kind.
    """
    if kind not in KINDS:
        raise CaseError(Fault("reference.kind", f"got {kind!r}", " ".join(KINDS)))
    own = {k: v for k, v in inspect.signature(KINDS[kind][0]).parameters.items() if k not in _EVERY_KIND}
    due = tuple(name for name, one in own.items() if one.default is inspect.Parameter.empty)
    return due, tuple(name for name in own if name not in due)


def make_reference(kind: str, **options: Any) -> Reference:
    """Build a reference of `kind` from the options its room asks for, or give the one built before.

    Raises
    ------
    CaseError
        Unknown kind, an option that the kind refuses or that is missing.
    DomainError, ConvergenceError
        As the kind says.
    """
    due, free = options_of(kind)
    faults = [
        Fault(f"reference.{name}", f"does not go with kind {kind!r}", " ".join(due + free) or "no further options")
        for name in options
        if name not in due + free + _EVERY_KIND
    ]
    faults += [
        Fault(f"reference.{name}", "is missing", f"a reference of kind {kind!r} needs {' '.join(due)}")
        for name in due
        if name not in options
    ]
    if faults:
        raise CaseError(faults)
    try:
        return _made(kind, tuple(sorted(options.items())))
    except TypeError:
        # an option that cannot be hashed: let the room say what is wrong with it
        return KINDS[kind][0](**options)


@lru_cache(maxsize=4)
def _made(kind: str, options: tuple[tuple[str, Any], ...]) -> Reference:
    """Build a reference once: what is calibrated for it by others stays good, for it is kept per reference."""
    return KINDS[kind][0](**dict(options))
