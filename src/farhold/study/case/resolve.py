"""From a case file on disk to the resolved :class:`~farhold.study.case.record.Case`."""

from __future__ import annotations

import hashlib
import os
import re
import tomllib
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from farhold.domain.margins import Margins
from farhold.domain.node_class import NodeClass
from farhold.errors import CaseError, Fault
from farhold.study.case.faults import FaultList, did_you_mean
from farhold.study.case.lines import Lines, index_lines
from farhold.study.case.parts.crossings import check_crossings
from farhold.study.case.parts.nodes import resolve_nodes
from farhold.study.case.parts.phases import resolve_gaps, resolve_timeline
from farhold.study.case.parts.slots import resolve_formations
from farhold.study.case.record import Case, Errors, Holding, Rates, ReferenceSpec, Safety, Trim
from farhold.study.case.schema.case_file import CaseFile, ClassTable, MarginsTable, ReferenceTable
from farhold.study.case.schema.translate import add_schema_faults
from farhold.study.case.sources import Sources

__all__ = ["load"]

_PLACE = re.compile(r"\s*\(at (?:line (\d+), column (\d+)|end of document)\)\s*$")
_AFTER = "Expected newline or end of document after a statement"
_PLAIN_WORDS = {
    "Cannot overwrite a value": "a key is given twice",
    "Invalid statement": "this is neither a key with a value nor a [table]",
    "Invalid value": "this value is not lawful TOML (a text needs quotes)",
    "Expected '=' after a key in a key/value pair": "a key stands without = and a value",
    _AFTER: "a value has more behind it (a text needs quotes)",
}


def load(path: str | os.PathLike[str]) -> Case:
    """Read, check and resolve a case file.

    Parameters
    ----------
    path : the TOML file; the tables it names are looked for in its folder

    Returns
    -------
    Case, in SI units.

    Raises
    ------
    CaseError
        Exit code 2. All faults of the schema and of the references between its parts are raised at once;
        where there are none, all faults of the tables, shapes and counts.
    """
    file = Path(path)
    raw = _read_bytes(file)
    text = _decode(raw, file.name)
    document = _parse(text, file.name)
    lines = _index(text)
    faults = FaultList(file.name, lines)
    check_crossings(document, faults)
    try:
        schema = CaseFile.model_validate(document)
    except ValidationError as error:
        add_schema_faults(error, document, faults)
    faults.raise_if_any()
    return _resolve(schema, file, raw, faults)


def _resolve(schema: CaseFile, file: Path, raw: bytes, faults: FaultList) -> Case:
    sources = Sources(file.parent)
    classes = tuple(_node_class(name, table) for name, table in schema.class_.items())
    nodes = resolve_nodes(schema, classes, sources, faults)
    formations = resolve_formations(schema, classes, nodes, sources, faults)
    gaps_s = resolve_gaps(schema, faults)
    timeline = resolve_timeline(schema, nodes, faults)
    faults.raise_if_any()
    if nodes is None:
        raise CaseError(Fault(file.name, "has no nodes", "one or more"))
    errors = schema.errors
    return Case(
        title=schema.title if schema.title is not None else file.stem,
        path=file,
        folder=file.parent,
        epoch=schema.epoch,
        reference=_reference(schema.reference),
        classes=classes,
        nodes=nodes,
        formations=formations,
        errors=Errors(
            navigation_position_m=errors.navigation_position,
            navigation_velocity_m_s=errors.navigation_velocity,
            measurement_cadence_s=errors.measurement_cadence,
            gaps_s=gaps_s,
            drop_outs=errors.drop_outs,
            unmodelled_acceleration_m_s2=errors.unmodelled_acceleration,
            execution_magnitude=errors.execution_magnitude,
            execution_fixed_m_s=errors.execution_fixed,
            execution_pointing_rad=errors.execution_pointing,
            area_spread=errors.area_spread,
            release_speed_m_s=errors.release_speed,
        ),
        rates=Rates(schema.rates.missed_burns, schema.rates.failures_per_year),
        holding=Holding(schema.holding.policy, schema.holding.box, schema.holding.cadence),
        trim=Trim(tuple(schema.trim.days)),
        margins=_margins(schema.margins),
        safety=Safety(schema.safety.separation, schema.safety.sigmas),
        burns_per_day=schema.operations.burns_per_day,
        timeline=timeline,
        sha256=_digest(raw, sources),
    )


