"""The only door between text with a unit (or an astropy-like Quantity) and plain SI floats."""

from __future__ import annotations

import difflib
import math
import re
from dataclasses import dataclass

from farhold.constants import AU
from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.errors import CaseError, Fault

__all__ = ["DIMENSIONS", "say_length", "say_mass", "say_speed", "say_time", "si"]


@dataclass(frozen=True, slots=True)
class _Dimension:
    """What a field measures: the words for it, its SI unit, the units to write it in, an example unit."""

    word: str
    si_unit: str
    units: dict[str, float]
    example: str


DIMENSIONS: dict[str, _Dimension] = {
    "mass": _Dimension("a mass", "kg", {"kg": 1.0, "g": 1e-3, "mg": 1e-6, "t": 1e3}, "kg"),
    "length": _Dimension("a length", "m", {"m": 1.0, "km": 1e3, "cm": 1e-2, "mm": 1e-3, "AU": AU.value}, "km"),
    "time": _Dimension("a time", "s", {"s": 1.0, "min": 60.0, "h": 3600.0, "d": DAY_S, "yr": YEAR_S}, "d"),
    "speed": _Dimension("a speed", "m/s", {"m/s": 1.0, "km/s": 1e3, "cm/s": 1e-2, "mm/s": 1e-3}, "m/s"),
    "acceleration": _Dimension("an acceleration", "m/s2", {"m/s2": 1.0, "mm/s2": 1e-3}, "m/s2"),
    "force": _Dimension("a force", "N", {"N": 1.0, "mN": 1e-3, "uN": 1e-6}, "mN"),
    "impulse": _Dimension("an impulse", "N s", {"N s": 1.0, "mN s": 1e-3, "uN s": 1e-6}, "mN s"),
    "area": _Dimension("an area", "m2", {"m2": 1.0, "cm2": 1e-4}, "m2"),
    "area per mass": _Dimension("an area per mass", "m2/kg", {"m2/kg": 1.0, "cm2/g": 0.1}, "m2/kg"),
    "angle": _Dimension("an angle", "rad", {"deg": math.pi / 180.0, "rad": 1.0, "mrad": 1e-3}, "deg"),
    "ratio": _Dimension("a share", "", {"%": 1e-2, "": 1.0}, "%"),
}

_NUMBER = re.compile(r"\s*([+-]?(?:(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?|nan\b|inf\b))\s*(.*?)\s*", re.DOTALL)
_WORDS = {
    "sec": "s",
    "seconds": "s",
    "minutes": "min",
    "hour": "h",
    "hours": "h",
    "day": "d",
    "days": "d",
    "y": "yr",
    "year": "yr",
    "years": "yr",
    "metres": "m",
    "meters": "m",
    "kilometres": "km",
    "kilometers": "km",
    "degrees": "deg",
    "percent": "%",
    "Ns": "N s",
    "mNs": "mN s",
}


def si(value: object, dimension: str, where: str = "value") -> float:
    """Convert `value` to a float in the SI unit of `dimension`.

    Parameters
    ----------
    value : text such as ``"5 km"``, or an object with ``to_value(unit)`` (an astropy Quantity). For the
        dimension ``"ratio"`` also a plain number of size 1 or less (0.05 is 5 %).
    dimension : a key of :data:`DIMENSIONS`
    where : the place named in the message of a fault

    Returns
    -------
    float, finite, in kg, m, s, m/s, m/s2, N, N s, m2, m2/kg, rad or 1. A year is 365.25 d.

    Raises
    ------
    CaseError
        No unit, an unknown unit, a unit of another dimension, no number, or a number that is not finite.
    """
    due = DIMENSIONS[dimension]
    if isinstance(value, str):
        return _from_text(value, due, where)
    if hasattr(value, "to_value"):
        return _from_quantity(value, due, where)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise CaseError(Fault(where, f"got {value!r}", _allowed(due)))
    if not math.isfinite(value):
        raise CaseError(Fault(where, f"got {value!r}, which is not finite", _allowed(due)))
    if dimension == "ratio" and abs(value) <= 1:
        return float(value)
    raise CaseError(Fault(where, f"{value!r} has no unit", _allowed(due), f'write "{value:g} {due.example}"'))


