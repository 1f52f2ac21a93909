"""The swarm at one instant: who exists, what each weighs, who sits in which slot."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.domain.node_class import NodeClass
from farhold.errors import DomainError, Fault

__all__ = ["SwarmState"]


@dataclass(frozen=True, slots=True, eq=False)
class SwarmState:
    """Arrays over the n nodes, in the order of the case's nodes.

    Attributes
    ----------
    classes : the node classes; `class_index` points into it
    node : (n,) str, unique names
    class_index : (n,) int
    mass_kg : (n,) mass now
    dry_mass_kg : (n,) mass without any propellant
    loaded_kg : (n,) propellant at load, the base of the residual share
    solar_area_m2 : (n,) area that radiation pressure acts on
    alive : (n,) bool, False for lost and retired nodes
    formation, slot : (n,) str, where each sits; "" where it sits nowhere
    since_s : (n,) seconds from the case's epoch since when it sits there
    """

    classes: tuple[NodeClass, ...]
    node: NDArray[np.str_]
    class_index: NDArray[np.int64]
    mass_kg: NDArray[np.float64]
    dry_mass_kg: NDArray[np.float64]
    loaded_kg: NDArray[np.float64]
    solar_area_m2: NDArray[np.float64]
    alive: NDArray[np.bool_]
    formation: NDArray[np.str_]
    slot: NDArray[np.str_]
    since_s: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = self.node.size
        for name in self.__dataclass_fields__:
            if name != "classes" and getattr(self, name).shape != (n,):
                raise DomainError(
                    Fault(f"swarm state.{name}", f"shape {getattr(self, name).shape}", f"shape ({n},)")
                )

    def __len__(self) -> int:
        return int(self.node.size)

    def per_class(self, attribute: str) -> NDArray[np.float64]:
        """Spread a numeric attribute of the classes over the nodes, (n,)."""
        return np.array([getattr(c, attribute) for c in self.classes], dtype=float)[self.class_index]

    @property
    def class_name(self) -> NDArray[np.str_]:
        """Class names per node, (n,)."""
        return np.array([c.name for c in self.classes], dtype=np.str_)[self.class_index]

    @property
    def pressure_area_m2_kg(self) -> NDArray[np.float64]:
        """C_R A/m per node at the present mass, (n,) [m2/kg]."""
        area: NDArray[np.float64] = self.per_class("solar_coefficient") * self.solar_area_m2 / self.mass_kg
        return area
