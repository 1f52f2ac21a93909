"""The resolved case: everything a study needs, in SI floats and arrays, read once and frozen."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S, Epoch
from farhold.domain.formation import Formation
from farhold.domain.margins import Margins
from farhold.domain.node_class import NodeClass
from farhold.domain.state import SwarmState
from farhold.study.case.faults import unknown_name
from farhold.study.case.placing import place

__all__ = [
    "Case",
    "Deploy",
    "Errors",
    "Hold",
    "Holding",
    "Lose",
    "Miss",
    "NodeTable",
    "Phase",
    "Rates",
    "ReferenceSpec",
    "Regroup",
    "Reshape",
    "Retire",
    "Safety",
    "Trim",
]


@dataclass(frozen=True, slots=True)
class ReferenceSpec:
    """What the case asks of the reference.

    `pressure_area_m2_kg` is C_R A/m, None where the case leaves it to the mean of its nodes (see
    :attr:`Case.reference_pressure_m2_kg`). `options` holds what the kind needs, in SI: ``family`` (str),
    ``az_m``, ``ay_m``, ``period_s``, ``amplitude_m``, ``phase_rad``, ``span_s``.
    """

    point: str
    kind: str
    model: str
    pressure_area_m2_kg: float | None = None
    options: dict[str, float | str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, eq=False)
class NodeTable:
    """The n nodes at load, in the order of the case; `class_index` points into the case's `classes`.

    `mass_kg` is dry plus propellant at load, `loaded_kg` the propellant, all (n,).
    """

    node: NDArray[np.str_]
    class_index: NDArray[np.int64]
    mass_kg: NDArray[np.float64]
    dry_mass_kg: NDArray[np.float64]
    loaded_kg: NDArray[np.float64]
    solar_area_m2: NDArray[np.float64]

    def __len__(self) -> int:
        return int(self.node.size)


@dataclass(frozen=True, slots=True)
class Errors:
    """Navigation, execution and surface errors, 1 sigma, per axis; shares are fractions.

    `gaps_s` holds (start, end) of spans without measurement, in seconds from the case's epoch.
    """

    navigation_position_m: float = 0.0
    navigation_velocity_m_s: float = 0.0
    measurement_cadence_s: float = DAY_S
    gaps_s: tuple[tuple[float, float], ...] = ()
    drop_outs: float = 0.0
    unmodelled_acceleration_m_s2: float = 0.0
    execution_magnitude: float = 0.0
    execution_fixed_m_s: float = 0.0
    execution_pointing_rad: float = 0.0
    area_spread: float = 0.0
    release_speed_m_s: float = 0.0


@dataclass(frozen=True, slots=True)
class Rates:
    """How often things fail: share of burns missed, share of nodes lost per year."""

    missed_burns: float = 0.0
    failures_per_year: float = 0.0


@dataclass(frozen=True, slots=True)
class Holding:
    """Holding policy, half-width of its box on each axis, time between decisions."""

    policy: str = "box"
    box_m: float = 2000.0
    cadence_s: float = 7 * DAY_S


@dataclass(frozen=True, slots=True)
class Trim:
    """Days of trims, from departure where positive, before arrival where negative."""

    days: tuple[float, ...] = (2.0, 10.0, -2.0)


@dataclass(frozen=True, slots=True)
class Safety:
    """Least distance between nodes and the sigmas at which it is checked."""

    separation_m: float = 200.0
    sigmas: float = 3.0


@dataclass(frozen=True, slots=True)
class Deploy:
    """Release from the carrier into the formation `to`, one node each `interval_s`."""

    phase: ClassVar[str] = "deploy"
    to: str
    over_s: float
    release_speed_m_s: float
    interval_s: float


@dataclass(frozen=True, slots=True)
class Hold:
    """Keep the slots for `for_s`."""

    phase: ClassVar[str] = "hold"
    for_s: float


@dataclass(frozen=True, slots=True)
class Reshape:
    """Change to the formation `to` in `over_s`."""

    phase: ClassVar[str] = "reshape"
    to: str
    over_s: float


@dataclass(frozen=True, slots=True)
class Lose:
    """Lose `nodes` at `at_s` seconds from the case's epoch (None: when the phase is reached)."""

    phase: ClassVar[str] = "lose"
    nodes: tuple[str, ...]
    at_s: float | None = None