def _read_bytes(file: Path) -> bytes:
    try:
        return file.read_bytes()
    except IsADirectoryError:
        fault = Fault(str(file), "is a folder", "a case file in TOML", "name the .toml file in it")
    except FileNotFoundError:
        near = _near_files(file)
        fault = Fault(str(file), "there is no such file", "a case file in TOML", near or "farhold start makes one")
    except (OSError, ValueError) as error:
        fault = Fault(str(file), f"cannot be read: {getattr(error, 'strerror', None) or error}")
    raise CaseError(fault)


def _near_files(file: Path) -> str:
    try:
        return did_you_mean(file.name, sorted(item.name for item in file.parent.iterdir() if item.is_file()))
    except OSError:
        return ""


def _decode(raw: bytes, name: str) -> str:
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        fault = Fault(f"{name}:{line}", "holds bytes that are not UTF-8 text", "TOML in UTF-8")
    raise CaseError(fault)


def _parse(text: str, name: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        said = str(error)
    except RecursionError:
        said = "lists or tables are nested too deep"
    place = _PLACE.search(said)
    line = int(place.group(1)) if place and place.group(1) else text.count("\n") + 1
    plain = _PLACE.sub("", said)
    twice = re.fullmatch(r"Cannot declare \((.*?),?\) twice", plain)
    if twice:
        plain = f"the table {twice.group(1)} is given twice".replace("', '", ".").replace("'", "")
    raise CaseError(Fault(f"{name}:{line}", f"cannot be read as TOML: {_PLAIN_WORDS.get(plain, plain)}"))


def _index(text: str) -> Lines:
    try:
        return index_lines(text.replace("\r\n", "\n"))
    except (IndexError, ValueError, RecursionError):
        return Lines()


def _node_class(name: str, table: ClassTable) -> NodeClass:
    thruster = table.attitude_thruster
    return NodeClass(
        name=name,
        dry_mass_kg=table.dry_mass,
        propellant_kg=table.propellant,
        isp_s=table.specific_impulse,
        thrust_n=table.thrust,
        impulse_bit_n_s=table.impulse_bit,
        solar_area_m2=table.solar_area,
        solar_coefficient=table.solar_coefficient,
        attitude_m_s_per_year=table.attitude_per_year,
        thrust_efficiency=table.thrust_efficiency,
        sun_cone_rad=table.sun_cone,
        leak_kg_per_year=table.leak_per_year,
        attitude_isp_s=thruster.specific_impulse if thruster else None,
        capacity=table.capacity,
        link_range_m=table.link_range,
    )


def _reference(table: ReferenceTable) -> ReferenceSpec:
    given = {
        "family": table.family,
        "az_m": table.az,
        "ay_m": table.ay,
        "period_s": table.period,
        "amplitude_m": table.amplitude,
        "phase_rad": table.phase,
        "span_s": table.span,
    }
    options = {key: value for key, value in given.items() if value is not None}
    return ReferenceSpec(table.point, table.kind, table.model, table.pressure_area, options)


def _margins(table: MarginsTable) -> Margins:
    values: dict[str, Any] = {}
    for key in ("manoeuvre", "attitude", "residual"):
        margin = getattr(table, key)
        if margin is not None:
            values |= {key: margin.share, f"{key}_why": margin.why}
    if table.contingency is not None:
        values |= {"contingency_m_s": table.contingency.dv, "contingency_why": table.contingency.why}
    return Margins(**values)


def _digest(raw: bytes, sources: Sources) -> str:
    """Digest the bytes of the case and of its tables, each behind its length; no path, no clock."""
    digest = hashlib.sha256()
    for data in (raw, *sources.read.values()):
        digest.update(len(data).to_bytes(8, "big"))
        digest.update(data)
    return digest.hexdigest()
