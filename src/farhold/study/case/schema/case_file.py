"""Schema 1 of a case file: tables, keys, kinds and defaults. Only this package knows pydantic."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag

from farhold.domain.epoch import DAY_S
from farhold.domain.formation import AXES, RULES
from farhold.study.case.schema.fields import EpochField, Model, Name, Text, choice, number, quantity, whole
from farhold.study.case.schema.slots_block import SlotsBlock

__all__ = ["CaseFile"]

_Length = Annotated[float, quantity("length", above=0, said="above 0")]
_Duration = Annotated[float, quantity("time", above=0, said="above 0")]
_Mass = Annotated[float, quantity("mass", above=0, said="above 0")]
_MassOrNone = Annotated[float, quantity("mass", least=0, said="0 or more")]
_Area = Annotated[float, quantity("area", least=0, said="0 or more")]
_Speed = Annotated[float, quantity("speed", least=0, said="0 or more")]
_Share = Annotated[float, quantity("ratio", least=0, most=1, said='"0 %" to "100 %"')]
_Margin = Annotated[float, quantity("ratio", least=0, said="0 % or more")]
_Count = Annotated[int, whole(least=1, most=1_000_000)]


class ReferenceTable(Model):
    """``[reference]``; which keys go with which kind is checked by the resolver."""

    point: Annotated[str, choice("L1", "L2", "L3", "L4", "L5")]
    kind: Annotated[
        str,
        choice("equilibrium", "halo", "lyapunov", "lissajous", "short-period", "long-period", "librating"),
    ] = "equilibrium"
    model: Annotated[str, choice("circular", "ephemeris")] = "circular"
    pressure_area: Annotated[float, quantity("area per mass", least=0, said="0 or more")] | None = None
    family: Annotated[str, choice("north", "south")] | None = None
    az: _Length | None = None
    ay: _Length | None = None
    period: _Duration | None = None
    amplitude: _Length | None = None
    phase: Annotated[float, quantity("angle")] | None = None
    span: _Duration | None = None


class ThrusterTable(Model):
    """``attitude_thruster`` of a class."""

    specific_impulse: _Duration


class ClassTable(Model):
    """``[class.NAME]``; a class with `capacity` is a hub."""

    dry_mass: _Mass
    propellant: _MassOrNone
    specific_impulse: _Duration
    thrust: Annotated[float, quantity("force", above=0, said="above 0")]
    impulse_bit: Annotated[float, quantity("impulse", least=0, said="0 or more")] = 0.0
    solar_area: _Area = 0.0
    solar_coefficient: Annotated[float, number(least=1, most=2)] = 1.0
    attitude_per_year: _Speed = 0.0
    thrust_efficiency: Annotated[float, quantity("ratio", above=0, most=1, said="above 0, up to 1")] = 1.0
    sun_cone: Annotated[float, quantity("angle", least=0, most=3.1416, said="0 to 180 deg")] | None = None
    leak_per_year: _MassOrNone = 0.0
    attitude_thruster: ThrusterTable | None = None
    capacity: _Count | None = None
    link_range: _Length | None = None


class CountedNodes(Model):
    """``[[swarm]]`` of nodes named by a prefix and a number."""

    class_: Name = Field(alias="class")
    count: _Count
    prefix: Name


class ListedNodes(Model):
    """``[[swarm]]`` of nodes listed in a file."""

    file: Text


def _nodes_tag(block: Any) -> str:
    return "listed nodes" if isinstance(block, dict) and "file" in block else "counted nodes"


SwarmBlock = Annotated[
    Annotated[CountedNodes, Tag("counted nodes")] | Annotated[ListedNodes, Tag("listed nodes")],
    Discriminator(_nodes_tag),
]


class FormationTable(Model):
    """``[formation.NAME]``."""

    rule: Annotated[str, choice(*RULES)]
    axes: Annotated[str, choice(*AXES)] = "rotating"
    start: EpochField | None = None
    spares: Name | None = None
    slots: Annotated[list[SlotsBlock], Field(min_length=1)]


class ErrorsTable(Model):
    """``[errors]``: 1 sigma, per axis."""

    navigation_position: Annotated[float, quantity("length", least=0, said="0 or more")] = 0.0
    navigation_velocity: _Speed = 0.0
    measurement_cadence: _Duration = DAY_S
    gaps: list[Annotated[list[EpochField], Field(min_length=2, max_length=2)]] = Field(default_factory=list)
    drop_outs: _Share = 0.0
    unmodelled_acceleration: Annotated[float, quantity("acceleration", least=0, said="0 or more")] = 0.0
    execution_magnitude: _Share = 0.0
    execution_fixed: _Speed = 0.0
    execution_pointing: Annotated[float, quantity("angle", least=0, said="0 or more")] = 0.0
    area_spread: _Share = 0.0
    release_speed: _Speed = 0.0


class RatesTable(Model):
    """``[rates]``."""

    missed_burns: _Share = 0.0
    failures_per_year: _Share = 0.0


class HoldingTable(Model):
    """``[holding]``."""

    policy: Annotated[str, choice("revisit", "box", "target-point", "unstable-mode")] = "box"
    box: _Length = 2000.0
    cadence: _Duration = 7 * DAY_S


class TrimTable(Model):
    """``[trim]``: days from departure where positive, before arrival where negative."""

    days: list[Annotated[float, number()]] = Field(default_factory=lambda: [2.0, 10.0, -2.0])


class MarginShare(Model):
    """A margin as a share, with its reason."""

    share: _Margin
    why: Text = "no reason given"


class ResidualShare(Model):
    """Propellant that stays in the tank, as a share of the load."""

    share: Annotated[float, quantity("ratio", least=0, most=0.99, said='"0 %" to "99 %"')]
    why: Text = "no reason given"


class Contingency(Model):
    """Propellant held back, as a velocity change."""

    dv: _Speed
    why: Text = "no reason given"


class MarginsTable(Model):
    """``[margins]``."""

    manoeuvre: MarginShare | None = None
    attitude: MarginShare | None = None
    residual: ResidualShare | None = None
    contingency: Contingency | None = None


class SafetyTable(Model):
    """``[safety]``."""

    separation: _Length = 200.0
    sigmas: Annotated[float, number(above=0, most=10)] = 3.0


class OperationsTable(Model):
    """``[operations]``."""

    burns_per_day: Annotated[int, whole(least=1)] | None = None


class DeployPhase(Model):
    """Release from the carrier."""

    phase: Literal["deploy"]
    to: Name
    over: _Duration
    release_speed: Annotated[float, quantity("speed", above=0, said="above 0")]
    interval: _Duration


class HoldPhase(Model):
    """Keep the slots."""

    phase: Literal["hold"]
    for_: _Duration = Field(alias="for")


class ReshapePhase(Model):
    """Change the formation."""

    phase: Literal["reshape"]
    to: Name
    over: _Duration


class LosePhase(Model):
    """Lose nodes."""

    phase: Literal["lose"]
    nodes: Annotated[list[Name], Field(min_length=1)]
    at: EpochField | None = None


class MissPhase(Model):
    """Miss a burn, or part of it."""

    phase: Literal["miss"]
    nodes: Annotated[list[Name], Field(min_length=1)]
    share: _Share = 1.0
    at: EpochField | None = None


class RegroupPhase(Model):
    """Give members of lost hubs to others."""

    phase: Literal["regroup"]
    over: _Duration


class RetirePhase(Model):
    """Leave for good."""

    phase: Literal["retire"]
    dv: _Speed


PhaseBlock = Annotated[
    DeployPhase | HoldPhase | ReshapePhase | LosePhase | MissPhase | RegroupPhase | RetirePhase,
    Field(discriminator="phase"),
]


class CaseFile(Model):
    """The whole file."""

    schema_: Annotated[int, whole(least=1, most=1)] = Field(alias="schema")
    title: Text | None = None
    epoch: EpochField
    reference: ReferenceTable
    class_: Annotated[dict[Name, ClassTable], Field(alias="class", min_length=1)]
    swarm: Annotated[list[SwarmBlock], Field(min_length=1)]
    formation: Annotated[dict[Name, FormationTable], Field(min_length=1)]
    errors: ErrorsTable = ErrorsTable()
    rates: RatesTable = RatesTable()
    holding: HoldingTable = HoldingTable()
    trim: TrimTable = TrimTable()
    margins: MarginsTable = MarginsTable()
    safety: SafetyTable = SafetyTable()
    operations: OperationsTable = OperationsTable()
    timeline: list[PhaseBlock] = Field(default_factory=list)
