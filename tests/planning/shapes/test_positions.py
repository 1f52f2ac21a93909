"""Shapes: where slots are, how near, how even."""

from __future__ import annotations

import time
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial import cKDTree

from farhold.errors import DomainError
from farhold.planning.shapes import SHAPES, parameters, positions

SAMPLES: dict[str, dict[str, Any]] = {
    "ball": {"radius_m": 400e3, "spacing_m": 3e3},
    "shell": {"radius_m": 250e3},
    "ring": {"radius_m": 50e3},
    "disk": {"radius_m": 600e3, "inner_radius_m": 60e3},
    "line": {"length_m": 900e3},
    "spiral": {"radius_m": 300e3, "turns": 2.5},
    "lattice": {"spacing_m": 5e3, "packing": "cubic"},
    "gaussian": {"sigma_m": 100e3, "cut": 2.0},
}


def least_distance_m(points: Any) -> float:
    return float(cKDTree(points).query(points, k=2)[0][:, 1].min())


def test_every_shape_has_a_sample_and_a_label() -> None:
    assert set(SAMPLES) == set(SHAPES)
    assert all(shape.label for shape in SHAPES.values())


@pytest.mark.parametrize("shape", SHAPES)
def test_shape_gives_the_count_asked_the_same_each_time(shape: str) -> None:
    first = positions(shape, 137, seed=4, **SAMPLES[shape])
    assert first.shape == (137, 3)
    assert np.isfinite(first).all()
    assert least_distance_m(first) > 0
    np.testing.assert_array_equal(first, positions(shape, 137, seed=4, **SAMPLES[shape]))


@pytest.mark.parametrize("shape", SHAPES)
def test_shape_of_one_slot_is_lawful(shape: str) -> None:
    assert positions(shape, 1, **SAMPLES[shape]).shape == (1, 3)


@pytest.mark.parametrize("shape", SHAPES)
def test_centre_moves_a_shape_as_a_whole(shape: str) -> None:
    moved = positions(shape, 40, centre_m=(1e6, -2e6, 3e6), **SAMPLES[shape])
    np.testing.assert_allclose(moved - [1e6, -2e6, 3e6], positions(shape, 40, **SAMPLES[shape]), atol=1e-6)


@given(
    st.tuples(*[st.floats(-1, 1)] * 3).filter(lambda v: np.linalg.norm(v) > 1e-3),
    st.sampled_from(list(SHAPES)),
)
@settings(max_examples=40)
def test_axis_turns_a_shape_without_deforming_it(axis: tuple[float, float, float], shape: str) -> None:
    straight = positions(shape, 12, axis="N", **SAMPLES[shape])
    turned = positions(shape, 12, axis=axis, **SAMPLES[shape])
    np.testing.assert_allclose(turned @ turned.T, straight @ straight.T, rtol=1e-9, atol=1e-2)
    unit = np.asarray(axis) / np.linalg.norm(axis)
    np.testing.assert_allclose(turned @ unit, straight[:, 2], atol=1e-3)


@pytest.mark.parametrize(("axis", "flat"), [("R", 0), ("T", 1), ("N", 2), ([0, 0, -2], 2)])
def test_ring_lies_across_its_axis(axis: Any, flat: int) -> None:
    ring = positions("ring", 30, radius_m=5e3, axis=axis)
    np.testing.assert_allclose(ring[:, flat], 0, atol=1e-9)
    np.testing.assert_allclose(np.linalg.norm(ring, axis=1), 5e3, rtol=1e-12)


def test_line_runs_along_t_by_default_from_end_to_end() -> None:
    line = positions("line", 11, length_m=1000.0)
    np.testing.assert_allclose(line[:, 1], np.linspace(-500, 500, 11), atol=1e-9)
    np.testing.assert_allclose(line[:, [0, 2]], 0, atol=1e-9)


def test_ball_keeps_its_spacing_and_fills_its_volume_evenly() -> None:
    ball = positions("ball", 5000, radius_m=400e3, spacing_m=15e3, seed=1)
    assert least_distance_m(ball) >= 15e3
    distance = np.linalg.norm(ball, axis=1)
    assert distance.max() <= 400e3
    # mean of r/R over a ball is 3/4; 5 standard errors of 5000 draws (sigma of r/R is 0.194)
    assert distance.mean() / 400e3 == pytest.approx(0.75, abs=5 * 0.194 / np.sqrt(5000))


def test_ball_of_100000_slots_takes_seconds() -> None:
    began = time.perf_counter()
    ball = positions("ball", 100_000, radius_m=1000e3, spacing_m=8e3, seed=1)
    assert time.perf_counter() - began < 20
    assert least_distance_m(ball) >= 8e3


def test_shell_covers_the_sphere_evenly() -> None:
    shell = positions("shell", 1000, radius_m=250e3) / 250e3
    np.testing.assert_allclose(np.linalg.norm(shell, axis=1), 1, rtol=1e-12)
    # the second moment of an even sphere is a third of the unit matrix
    np.testing.assert_allclose(shell.T @ shell / 1000, np.eye(3) / 3, atol=2e-3)
    # equal circles on a sphere are at most sqrt(8 pi/(sqrt(3) n)) apart (Fejes Toth); the lattice nears it
    assert 0.7 < least_distance_m(shell) / np.sqrt(8 * np.pi / (np.sqrt(3) * 1000)) < 1


