"""Formations: sets of slots, places relative to the reference, and the rule by which they move."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.errors import DomainError, Fault

__all__ = ["AXES", "RULES", "Formation", "SlotTable"]

RULES = ("rotating", "inertial", "natural")
AXES = ("rotating", "icrf")


@dataclass(frozen=True, slots=True, eq=False)
class SlotTable:
    """The m slots of a formation, in the order of the case.

    Attributes
    ----------
    slot : (m,) str, unique names
    class_name : (m,) str, the class of node that the slot is for
    position_m : (m, 3) as given, in the formation's axes at its `start`
    priority : (m,) 1 is filled first; NaN where none was given
    node : (m,) str, the node pinned to the slot, "" where none is
    vn_m_s : (m,) velocity along N of a natural slot at `start`
    """

    slot: NDArray[np.str_]
    class_name: NDArray[np.str_]
    position_m: NDArray[np.float64]
    priority: NDArray[np.float64]
    node: NDArray[np.str_]
    vn_m_s: NDArray[np.float64]

    def __post_init__(self) -> None:
        m = self.slot.size
        for name in ("class_name", "priority", "node", "vn_m_s"):
            if getattr(self, name).shape != (m,):
                raise DomainError(Fault(f"slots.{name}", f"shape {getattr(self, name).shape}", f"shape ({m},)"))
        if self.position_m.shape != (m, 3) or not np.isfinite(self.position_m).all():
            raise DomainError(Fault("slots.position_m", "a shape or value is wrong", f"finite, shape ({m}, 3)"))

    def __len__(self) -> int:
        return int(self.slot.size)


@dataclass(frozen=True, slots=True, eq=False)
class Formation:
    """A named set of slots under one rule.

    `start_s` is the instant, in seconds from the case's epoch, at which the slots are given (their axes are
    frozen there for `inertial`, the snapshot is taken there for `natural`); `spares` names the formation that
    takes the nodes left over.
    """

    name: str
    rule: str
    slots: SlotTable
    start_s: float = 0.0
    axes: str = "rotating"
    spares: str | None = None

    def __post_init__(self) -> None:
        if self.rule not in RULES:
            raise DomainError(Fault(f"formation {self.name}.rule", f"got {self.rule!r}", " ".join(RULES)))
        if self.axes not in AXES:
            raise DomainError(Fault(f"formation {self.name}.axes", f"got {self.axes!r}", " ".join(AXES)))
