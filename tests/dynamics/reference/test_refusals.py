"""What the kinds of reference refuse, in their words."""

import numpy as np
import pytest

from farhold.dynamics.reference import KINDS, make_reference, options_of
from farhold.errors import CaseError, ConvergenceError, DomainError

REFUSED = {
    "halo-size-twice": (
        "halo",
        {"period_s": 1.5e7},
        CaseError,
        "reference: a halo is sized by one of az and period (allowed: az or period, one of them)",
    ),
    "halo-no-size": (
        "halo",
        {"az_m": None},
        CaseError,
        "reference: a halo is sized by one of az and period (allowed: az or period, one of them)",
    ),
    "halo-family": ("halo", {"family": "east"}, CaseError, "reference.family: got 'east' (allowed: north south)"),
    "halo-point": (
        "halo",
        {"point": "L4"},
        CaseError,
        "reference.kind: got 'halo' at L4 (allowed: halo at L1 L2)",
    ),
    "halo-flat": ("halo", {"az_m": 0.0}, DomainError, "reference.az: got 0.0 m (allowed: above 0 m)"),
    "halo-nan": ("halo", {"az_m": np.nan}, DomainError, "reference.az: got nan m (allowed: above 0 m)"),
    "phase": (
        "halo",
        {"phase_rad": np.inf},
        DomainError,
        "reference.phase: got inf rad (allowed: a finite angle)",
    ),
    "pressure": (
        "halo",
        {"pressure_area_m2_kg": -1.0},
        DomainError,
        "reference.pressure_area: got -1.0 m2/kg (allowed: 0 m2/kg or above)",
    ),
    "lyapunov-point": (
        "lyapunov",
        {"point": "L5"},
        CaseError,
        "reference.kind: got 'lyapunov' at L5 (allowed: lyapunov at L1 L2 L3)",
    ),
    "lissajous-point": (
        "lissajous",
        {"point": "L4"},
        CaseError,
        "reference.kind: got 'lissajous' at L4 (allowed: lissajous at L1 L2 L3)",
    ),
    "lissajous-size": (
        "lissajous",
        {"ay_m": -1.0},
        DomainError,
        "reference.ay: got -1.0 m (allowed: 0 m or more, not both 0)",
    ),
    "lissajous-span": (
        "lissajous",
        {"span_s": 0.0},
        DomainError,
        "reference.span: got 0.0 s (allowed: above 0 s)",
    ),
    "short-point": (
        "short-period",
        {"point": "L1"},
        CaseError,
        "reference.kind: got 'short-period' at L1 (allowed: short-period at L4 L5)",
    ),
    "long-size": (
        "long-period",
        {"amplitude_m": -5.0},
        DomainError,
        "reference.amplitude: got -5.0 m (allowed: above 0 m)",
    ),
    "option": (
        "lyapunov",
        {"az_m": 1.0},
        CaseError,
        "reference.az_m: does not go with kind 'lyapunov' (allowed: ay_m phase_rad)",
    ),
}
BEYOND = {
    "halo-az": (
        "halo",
        {"az_m": 3e9},
        r"reference.az: no halo at L2 reaches 3e\+06 km \(allowed: up to 1.8\d+e\+06 km\)",
    ),
    "halo-long": (
        "halo",
        {"az_m": None, "period_s": 190 * 86400.0},
        r"reference.period: no halo at L2 takes 190 d \(allowed: [\d.]+ to 180.\d+ d\)",
    ),
    "halo-short": (
        "halo",
        {"az_m": None, "period_s": 20 * 86400.0},
        r"reference.period: no halo at L2 takes 20 d",
    ),
    "lyapunov-ay": (
        "lyapunov",
        {"ay_m": 1e11},
        r"reference.ay: no lyapunov orbit at L1 reaches 1e\+08 km \(allowed: up",
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_option_is_refused_in_one_sentence(make_orbit, name):
    kind, options, error, text = REFUSED[name]
    with pytest.raises(error) as caught:
        make_orbit(kind, **options)
    assert str(caught.value) == text


@pytest.mark.parametrize("name", BEYOND)
def test_orbit_that_does_not_exist_is_said_with_what_does(make_orbit, name):
    kind, options, text = BEYOND[name]
    with pytest.raises(ConvergenceError, match=text) as caught:
        make_orbit(kind, **options)
    assert caught.value.exit_code == 5


def test_missing_options_are_said_together():
    with pytest.raises(CaseError) as caught:
        make_reference("lissajous", point="L2", epoch=None, pressure_area_m2_kg=0.0, az_m=1.0)
    due = "(allowed: a reference of kind 'lissajous' needs ay_m az_m span_s)"
    assert str(caught.value).splitlines() == [
        f"reference.ay_m: is missing {due}",
        f"reference.span_s: is missing {due}",
    ]


def test_unknown_kind_is_refused_with_the_known_ones():
    with pytest.raises(CaseError, match=r"reference.kind: got 'circle' \(allowed: equilibrium halo lyapunov"):
        options_of("circle")


@pytest.mark.parametrize("kind", KINDS)
def test_options_of_a_kind_are_those_of_the_case(kind):
    due, free = options_of(kind)
    known = {"family", "az_m", "ay_m", "amplitude_m", "period_s", "phase_rad", "span_s"}
    assert set(due + free) <= known
    assert not set(due) & set(free)
