"""Margins: shares added to prices and propellant held back, each with its reason."""

from __future__ import annotations

import math
from dataclasses import dataclass

from farhold.errors import DomainError, Fault

__all__ = ["DEFAULT_MARGINS", "Margins"]


@dataclass(frozen=True, slots=True)
class Margins:
    """Margin policy; shares are fractions, so 5 % is 0.05.

    Defaults follow the margin philosophy for science assessment studies, SRE-PA/2011.097, Iss. 1 Rev. 3,
    2012 (requirement numbers R-DV-11, R-DV-13, R-M1-6), as recorded from secondary sources.
    """

    manoeuvre: float = 0.05
    attitude: float = 1.0
    residual: float = 0.02
    contingency_m_s: float = 0.0
    manoeuvre_why: str = "computed manoeuvres"
    attitude_why: str = "not yet modelled"
    residual_why: str = "propellant that cannot be drawn"
    contingency_why: str = "none asked"

    def __post_init__(self) -> None:
        for name in ("manoeuvre", "attitude", "residual", "contingency_m_s"):
            value = getattr(self, name)
            if not (value >= 0 and math.isfinite(value)):
                raise DomainError(Fault(f"margins.{name}", f"got {value!r}", "a finite number, 0 or above"))
        if self.residual >= 1:
            raise DomainError(Fault("margins.residual", f"got {self.residual!r}", "below 1 (100 %)"))


DEFAULT_MARGINS = Margins()