@dataclass(frozen=True, slots=True)
class Miss:
    """A burn of `nodes` falls short by `share` (1: missed altogether); it is then planned anew."""

    phase: ClassVar[str] = "miss"
    nodes: tuple[str, ...]
    share: float = 1.0
    at_s: float | None = None


@dataclass(frozen=True, slots=True)
class Regroup:
    """Give the members of lost hubs to others, in `over_s`."""

    phase: ClassVar[str] = "regroup"
    over_s: float


@dataclass(frozen=True, slots=True)
class Retire:
    """Leave the formation for good with `dv_m_s`."""

    phase: ClassVar[str] = "retire"
    dv_m_s: float


Phase = Deploy | Hold | Reshape | Lose | Miss | Regroup | Retire


@dataclass(frozen=True, slots=True, eq=False)
class Case:
    """A case file, read, checked and resolved; :func:`farhold.study.case.load` makes it.

    `path` is the file, `folder` where the tables it names are looked for. `formations` keeps the order of
    the file. `sha256` digests the bytes of the file and of the tables it names. `seed` is the study's seed
    where none is given.
    """

    title: str
    path: Path
    folder: Path
    epoch: Epoch
    reference: ReferenceSpec
    classes: tuple[NodeClass, ...]
    nodes: NodeTable
    formations: dict[str, Formation]
    errors: Errors
    rates: Rates
    holding: Holding
    trim: Trim
    margins: Margins
    safety: Safety
    burns_per_day: int | None
    timeline: tuple[Phase, ...]
    sha256: str
    seed: int = 0

    @property
    def opening_formation(self) -> str:
        """Name of the formation that the nodes sit in at first: the first phase's `to`, else the first."""
        first = self.timeline[0] if self.timeline else None
        return first.to if isinstance(first, Deploy | Reshape) else next(iter(self.formations))

    @property
    def reference_pressure_m2_kg(self) -> float:
        """C_R A/m of the reference: as given, else the count mean over the nodes at loaded mass [m2/kg]."""
        if self.reference.pressure_area_m2_kg is not None:
            return self.reference.pressure_area_m2_kg
        coefficient = np.array([c.solar_coefficient for c in self.classes])[self.nodes.class_index]
        return float(np.mean(coefficient * self.nodes.solar_area_m2 / self.nodes.mass_kg))

    def formation(self, name: str, where: str = "formation") -> Formation:
        """Return the formation `name`.

        Raises
        ------
        CaseError
            There is none; the message names `where` and the nearest name.
        """
        if name not in self.formations:
            raise unknown_name(where, name, "formation", self.formations)
        return self.formations[name]

    def initial_state(self, formation: str | None = None, *, allow_unplaced: bool = False) -> SwarmState:
        """Place the nodes at load in `formation`, by default :attr:`opening_formation`.

        The k-th node of a class sits in its k-th slot and pinned nodes in their slots; nodes left over go to
        the formation's `spares` in the same way. Propellant is that at load, `since_s` is 0.

        Raises
        ------
        CaseError
            No such formation, or nodes without a place (named), unless `allow_unplaced`, which leaves their
            formation and slot empty.
        """
        start = self.formation(formation or self.opening_formation, "formation")
        class_names = np.array([c.name for c in self.classes], dtype=np.str_)[self.nodes.class_index]
        where, slot = place(self.nodes.node, class_names, start, self.formations, allow_unplaced)
        n = len(self.nodes)
        return SwarmState(
            classes=self.classes,
            node=self.nodes.node,
            class_index=self.nodes.class_index,
            mass_kg=self.nodes.mass_kg.copy(),
            dry_mass_kg=self.nodes.dry_mass_kg,
            loaded_kg=self.nodes.loaded_kg,
            solar_area_m2=self.nodes.solar_area_m2,
            alive=np.ones(n, dtype=bool),
            formation=where,
            slot=slot,
            since_s=np.zeros(n),
        )