def _from_text(text: str, due: _Dimension, where: str) -> float:
    match = _NUMBER.fullmatch(text)
    if match is None:
        raise CaseError(Fault(where, f"got {text!r}, which does not begin with a number", _allowed(due)))
    number, unit = float(match.group(1)), _plain(match.group(2))
    if not unit and "" not in due.units:
        hint = f'write "{match.group(1)} {due.example}"'
        raise CaseError(Fault(where, f"got {text!r}, which has no unit", _allowed(due), hint))
    if unit not in due.units:
        raise CaseError(_unit_fault(text, unit, due, where))
    result = number * due.units[unit]
    if not unit and abs(number) > 1:
        hint = f'write "{match.group(1)} %" or a fraction of 1'
        raise CaseError(Fault(where, f"got {text!r}, which has no unit", _allowed(due), hint))
    if not math.isfinite(result):
        raise CaseError(Fault(where, f"got {text!r}, which is not finite", _allowed(due)))
    return result


def _from_quantity(value: object, due: _Dimension, where: str) -> float:
    try:
        result = float(value.to_value(due.si_unit))  # type: ignore[attr-defined]
    except (ValueError, TypeError):
        raise CaseError(Fault(where, f"got {str(value)!r}", _allowed(due))) from None
    if not math.isfinite(result):
        raise CaseError(Fault(where, f"got {str(value)!r}, which is not finite", _allowed(due)))
    return result


def _plain(unit: str) -> str:
    for typed, plain in (("²", "2"), ("^", ""), ("**", ""), ("µ", "u"), ("μ", "u"), ("°", "deg"), ("·", " ")):
        unit = unit.replace(typed, plain)
    return re.sub(r"\s*/\s*", "/", re.sub(r"\s+", " ", unit))


def _allowed(due: _Dimension) -> str:
    if "" in due.units:
        return f'{due.word} such as "5 %" or 0.05'
    units = ", ".join(due.units)
    return f'{due.word} in {units}, such as "5 {due.example}"'


def _unit_fault(text: str, unit: str, due: _Dimension, where: str) -> Fault:
    for other in DIMENSIONS.values():
        if unit in other.units:
            return Fault(where, f"got {text!r}, {other.word}", _allowed(due))
    known = list(due.units)
    near = _WORDS.get(unit) or next((name for name in known if name and name.lower() == unit.lower()), None)
    if near is None:
        every = [name for dimension in DIMENSIONS.values() for name in dimension.units if name]
        close = difflib.get_close_matches(unit, [name for name in known if name], 1, 0.4)
        close = close or difflib.get_close_matches(unit, every, 1, 0.6)
        near = close[0] if close else None
    hint = f"did you mean {near!r}?" if near else ""
    return Fault(where, f"got {text!r}, whose unit {unit!r} is not known", _allowed(due), hint)


def _say(value: float, zero: str, scales: tuple[tuple[float, str], ...]) -> str:
    """Write with three significant digits in the first unit that leaves a number of 1 or more."""
    if not math.isfinite(value):
        return "unbounded" if value == math.inf else str(value)
    if value == 0:
        return zero
    size, unit = next((scale for scale in scales if abs(float(f"{value / scale[0]:.3g}")) >= 1), scales[-1])
    rounded = float(f"{value / size:.3g}")
    text = f"{value / size:,.0f}" if abs(rounded) >= 100 else f"{rounded:.3g}"
    return f"{text} {unit}"


def say_length(length_m: float) -> str:
    """Write a length for people: ``1234.5`` [m] is ``"1.23 km"``."""
    return _say(length_m, "0 m", ((1e3, "km"), (1.0, "m"), (1e-2, "cm"), (1e-3, "mm")))


def say_speed(speed_m_s: float) -> str:
    """Write a speed for people: ``0.00123`` [m/s] is ``"1.23 mm/s"``."""
    return _say(speed_m_s, "0 m/s", ((1e3, "km/s"), (1.0, "m/s"), (1e-3, "mm/s")))


def say_mass(mass_kg: float) -> str:
    """Write a mass for people: ``0.3`` [kg] is ``"300 g"``."""
    return _say(mass_kg, "0 kg", ((1e3, "t"), (1.0, "kg"), (1e-3, "g"), (1e-6, "mg")))


def say_time(time_s: float) -> str:
    """Write a time for people: ``2.592e6`` [s] is ``"30 d"``; two years and more are in years of 365.25 d."""
    if abs(time_s) >= 2 * YEAR_S:
        return _say(time_s, "", ((YEAR_S, "yr"),))
    return _say(time_s, "0 s", ((DAY_S, "d"), (3600.0, "h"), (60.0, "min"), (1.0, "s")))
