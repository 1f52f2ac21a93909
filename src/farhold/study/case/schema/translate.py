"""From pydantic's errors to our faults: the one place that knows both."""

from __future__ import annotations

import types
import typing
from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel, Tag, ValidationError
from pydantic.fields import FieldInfo

from farhold.errors import FarholdError
from farhold.study.case.faults import FaultList, did_you_mean
from farhold.study.case.lines import KeyPath
from farhold.study.case.schema.case_file import CaseFile

__all__ = ["add_schema_faults"]

_KINDS = {
    "list_type": "a list in square brackets",
    "model_type": "a table of keys",
    "model_attributes_type": "a table of keys",
    "dict_type": "a table of keys",
    "union_tag_not_found": "a table of keys",
    "string_type": "a text in quotes",
    "int_type": "a whole number",
}
_CURES = {"schema": "write schema = 1", "shape": "give a shape or a file"}


def add_schema_faults(error: ValidationError, document: Mapping[str, Any], faults: FaultList) -> None:
    """Add every error of the schema to `faults`, at the path in `document` that a user wrote."""
    errors = error.errors(include_url=False)
    extra = [_path(item["loc"], document)[0] for item in errors if item["type"] == "extra_forbidden"]
    for item in errors:
        path, missing = _path(item["loc"], document)
        kind, context = item["type"], item.get("ctx", {})
        inner = context.get("error")
        if kind == "missing":
            if not _misspelt(missing, path[:-1], extra):
                faults.add(path, "is missing", hint=_CURES.get(missing, ""))
        elif kind == "extra_forbidden":
            known = _known_keys(item["loc"][:-1])
            faults.add(path, f"unknown key {path[-1]!r}", " ".join(known), did_you_mean(str(path[-1]), known))
        elif isinstance(inner, FarholdError):
            faults.take(path, inner)
        elif kind in ("union_tag_invalid", "union_tag_not_found") and isinstance(item["input"], dict):
            _add_tag_fault(path, item["input"], faults)
        elif kind in ("too_short", "too_long"):
            need = context.get("min_length", context.get("max_length"))
            what = f"has {context.get('actual_length')} entries"
            faults.add(path, what, "1 or more" if kind == "too_short" and need == 1 else f"{need} entries")
        else:
            got = item["input"]
            shown = "a table" if isinstance(got, dict) else "a list" if isinstance(got, list) else f"{got!r}"
            faults.add(path, f"got {shown}", _KINDS.get(kind, item["msg"]))


def _add_tag_fault(path: KeyPath, block: dict[str, Any], faults: FaultList) -> None:
    known = [phase for phase in _phases() if phase]
    if "phase" not in block:
        faults.add((*path, "phase"), "is missing", " ".join(known))
        return
    got = block["phase"]
    faults.add((*path, "phase"), f"got {got!r}", " ".join(known), did_you_mean(str(got), known))


def _phases() -> list[str]:
    field = CaseFile.model_fields["timeline"]
    models = _models(typing.get_args(field.annotation)[0])
    return [str(typing.get_args(model.model_fields["phase"].annotation)[0]) for model in models.values()]


def _path(loc: tuple[int | str, ...], document: Mapping[str, Any]) -> tuple[KeyPath, str]:
    """Drop from `loc` what is not in the document: names of alternatives, and marks of keys.

    A missing or unknown key at the end stays; a missing one is also returned by itself.
    """
    path: KeyPath = ()
    node: Any = document
    for position, part in enumerate(loc):
        inside = (isinstance(node, dict) and part in node) or (
            isinstance(node, list) and isinstance(part, int) and part < len(node)
        )
        if inside:
            node = node[part]
            path = (*path, part)
        elif position == len(loc) - 1 and part != "[key]" and isinstance(node, dict):
            return (*path, part), str(part)
    return path, ""


def _misspelt(missing: str, parent: KeyPath, extra: list[KeyPath]) -> bool:
    """Tell whether an unknown key of the same table stands for the missing one; that one is then said."""
    return any(path[:-1] == parent and did_you_mean(str(path[-1]), [missing]) for path in extra)


def _known_keys(loc: tuple[int | str, ...]) -> list[str]:
    """Keys of the table of the schema at `loc`."""
    here: Any = CaseFile
    for part in loc:
        here = _step(here, part)
    models = _models(here)
    return sorted({field.alias or name for model in models.values() for name, field in model.model_fields.items()})


def _step(here: Any, part: int | str) -> Any:
    """Go from a type of the schema to that of its part, through lists, tables and alternatives."""
    models = _models(here)
    if part in models and len(models) > 1:
        return models[str(part)]
    if len(models) == 1:
        model = next(iter(models.values()))
        for name, field in model.model_fields.items():
            if part == (field.alias or name):
                return _annotation(field)
    origin, given = typing.get_origin(here), typing.get_args(here)
    if origin is list:
        return given[0]
    if origin is dict:
        return given[1]
    if origin in (typing.Annotated, typing.Union, types.UnionType):
        inner = given[:1] if origin is typing.Annotated else given
        return next((found for one in inner if (found := _step(one, part)) is not None), None)
    return None


def _annotation(field: FieldInfo) -> Any:
    return field.annotation


def _models(here: Any) -> dict[str, type[BaseModel]]:
    """Return the tables that a type of the schema stands for, by the name of the alternative."""
    if isinstance(here, type) and issubclass(here, BaseModel):
        return {_phase_of(here): here}
    given = typing.get_args(here)
    if typing.get_origin(here) is typing.Annotated:
        inside = _models(given[0])
        tags = [mark.tag for mark in given[1:] if isinstance(mark, Tag)]
        return {tags[0]: next(iter(inside.values()))} if tags and len(inside) == 1 else inside
    if typing.get_origin(here) in (typing.Union, types.UnionType):
        found: dict[str, type[BaseModel]] = {}
        for one in given:
            found.update(_models(one))
        return found
    return {}


def _phase_of(model: type[BaseModel]) -> str:
    field = model.model_fields.get("phase")
    return (
        str(typing.get_args(field.annotation)[0])
        if field and typing.get_args(field.annotation)
        else model.__name__
    )
