"""Shapes of formations (a ROOM): one file per shape, one line in :data:`SHAPES`.

A shape is a function of `count` and of parameters whose names end in ``_m`` where they are lengths; a
parameter with a default is optional. A drawn shape takes a random generator first and yields independent
points; :func:`positions` then thins them to the least distance asked. All shapes are centred on the origin
and made about the axis N; :func:`positions` turns N to the axis asked and adds the centre.
"""

from __future__ import annotations

import inspect
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from farhold.errors import DomainError, Fault
from farhold.planning.shapes import ball, disk, gaussian, lattice, line, ring, shell, spiral

__all__ = ["SHAPES", "Parameter", "Shape", "parameters", "positions"]

Positions = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Shape:
    """One choice: what it is in a line, its function, whether that draws at random, the axis by default."""

    label: str
    make: Callable[..., Positions]
    drawn: bool = False
    axis: str = "N"


SHAPES: dict[str, Shape] = {
    "ball": Shape("slots spread evenly through a ball", ball.draw, drawn=True),
    "shell": Shape("slots spread evenly over a sphere", shell.make),
    "ring": Shape("slots at equal steps on a circle", ring.make),
    "disk": Shape("slots spread evenly over a flat disk", disk.make),
    "line": Shape("slots at equal steps on a straight line", line.make, axis="T"),
    "spiral": Shape("slots at equal steps along a flat spiral", spiral.make),
    "lattice": Shape("the lattice points nearest the centre", lattice.make),
    "gaussian": Shape("slots in a cloud denser towards its centre", gaussian.draw, drawn=True),
}

_AXES = {"R": (1.0, 0.0, 0.0), "T": (0.0, 1.0, 0.0), "N": (0.0, 0.0, 1.0)}
_ROUNDS = 400


@dataclass(frozen=True, slots=True)
class Parameter:
    """One parameter: its key in a case, its name in the function, ``length`` ``number`` or ``text``."""

    key: str
    name: str
    kind: str
    required: bool


def parameters(shape: str) -> tuple[Parameter, ...]:
    """Return the parameters that `shape` takes beside count, seed, spacing, axis and centre."""
    found = []
    for name, spec in inspect.signature(SHAPES[shape].make).parameters.items():
        if name in ("rng", "count"):
            continue
        kind = "length" if name.endswith("_m") else "text" if spec.annotation == "str" else "number"
        found.append(Parameter(name.removesuffix("_m"), name, kind, spec.default is spec.empty))
    return tuple(found)


def positions(
    shape: str,
    count: int,
    *,
    spacing_m: float = 0.0,
    seed: int = 0,
    axis: str | Sequence[float] | None = None,
    centre_m: Sequence[float] = (0.0, 0.0, 0.0),
    **given: float | str,
) -> Positions:
    """Place `count` slots in a shape.

    Parameters
    ----------
    shape : a key of :data:`SHAPES`
    spacing_m : least distance between any two slots; what a drawn shape or the lattice aims for, what every
        other shape is checked for
    seed : of the random generator of a drawn shape
    axis : ``"R"``, ``"T"``, ``"N"`` or a direction of three numbers: the normal of a flat shape, the
        direction of a line
    centre_m : (3,) where the shape is centred [m]
    **given : the shape's own parameters, see :func:`parameters`

    Returns
    -------
    (count, 3) positions [m], the same for the same seed.

    Raises
    ------
    DomainError
        A parameter out of its range, or no room for `count` slots at that spacing. Its faults name the key.
    """
    if count < 1:
        raise DomainError(Fault("count", f"got {count}", "1 or more"))
    _check(shape, {**given, "spacing_m": spacing_m})
    chosen = SHAPES[shape]
    if chosen.drawn:
        made = _thinned(shape, count, spacing_m, np.random.default_rng(seed), given)
    else:
        takes = {parameter.name for parameter in parameters(shape)}
        own = {"spacing_m": spacing_m} if "spacing_m" in takes else {}
        made = chosen.make(count, **own, **given)
    if not chosen.drawn:
        _check_spacing(made, spacing_m)
    turned = made @ _turn(chosen.axis if axis is None else axis).T
    return np.ascontiguousarray(turned + np.asarray(centre_m, dtype=float))


