"""The reference along a table: an orbit, periodic or not, about a libration point of the circular model."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import Epoch
from farhold.dynamics.attraction import difference_field, plant, pressure_push
from farhold.dynamics.circular import ThreeBody, libration_point, lightness
from farhold.dynamics.frames import axes_angle_rad, barycentre_longitude_rad, rotating_to_icrf
from farhold.dynamics.orbits.stability import largest_multiplier
from farhold.dynamics.orbits.table import Table
from farhold.dynamics.orbits.taylor import Exact, Problem
from farhold.dynamics.trajectory import ArcMotion, Primaries
from farhold.errors import DomainError, Fault

__all__ = ["Orbit", "above_zero", "point_plant", "problem_of"]


def above_zero(name: str, value: float, unit: str) -> float:
    """Return `value` where it is finite and above 0; DomainError names "reference.`name`" otherwise."""
    if not (value > 0.0 and math.isfinite(value)):
        raise DomainError(Fault(f"reference.{name}", f"got {value!r} {unit}", f"above 0 {unit}"))
    return float(value)


def problem_of(point: str, system: ThreeBody, pressure_area_m2_kg: float) -> Problem:
    """Problem of a reference at `point` that carries C_R A/m of `pressure_area_m2_kg`.

    Raises
    ------
    DomainError
        A pressure area that is negative or not finite.
    """
    if not (pressure_area_m2_kg >= 0.0 and math.isfinite(pressure_area_m2_kg)):
        raise DomainError(
            Fault("reference.pressure_area", f"got {pressure_area_m2_kg!r} m2/kg", "0 m2/kg or above")
        )
    return Problem(point, system.mu, lightness(pressure_area_m2_kg))


def point_plant(problem: Problem) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Displaced point (3,) about the geometric one, and the linear motion (6, 6) about it, nondimensional."""
    place = libration_point(problem.point, problem.mu, problem.beta)
    shift = problem.from_synodic(np.concatenate([place, np.zeros(3)]))[:3]
    sun, earth = problem.offsets.astype(float) + shift
    pull = problem.strengths.astype(float)
    return shift, plant((sun, earth), (float(pull[0]), float(pull[1])), 1.0)


