"""The lissajous reference: an orbit about L1, L2 or L3 that never closes, known over a span."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import Epoch
from farhold.dynamics.circular import SUN_EARTH, ThreeBody
from farhold.dynamics.orbits.analytic import linear_mode
from farhold.dynamics.orbits.orbit import Orbit, above_zero, point_plant, problem_of
from farhold.dynamics.orbits.table import Table, segments_for, settle
from farhold.dynamics.orbits.taylor import Exact, Problem
from farhold.errors import CaseError, ConvergenceError, DomainError, Fault

__all__ = ["make"]

_SHARES = (0.25, 0.5, 0.75, 1.0)
_LEAST_SPAN = 0.1


def make(
    *,
    point: str,
    epoch: Epoch,
    pressure_area_m2_kg: float,
    ay_m: float,
    az_m: float,
    span_s: float,
    phase_rad: float = 0.0,
    system: ThreeBody = SUN_EARTH,
) -> Orbit:
    """Find a Lissajous orbit by the amplitudes of its linear part.

    Parameters
    ----------
    ay_m, az_m : amplitudes along T and N of the linear motion that it stays nearest to [m]; 0 or more, not both 0
    span_s : time from the epoch over which it is made [s]
    phase_rad : how far the in-plane turn is advanced at the epoch; 0 where the linear motion has R least, T of 0
        and N greatest

    Raises
    ------
    CaseError
        A point without such orbits.
    DomainError
        Amplitudes or span out of range.
    ConvergenceError
        Multiple shooting does not close.

    Source: linear motion (Szebehely 1967, chapter 5); multiple shooting by least change, the amplitude grown
    in steps with the two frequencies measured on the step before.
    """
    problem = problem_of(point, system, pressure_area_m2_kg)
    if point not in ("L1", "L2", "L3"):
        raise CaseError(Fault("reference.kind", f"got 'lissajous' at {point}", "lissajous at L1 L2 L3"))
    for name, value in (("ay", ay_m), ("az", az_m)):
        if not (value >= 0.0 and math.isfinite(value)) or ay_m == az_m == 0.0:
            raise DomainError(Fault(f"reference.{name}", f"got {value!r} m", "0 m or more, not both 0"))
    span = above_zero("span", span_s, "s") * system.rate_rad_s
    if not math.isfinite(phase_rad):
        raise DomainError(Fault("reference.phase", f"got {phase_rad!r} rad", "a finite angle"))
    table = _grown(problem, ay_m / system.length_m, az_m / system.length_m, max(span, _LEAST_SPAN), phase_rad)
    return Orbit.along(
        table,
        kind="lissajous",
        epoch=epoch,
        pressure_area_m2_kg=pressure_area_m2_kg,
        system=system,
        options={"ay_m": ay_m, "az_m": az_m, "span_s": span_s},
        phase_rad=phase_rad,
    )


def _grown(problem: Problem, ay: float, az: float, span: float, phase_rad: float) -> Table:
    """Table of the orbit, grown from a quarter of its amplitudes."""
    shift, linear = point_plant(problem)
    rate, shape = linear_mode(linear, -1)
    rates = np.array([rate, math.sqrt(-linear[5, 2])])
    place = np.concatenate([shift, np.zeros(3)])
    slow = rates.copy()
    table: Table | None = None
    for share in _SHARES:

        def guess(times: NDArray[np.float64], share: float = share, rates: NDArray[np.float64] = rates) -> Exact:
            angle = phase_rad + rates[0] * times
            # the mode has T of 1 at angle 0: a quarter turn on, T is 0 and R least
            plane = (shape * np.exp(1j * (angle[:, None] - 0.5 * math.pi))).real * ay
            climb = phase_rad * slow[1] / slow[0] + rates[1] * times
            plane[:, 2] = az * np.cos(climb)
            plane[:, 5] = -az * rates[1] * np.sin(climb)
            nodes: Exact = (place + share * plane).astype(np.longdouble)
            return nodes

        count = segments_for(problem, guess(np.linspace(0.0, span, 60, dtype=np.float64)).astype(float), span)
        times = np.arange(count, dtype=np.float64) * (span / count)
        table = settle(problem, guess(times), span / count, closed=False)
        if share < 1.0:
            # to leading order frequencies shift with the square of the amplitude
            rates = slow + (_measured(table, place, rates, linear) - slow) * ((share + 0.25) / share) ** 2
    assert table is not None
    size = np.linalg.norm(table.motion[:, 0, :3].astype(float) - shift, axis=1).max()
    if size > 2.0 * math.hypot(ay, az):
        raise ConvergenceError(
            Fault(
                "reference",
                f"no lissajous orbit of this size was found at {problem.point}: the nearest is "
                f"{size / math.hypot(ay, az):.2g} times wider",
                hint="ask for smaller ay and az",
            )
        )
    return table


def _measured(
    table: Table, place: NDArray[np.float64], rates: NDArray[np.float64], linear: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Mean frequencies (2,), in the plane and along N, of the orbit in `table`; `rates` where it has none.

    The phase of the part along each linear mode, by the left eigenvectors, grows at the mean frequency.
    """
    times = np.arange(len(table.motion)) * float(table.step)
    if times[-1] < 2.0 * math.pi / rates.min():
        return rates
    nodes = table.motion[:, 0].astype(float) - place
    values, left = np.linalg.eig(linear.T)
    found = rates.copy()
    planar = np.abs(left[2]) + np.abs(left[5]) < 1e-9
    for k, mine in enumerate((planar, ~planar)):
        turning = np.flatnonzero(mine & (values.imag > 1e-9))
        part = nodes @ left[:, turning[np.argmax(values[turning].imag)]]
        if np.abs(part).max() > 1e-12:
            found[k] = np.polyfit(times, np.unwrap(np.angle(part)), 1)[0]
    return found
