"""Schema of a ``slots`` block: a file, or one of the shapes with the keys that shape takes."""

from __future__ import annotations

from typing import Annotated, Any, cast

from pydantic import BeforeValidator, ConfigDict, Discriminator, Field, Tag, create_model

from farhold.errors import CaseError, Fault
from farhold.planning.shapes import SHAPES, Parameter, parameters
from farhold.study.case.schema.fields import Model, Name, Text, choice, number, quantity, whole

__all__ = ["BY_FILE", "BY_NOTHING", "ListedSlots", "ShapedSlots", "SlotsBlock", "slots_tag"]

BY_FILE = "listed slots"
BY_NOTHING = "slots of no shape"

_Coordinate = Annotated[float, quantity("length")]
_LENGTH = Annotated[float, quantity("length", least=0, said="0 or more")]


def _axis(value: object) -> object:
    if value in ("R", "T", "N"):
        return value
    plain = isinstance(value, list) and len(value) == 3
    if plain and all(isinstance(v, int | float) and not isinstance(v, bool) for v in cast("list[Any]", value)):
        return tuple(float(v) for v in cast("list[float]", value))
    raise CaseError(Fault("", f"got {value!r}", "R, T, N or a direction such as [1, 0, 1]"))


class ListedSlots(Model):
    """Slots listed in a file."""

    file: Text


class ShapedSlots(Model):
    """Slots made by a shape; the keys below go with every shape."""

    class_: Name = Field(alias="class")
    shape: Annotated[str, choice(*SHAPES)]
    count: Annotated[int, whole(least=1, most=1_000_000)]
    spacing: _LENGTH = 0.0
    seed: Annotated[int, whole(least=0)] = 0
    axis: Annotated[str | tuple[float, float, float], BeforeValidator(_axis)] | None = None
    centre: Annotated[list[_Coordinate], Field(min_length=3, max_length=3)] = Field(
        default_factory=lambda: [0.0, 0.0, 0.0]
    )

    def own(self) -> dict[str, Any]:
        """Return the shape's own parameters that the case gives, under the names of its function."""
        return {
            p.name: getattr(self, p.key)
            for p in parameters(self.shape)
            if p.key != "spacing" and p.key in self.model_fields_set
        }


class _Shapeless(ShapedSlots):
    """Stands for a block without a known shape, so that the keys of every shape are still checked."""

    model_config = ConfigDict(extra="ignore")


def _field(parameter: Parameter) -> tuple[Any, Any]:
    kinds: dict[str, Any] = {
        "length": _LENGTH,
        "number": Annotated[float, number(above=0)],
        "text": Text,
    }
    kind = kinds[parameter.kind]
    return (kind, ...) if parameter.required else (kind | None, None)


def _model(shape: str) -> type[ShapedSlots]:
    fields: dict[str, Any] = {p.key: _field(p) for p in parameters(shape)}
    return cast("type[ShapedSlots]", create_model(f"{shape.title()}Slots", __base__=ShapedSlots, **fields))


MODELS: dict[str, type[Model]] = {
    **{f"shape {shape}": _model(shape) for shape in SHAPES},
    BY_FILE: ListedSlots,
    BY_NOTHING: _Shapeless,
}


def slots_tag(block: Any) -> str:
    """Say which model a block is read by."""
    if not isinstance(block, dict):
        return BY_NOTHING
    if "file" in block:
        return BY_FILE
    shape = block.get("shape")
    return f"shape {shape}" if isinstance(shape, str) and shape in SHAPES else BY_NOTHING


def _union() -> Any:
    choices: Any = None
    for tag, model in MODELS.items():
        one: Any = Annotated.__class_getitem__((model, Tag(tag)))  # type: ignore[attr-defined]
        choices = one if choices is None else choices | one
    return Annotated[choices, Discriminator(slots_tag)]


SlotsBlock = _union()
