"""Kinds of fields of the schema: quantities, choices, names, epochs, each with one clear refusal."""

from __future__ import annotations

import datetime as dt
import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Annotated

from pydantic import BaseModel, BeforeValidator, ConfigDict

from farhold.domain.epoch import Epoch
from farhold.errors import CaseError, Fault
from farhold.study.case.faults import did_you_mean
from farhold.units import si

__all__ = [
    "NAME_FORM",
    "NAME_RULE",
    "EpochField",
    "Model",
    "Name",
    "Text",
    "choice",
    "number",
    "quantity",
    "whole",
]

NAME_FORM = re.compile(r"[A-Za-z0-9][A-Za-z0-9_.-]{0,31}")
NAME_RULE = "up to 32 of A-Z a-z 0-9 _ . -, beginning with a letter or digit"


class Model(BaseModel):
    """Base of every table of the schema: unknown keys are refused, the result is frozen."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, arbitrary_types_allowed=True)


@dataclass(frozen=True, slots=True)
class _Range:
    """A range of numbers with its words; `above` is exclusive, `least` and `most` inclusive."""

    above: float | None = None
    least: float | None = None
    most: float | None = None
    said: str = ""

    def check(self, number: float, given: object) -> None:
        low = (self.above is None or number > self.above) and (self.least is None or number >= self.least)
        if low and (self.most is None or number <= self.most) and math.isfinite(number):
            return
        raise CaseError(Fault("", f"got {given!r}", self.said or self._words()))

    def _words(self) -> str:
        words = [f"above {self.above:g}"] if self.above is not None else []
        words += [f"{self.least:g} or more"] if self.least is not None else []
        if self.least is not None and self.most is not None:
            return f"{self.least:g} to {self.most:g}"
        words += [f"up to {self.most:g}"] if self.most is not None else []
        return ", ".join(words) or "a finite number"


def quantity(
    dimension: str,
    *,
    above: float | None = None,
    least: float | None = None,
    most: float | None = None,
    said: str = "",
) -> BeforeValidator:
    """Make the validator of a text with a unit; bounds are in SI, `said` words them for people."""
    limits = _Range(above, least, most, said)

    def read(value: object) -> float:
        number = si(value, dimension, "")
        limits.check(number, value)
        return number

    return BeforeValidator(read)


def number(
    *, above: float | None = None, least: float | None = None, most: float | None = None
) -> BeforeValidator:
    """Make the validator of a plain number."""
    limits = _Range(above, least, most)

    def read(value: object) -> float:
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise CaseError(Fault("", f"got {value!r}", f"a plain number, {limits._words()}"))
        limits.check(float(value), value)
        return float(value)

    return BeforeValidator(read)


def whole(*, least: int, most: int = 10**9) -> BeforeValidator:
    """Make the validator of a whole number."""

    def read(value: object) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= most:
            allowed = f"{least}" if least == most else f"a whole number, {least} to {most}"
            raise CaseError(Fault("", f"got {value!r}", allowed))
        return value

    return BeforeValidator(read)


def choice(*known: str) -> BeforeValidator:
    """Make the validator of one of a few words."""

    def read(value: object) -> str:
        if not isinstance(value, str) or value not in known:
            raise CaseError(Fault("", f"got {value!r}", " ".join(known), did_you_mean(str(value), known)))
        return value

    return BeforeValidator(read)


def _name(value: object) -> str:
    if not isinstance(value, str) or NAME_FORM.fullmatch(value) is None:
        raise CaseError(Fault("", f"{value!r} is not a lawful name", NAME_RULE))
    return value


def _text(value: object) -> str:
    if not isinstance(value, str):
        raise CaseError(Fault("", f"got {value!r}", "a text in quotes"))
    return value


def _epoch(value: object) -> Epoch:
    if isinstance(value, dt.datetime | dt.date):
        value = value.isoformat()
    if not isinstance(value, str):
        raise CaseError(Fault("", f"got {value!r}", "an epoch in TDB, such as 2035-03-20T00:00:00"))
    return Epoch.from_iso(value, "")


_read_epoch: Callable[[object], Epoch] = _epoch

Name = Annotated[str, BeforeValidator(_name)]
Text = Annotated[str, BeforeValidator(_text)]
EpochField = Annotated[Epoch, BeforeValidator(_read_epoch)]