@dataclass(frozen=True, slots=True, eq=False)
class Orbit:
    """A tabulated reference; see :class:`farhold.dynamics.trajectory.Reference` for the methods.

    A closed table repeats for ever, both ways; an open one is known from time zero to its end.

    Attributes
    ----------
    point, kind : "L1" to "L5"; kind of reference
    epoch : Epoch of time zero;  pressure_area_m2_kg : C_R A/m of the reference [m2/kg]
    system : the three-body problem;  table : the trajectory
    options : what was asked for, in SI, for the provenance
    phase : time in the table at the epoch, nondimensional
    longitude_rad : ecliptic longitude of the Earth-Moon barycentre at `epoch`
    multiplier : largest multiplier over one period, None where there is none
    own_rate, own_growth : fastest oscillation and growth about the displaced point, nondimensional
    """

    point: str
    kind: str
    epoch: Epoch
    pressure_area_m2_kg: float
    system: ThreeBody
    table: Table
    options: dict[str, float | str]
    phase: np.longdouble
    longitude_rad: float
    multiplier: float | None
    own_rate: float
    own_growth: float
    model: str = "circular"
    autonomous: bool = False

    @classmethod
    def along(
        cls,
        table: Table,
        *,
        kind: str,
        epoch: Epoch,
        pressure_area_m2_kg: float,
        system: ThreeBody,
        options: dict[str, float | str],
        phase_rad: float = 0.0,
    ) -> Orbit:
        """Make the reference along `table`, which a closed one enters at `phase_rad` of its period in time.

        Raises
        ------
        DomainError
            A phase that is not finite.
        """
        if not math.isfinite(phase_rad):
            raise DomainError(Fault("reference.phase", f"got {phase_rad!r} rad", "a finite angle"))
        values = np.linalg.eigvals(point_plant(table.problem)[1])
        turn = np.longdouble(phase_rad) / (2 * np.longdouble(math.pi)) if table.closed else np.longdouble(0)
        return cls(
            table.problem.point,
            kind,
            epoch,
            pressure_area_m2_kg,
            system,
            table,
            {**options, "phase_rad": phase_rad},
            (turn - np.floor(turn)) * table.length,
            barycentre_longitude_rad(epoch),
            largest_multiplier(table.monodromy()) if table.closed else None,
            float(np.abs(values.imag).max()),
            float(values.real.max()),
        )

    @property
    def rate_rad_s(self) -> float:
        """Rate of the rotating axes about N [rad/s]."""
        return self.system.rate_rad_s

    @property
    def gm_m3_s2(self) -> tuple[float, float, float]:
        """GM of the Sun less the reference's pressure, of the Sun bare, of Earth and Moon [m3/s2]."""
        bare = self.system.gm1_m3_s2
        return bare * (1.0 - self.table.problem.beta), bare, self.system.gm2_m3_s2

    @property
    def period_s(self) -> float | None:
        """Period of a closed orbit, None of an open one [s]."""
        return float(self.table.length / self.rate_rad_s) if self.table.closed else None

    @property
    def span_s(self) -> tuple[float, float] | None:
        """First and last time of an open orbit [s]; None for a closed one."""
        return None if self.table.closed else (0.0, float(self.options["span_s"]))

    @property
    def stability_index(self) -> float | None:
        """(|l| + 1/|l|) / 2 of the largest multiplier l over one period, 1 where stable; None if open."""
        return None if self.multiplier is None else 0.5 * (self.multiplier + 1.0 / self.multiplier)

    @property
    def provenance(self) -> dict[str, Any]:
        """What the orbit was made from; the initial state is in R, T, N about the geometric point."""
        problem = self.table.problem
        start = self.table.states(np.array([self.phase]))[0]
        return {
            "kind": self.kind,
            "point": self.point,
            "options": dict(self.options),
            "mu": problem.mu,
            "beta": problem.beta,
            "initial_state": [np.format_float_scientific(x, precision=20) for x in start],
            "period" if self.table.closed else "span": np.format_float_scientific(self.table.length, precision=20),
            "closure": self.table.gap,
            "segments": len(self.table.motion),
            "iterations": self.table.rounds,
        }

    def motion(self, times_s: ArrayLike) -> NDArray[np.float64]:
        """States (k, 6) of the orbit about the geometric libration point, R, T, N [m], [m/s]."""
        states: NDArray[np.float64] = (self.table.states(self._times(times_s)) * self.system.scale).astype(float)
        return states

    def primaries_at(self, times_s: ArrayLike) -> Primaries:
        """Vectors (k, 3), (k, 3) from Sun and from Earth-Moon barycentre to the orbit, R, T, N [m]."""
        place = self.table.states(self._times(times_s))[:, :3]
        sun, earth = ((place + offset) * self.system.length_m for offset in self.table.problem.offsets)
        return sun.astype(float), earth.astype(float)

    def primaries_m(self, t_s: float = 0.0) -> Primaries:
        """Vectors (3,), (3,) as `primaries_at` gives them, at one time [m]."""
        sun, earth = self.primaries_at([t_s])
        return sun[0], earth[0]

    def transition(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """State-transition matrix (6, 6) of deviations, rotating axes, SI."""
        phi: NDArray[np.float64] = self._flow(from_s, [to_s])[0][0]
        return phi

    def pressure_response(self, from_s: float, to_s: float) -> NDArray[np.float64]:
        """Deviation (6,) at `to_s` caused by a unit of beta beyond the reference's since `from_s`, SI."""
        response: NDArray[np.float64] = self._flow(from_s, [to_s])[1][0]
        return response

    def arc_motion(self, from_s: float, taus_s: ArrayLike) -> ArcMotion:
        """Primaries (k, 3), (k, 3), transitions (k, 6, 6), pressure responses (k, 6) after `taus_s`, SI."""
        when = np.longdouble(from_s) + np.atleast_1d(np.asarray(taus_s, dtype=float))
        return (*self.primaries_at(when), *self._flow(from_s, when))

    def field(self, position_m: ArrayLike, rule: str, t_s: float = 0.0) -> NDArray[np.float64]:
        """Acceleration (n, 3) felt at places (n, 3) that are kept under `rule` about the orbit at `t_s` [m/s2].

        Exact difference of attraction, plus the centrifugal part for `rotating` slots; zero for `natural`.
        """
        gm = self.gm_m3_s2
        return difference_field(position_m, rule, self.primaries_m(t_s), (gm[0], gm[2]), self.rate_rad_s)

    def pressure_field(self, position_m: ArrayLike, t_s: float = 0.0) -> NDArray[np.float64]:
        """Acceleration (n, 3) per unit of beta at places (n, 3), away from the Sun [m/s2]."""
        return pressure_push(position_m, self.primaries_m(t_s)[0], self.gm_m3_s2[1])

    def axes_to_icrf(self, t_s: float) -> NDArray[np.float64]:
        """Matrix (3, 3) from rotating axes to the ICRF at `t_s`."""
        return rotating_to_icrf(self.longitude_rad + self.rate_rad_s * t_s, axes_angle_rad(self.point))

    def fastest_rate_1_s(self) -> float:
        """Fastest oscillation rate of deviations, that about the displaced point [rad/s]."""
        return self.own_rate * self.rate_rad_s

    def unstable_rate_1_s(self) -> float:
        """Growth rate of deviations, 0 where they stay bounded [1/s].

        That of the largest multiplier over a period; about the displaced point where the orbit is open.
        """
        growth = self.own_growth
        if self.multiplier is not None:
            growth = math.log(self.multiplier) / float(self.table.length)
        return growth * self.rate_rad_s if growth > 1e-6 else 0.0

    def _times(self, times_s: ArrayLike) -> Exact:
        """Times in the table; those outside the span are refused."""
        times = np.atleast_1d(np.asarray(times_s))
        bad = ~np.isfinite(times)
        allowed = "finite times"
        if self.span_s is not None:
            first, last = self.span_s
            bad |= ~((times >= first) & (times <= last))
            allowed = f"{first:.10g} to {last:.10g} s from the epoch, the span of the {self.kind}"
        if bad.any():
            raise DomainError(Fault("reference time", f"got {float(times[bad][0])!r} s", allowed))
        return times.astype(np.longdouble) * self.rate_rad_s + self.phase

    def _flow(self, from_s: float, to_s: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Transition matrices (k, 6, 6) and pressure responses (k, 6), SI."""
        flow = self.table.flows(self._times(from_s)[0], self._times(to_s))
        scale = self.system.scale
        unit = scale / self.system.length_m
        phi = flow[:, :6, :6] * (unit[:, None] / unit)
        return phi.astype(float), (flow[:, :6, 6] * scale).astype(float)