def _check(shape: str, given: dict[str, float | str]) -> None:
    required = {p.name for p in parameters(shape) if p.required}
    for name, value in given.items():
        if isinstance(value, str):
            continue
        length = name.endswith("_m")
        may_be_zero = length and name not in required
        if not (value > 0 or (may_be_zero and value == 0)) or not math.isfinite(value):
            got = f"{value / 1e3:g} km" if length else f"{value:g}"
            fault = Fault(name.removesuffix("_m"), f"got {got}", "0 or more" if may_be_zero else "above 0")
            raise DomainError(fault)


def _thinned(
    shape: str, count: int, spacing_m: float, rng: np.random.Generator, given: dict[str, float | str]
) -> Positions:
    """Draw until `count` points keep `spacing_m`; each round drops what is too near to an earlier point."""
    make = SHAPES[shape].make
    if spacing_m == 0:
        return make(rng, count, **given)
    kept: Positions = np.empty((0, 3))
    for _ in range(_ROUNDS):
        batch = make(rng, max(1000, 2 * (count - len(kept))), **given)
        if len(kept):
            distance, _nearest = cKDTree(kept).query(batch, distance_upper_bound=spacing_m)
            batch = batch[np.isinf(distance)]
        near = cKDTree(batch).query_pairs(spacing_m, output_type="ndarray") if len(batch) > 1 else np.empty((0, 2))
        later = np.unique(near[:, 1]).astype(np.int64)
        batch = np.delete(batch, later, axis=0)[: count - len(kept)]
        if len(batch) < 1e-3 * (count - len(kept)):
            break
        kept = np.concatenate([kept, batch])
        if len(kept) == count:
            return kept
    what = f"found room for only {len(kept)} of {count} slots {spacing_m / 1e3:g} km apart"
    raise DomainError(Fault("spacing", what, hint="make the shape larger, or the spacing or the count smaller"))


def _check_spacing(made: Positions, spacing_m: float) -> None:
    if spacing_m == 0 or len(made) < 2:
        return
    distance_m = np.asarray(cKDTree(made).query(made, k=2)[0])
    nearest = float(distance_m[:, 1].min())
    if nearest < spacing_m * (1 - 1e-9):
        what = f"the nearest slots are {nearest / 1e3:.6g} km apart, less than the {spacing_m / 1e3:g} km asked"
        raise DomainError(
            Fault("spacing", what, hint="make the shape larger, or the spacing or the count smaller")
        )


def _turn(axis: str | Sequence[float]) -> Positions:
    """Return a turn (3, 3) that brings N to `axis`, by Rodrigues' formula for two unit vectors."""
    if isinstance(axis, str) and axis not in _AXES:
        raise DomainError(Fault("axis", f"got {axis!r}", "R, T, N or a direction such as [1, 0, 1]"))
    aim = np.asarray(_AXES[axis] if isinstance(axis, str) else axis, dtype=float)
    length = float(np.linalg.norm(aim))
    if aim.shape != (3,) or not length > 0 or not math.isfinite(length):
        raise DomainError(Fault("axis", f"got {axis!r}", "R, T, N or a direction such as [1, 0, 1]"))
    x, y, z = aim / length
    # near -N the formula loses all digits: there turn N to the mirror image (x, -y, -z) and half a turn on
    half = np.diag([1.0, -1.0, -1.0]) if z < 0 else np.eye(3)
    x, y, z = half @ (x, y, z)
    k = 1.0 / (1.0 + z)
    turn = np.array([[1 - k * x * x, -k * x * y, x], [-k * x * y, 1 - k * y * y, y], [-x, -y, z]])
    return np.asarray(half @ turn, dtype=float)
