"""Node classes: one type of node, its tanks, thruster and surface."""

from __future__ import annotations

import math
from dataclasses import dataclass

from farhold.errors import DomainError, Fault

__all__ = ["NodeClass"]


@dataclass(frozen=True, slots=True)
class NodeClass:
    """One type of node; a class with `capacity` is a hub.

    `thrust_efficiency` is the share of the thrust that acts along the wanted direction (cant, off-axis); the
    rest is paid for in propellant, so the effective specific impulse is `isp_s` times it.
    """

    name: str
    dry_mass_kg: float
    propellant_kg: float
    isp_s: float
    thrust_n: float
    impulse_bit_n_s: float = 0.0
    solar_area_m2: float = 0.0
    solar_coefficient: float = 1.0
    attitude_m_s_per_year: float = 0.0
    thrust_efficiency: float = 1.0
    sun_cone_rad: float | None = None
    leak_kg_per_year: float = 0.0
    attitude_isp_s: float | None = None
    capacity: int | None = None
    link_range_m: float | None = None

    def __post_init__(self) -> None:
        for name in ("dry_mass_kg", "isp_s", "thrust_n", "thrust_efficiency"):
            value = getattr(self, name)
            if not (value > 0 and math.isfinite(value)):
                raise DomainError(Fault(f"class {self.name}.{name}", f"got {value!r}", "a finite number above 0"))
        for name in (
            "propellant_kg",
            "impulse_bit_n_s",
            "solar_area_m2",
            "attitude_m_s_per_year",
            "leak_kg_per_year",
        ):
            value = getattr(self, name)
            if not (value >= 0 and math.isfinite(value)):
                raise DomainError(
                    Fault(f"class {self.name}.{name}", f"got {value!r}", "a finite number, 0 or above")
                )

    @property
    def effective_isp_s(self) -> float:
        """Specific impulse along the wanted direction [s]."""
        return self.isp_s * self.thrust_efficiency

    @property
    def is_hub(self) -> bool:
        """Whether nodes of this class serve members."""
        return self.capacity is not None