def test_disk_covers_its_area_evenly() -> None:
    disk = positions("disk", 4000, radius_m=600e3, inner_radius_m=60e3)
    distance = np.linalg.norm(disk, axis=1)
    assert distance.min() > 60e3
    assert distance.max() < 600e3
    assert np.mean(distance**2) == pytest.approx((600e3**2 + 60e3**2) / 2, rel=1e-6)


def test_spiral_steps_are_equal_along_the_curve() -> None:
    spiral = positions("spiral", 2001, radius_m=300e3, turns=3.0)
    step = np.linalg.norm(np.diff(spiral, axis=0), axis=1)
    assert np.linalg.norm(spiral[0]) == pytest.approx(0, abs=1e-6)
    assert np.linalg.norm(spiral[-1]) == pytest.approx(300e3, rel=1e-9)
    # chords of a fine walk equal its arcs but at the tight start
    np.testing.assert_allclose(step[50:], step[50:].mean(), rtol=2e-3)


@pytest.mark.parametrize(("packing", "neighbours"), [("cubic", 6), ("hexagonal", 12)])
def test_lattice_points_have_the_neighbours_of_their_packing(packing: str, neighbours: int) -> None:
    lattice = positions("lattice", 500, spacing_m=5e3, packing=packing)
    assert least_distance_m(lattice) == pytest.approx(5e3, rel=1e-12)
    near = np.linalg.norm(lattice, axis=1) < 5.001e3
    assert np.count_nonzero(near) == neighbours + 1


@pytest.mark.parametrize("packing", ["cubic", "hexagonal"])
@pytest.mark.parametrize("count", [1, 2, 7, 13, 100, 1001])
def test_lattice_leaves_no_nearer_point_out(packing: str, count: int) -> None:
    few = positions("lattice", count, spacing_m=1.0, packing=packing)
    many = positions("lattice", 4 * count + 50, spacing_m=1.0, packing=packing)
    np.testing.assert_allclose(few, many[:count])


def test_gaussian_is_cut_and_has_its_sigma() -> None:
    cloud = positions("gaussian", 20_000, sigma_m=100e3, cut=3.0, seed=2)
    assert np.linalg.norm(cloud, axis=1).max() <= 300e3
    # mean square of a normal vector cut at 3 sigma: 3 sigma^2 P5(9)/P3(9), chi-square distributions
    from scipy.stats import chi2

    expected = 3 * chi2.cdf(9, 5) / chi2.cdf(9, 3)
    assert np.mean(np.sum((cloud / 100e3) ** 2, axis=1)) == pytest.approx(expected, rel=0.03)


@pytest.mark.parametrize(
    ("shape", "count", "given", "text"),
    [
        ("ball", 0, {"radius_m": 1e3}, "count: got 0 (allowed: 1 or more)"),
        ("ball", 5, {"radius_m": 0.0}, "radius: got 0 km (allowed: above 0)"),
        ("ball", 5, {"radius_m": float("nan")}, "radius: got nan km (allowed: above 0)"),
        ("ball", 5, {"radius_m": 1e3, "spacing_m": -1.0}, "spacing: got -0.001 km (allowed: 0 or more)"),
        (
            "disk",
            5,
            {"radius_m": 1e3, "inner_radius_m": 2e3},
            "inner_radius: got 2 km with a radius of 1 km (allowed: less than the radius)",
        ),
        (
            "ring",
            6,
            {"radius_m": 1e3, "spacing_m": 2e3},
            "spacing: the nearest slots are 1 km apart, less than the 2 km asked"
            " (make the shape larger, or the spacing or the count smaller)",
        ),
        ("lattice", 6, {"spacing_m": 0.0}, "spacing: got 0 km (allowed: above 0)"),
        (
            "lattice",
            6,
            {"spacing_m": 1.0, "packing": "round"},
            "packing: got 'round' (allowed: cubic or hexagonal)",
        ),
        (
            "ring",
            6,
            {"radius_m": 1.0, "axis": "Q"},
            "axis: got 'Q' (allowed: R, T, N or a direction such as [1, 0, 1])",
        ),
    ],
)
def test_positions_refuse_in_one_sentence(shape: str, count: int, given: dict[str, Any], text: str) -> None:
    with pytest.raises(DomainError) as caught:
        positions(shape, count, **given)
    assert str(caught.value) == text


def test_ball_without_room_says_how_many_fit() -> None:
    with pytest.raises(DomainError, match=r"spacing: found room for only \d+ of 100 slots 1 km apart"):
        positions("ball", 100, radius_m=1e3, spacing_m=1e3)


@pytest.mark.parametrize(
    ("shape", "keys"),
    [
        ("ball", {"radius": True}),
        ("gaussian", {"sigma": True, "cut": False}),
        ("spiral", {"radius": True, "inner_radius": False, "turns": False}),
        ("lattice", {"spacing": True, "packing": False}),
    ],
)
def test_parameters_follow_the_function(shape: str, keys: dict[str, bool]) -> None:
    assert {p.key: p.required for p in parameters(shape)} == keys
