"""Text and quantities to SI floats and back to words."""

from __future__ import annotations

import math

import astropy.units as u
import pytest
from hypothesis import given
from hypothesis import strategies as st

from farhold.errors import CaseError
from farhold.units import DIMENSIONS, say_length, say_mass, say_speed, say_time, si


def fault_text(value: object, dimension: str) -> str:
    with pytest.raises(CaseError) as caught:
        si(value, dimension, "x")
    assert caught.value.exit_code == 2
    return str(caught.value)


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("5 km", "length", 5000.0),
        ("5km", "length", 5000.0),
        ("-1.5e-3 m", "length", -0.0015),
        ("1 AU", "length", 149597870700.0),  # IAU 2012 Resolution B2
        ("1 yr", "time", 365.25 * 86400),
        ("30 d", "time", 30 * 86400.0),
        ("0.02 mm/s", "speed", 2e-5),
        ("1 cm / s", "speed", 1e-2),
        ("1e-10 m/s2", "acceleration", 1e-10),
        ("1e-10 m/s²", "acceleration", 1e-10),
        ("20 mN", "force", 0.020),
        ("20 µN", "force", 20e-6),
        ("0.5 mN s", "impulse", 5e-4),
        ("0.5  mN  s", "impulse", 5e-4),
        ("600 cm2", "area", 0.06),
        ("0.026 m2/kg", "area per mass", 0.026),
        ("180 deg", "angle", math.pi),
        ("5 %", "ratio", 0.05),
        ("0.05", "ratio", 0.05),
        (0.05, "ratio", 0.05),
        (1, "ratio", 1.0),
        ("1 g", "mass", 1e-3),
    ],
)
def test_si_reads_text_with_its_unit(text: object, dimension: str, value: float) -> None:
    assert si(text, dimension) == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize(
    ("value", "dimension", "text"),
    [
        (
            5,
            "length",
            'x: 5 has no unit (allowed: a length in m, km, cm, mm, AU, such as "5 km"; write "5 km")',
        ),
        (
            "5",
            "length",
            "x: got '5', which has no unit"
            ' (allowed: a length in m, km, cm, mm, AU, such as "5 km"; write "5 km")',
        ),
        (
            "5 kg",
            "length",
            "x: got '5 kg', a mass (allowed: a length in m, km, cm, mm, AU, such as \"5 km\")",
        ),
        (
            "5 kn",
            "length",
            "x: got '5 kn', whose unit 'kn' is not known"
            " (allowed: a length in m, km, cm, mm, AU, such as \"5 km\"; did you mean 'km'?)",
        ),
        (
            "5 KM",
            "length",
            "x: got '5 KM', whose unit 'KM' is not known"
            " (allowed: a length in m, km, cm, mm, AU, such as \"5 km\"; did you mean 'km'?)",
        ),
        (
            "30 days",
            "time",
            "x: got '30 days', whose unit 'days' is not known"
            " (allowed: a time in s, min, h, d, yr, such as \"5 d\"; did you mean 'd'?)",
        ),
        (5, "ratio", 'x: 5 has no unit (allowed: a share such as "5 %" or 0.05; write "5 %")'),
        (
            "five km",
            "length",
            "x: got 'five km', which does not begin with a number"
            ' (allowed: a length in m, km, cm, mm, AU, such as "5 km")',
        ),
        (
            "nan km",
            "length",
            "x: got 'nan km', which is not finite (allowed: a length in m, km, cm, mm, AU, such as \"5 km\")",
        ),
        (
            "1e999 km",
            "length",
            "x: got '1e999 km', which is not finite (allowed: a length in m, km, cm, mm, AU, such as \"5 km\")",
        ),
        (
            math.nan,
            "ratio",
            'x: got nan, which is not finite (allowed: a share such as "5 %" or 0.05)',
        ),
        (True, "ratio", 'x: got True (allowed: a share such as "5 %" or 0.05)'),
        (None, "mass", 'x: got None (allowed: a mass in kg, g, mg, t, such as "5 kg")'),
    ],
)
def test_si_refuses_in_one_sentence(value: object, dimension: str, text: str) -> None:
    assert fault_text(value, dimension) == text


def test_si_takes_a_quantity_by_its_own_conversion() -> None:
    assert si(5.0 * u.km, "length") == 5000.0
    assert si(3.0 * u.percent, "ratio") == pytest.approx(0.03)


@pytest.mark.parametrize("value", [5 * u.kg, math.nan * u.m, [1, 2] * u.m])
def test_si_refuses_a_quantity_that_is_no_finite_length(value: object) -> None:
    assert "a length in m, km" in fault_text(value, "length")


_UNITS = [(name, unit) for name, dimension in DIMENSIONS.items() for unit in dimension.units if unit]


@given(st.sampled_from(_UNITS), st.floats(-1e9, 1e9))
def test_si_of_a_written_number_is_the_number_times_its_unit(named: tuple[str, str], number: float) -> None:
    dimension, unit = named
    expected = number * si(f"1 {unit}", dimension)
    assert si(f"{number!r} {unit}", dimension) == pytest.approx(expected, rel=1e-15)


@pytest.mark.parametrize(
    "unit", [unit for unit, _ in [(unit, 0) for _, unit in _UNITS] if unit not in ("%", "yr")]
)
def test_units_agree_with_astropy(unit: str) -> None:
    dimension = next(name for name, known in _UNITS if known == unit)
    assert si(f"1 {unit}", dimension) == pytest.approx(
        (1 * u.Unit(unit)).to_value(DIMENSIONS[dimension].si_unit), rel=1e-15
    )


@pytest.mark.parametrize(
    ("said", "text"),
    [
        (say_length(1234.5), "1.23 km"),
        (say_length(999.9), "1 km"),
        (say_length(123456789.0), "123,457 km"),
        (say_length(0.0), "0 m"),
        (say_length(-25.0), "-25 m"),
        (say_speed(0.00123), "1.23 mm/s"),
        (say_mass(0.3), "300 g"),
        (say_time(30 * 86400.0), "30 d"),
        (say_time(5 * 365.25 * 86400), "5 yr"),
        (say_time(math.inf), "unbounded"),
    ],
)
def test_say_writes_three_digits_in_a_fitting_unit(said: str, text: str) -> None:
    assert said == text


@given(st.floats(1e-3, 1e12))
def test_say_length_reads_back_within_its_digits(length_m: float) -> None:
    assert si(say_length(length_m).replace(",", ""), "length") == pytest.approx(length_m, rel=6e-3)
