"""References for use from Python: fly, transition and two-point transfers without a case."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import DAY_S, Epoch
from farhold.dynamics.circular import lightness
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.dynamics.trajectory import Reference
from farhold.errors import CaseError, DomainError, Fault
from farhold.planning.assignment.objectives import OBJECTIVES
from farhold.planning.assignment.pairing import Candidates, Pairing, Places, pair
from farhold.planning.transfer.linear import LinearTransfer
from farhold.planning.transfer.two_point import TwoPointPlan, two_point

__all__ = ["ReferenceTrajectory", "assign", "reference"]


@dataclass(frozen=True, slots=True, eq=False)
class ReferenceTrajectory:
    """A reference near a libration point; states are (n, 6) in R, T, N relative to it, in m and m/s.

    `motion` is the reference as the other floors know it. Times are days from its epoch.
    """

    motion: Reference

    @property
    def pressure_m2_kg(self) -> float:
        """C_R A/m that the reference itself carries [m2/kg]."""
        return self.motion.pressure_area_m2_kg

    def fly(
        self,
        states: ArrayLike,
        output_days: ArrayLike,
        *,
        start_days: float = 0.0,
        pressure_m2_kg: ArrayLike | None = None,
        impulses: tuple[ArrayLike, ArrayLike] | None = None,
        accuracy: str = "default",
    ) -> NDArray[np.float64]:
        """Fly nodes on the full lane.

        Parameters
        ----------
        states : (n, 6) at `start_days`
        output_days : (m,) monotonic, all on one side of `start_days`
        pressure_m2_kg : C_R A/m, one or (n,); None: the reference's
        impulses : None or (days, dv_m_s), days (k,) or (n, k), dv (n, k, 3) in R, T, N
        accuracy : "draft", "default" or "fine"

        Returns
        -------
        (n, m, 6); NaN for a node from where it met the Sun or the Earth.

        Raises
        ------
        DomainError
            Shapes or values are not lawful.
        """
        y = np.atleast_2d(np.asarray(states, dtype=float))
        when, dv = (None, None) if impulses is None else (np.asarray(impulses[0]) * DAY_S, impulses[1])
        return fly(
            self.motion,
            y,
            np.asarray(output_days, dtype=float) * DAY_S,
            start_s=start_days * DAY_S,
            excess_beta=self._excess(pressure_m2_kg, len(y)),
            impulse_s=when,
            dv_m_s=dv,
            accuracy=accuracy,
        ).state

    def transition(self, from_days: float, to_days: float) -> NDArray[np.float64]:
        """State-transition matrix (6, 6) of deviations, SI, rotating axes."""
        return self.motion.transition(from_days * DAY_S, to_days * DAY_S)

    def two_point(
        self,
        states: ArrayLike,
        targets: ArrayLike,
        over_days: float,
        *,
        depart_days: float = 0.0,
        pressure_m2_kg: ArrayLike | None = None,
        accuracy: str = "default",
    ) -> TwoPointPlan:
        """Join states to targets, row by row, by two impulses each.

        Parameters
        ----------
        states, targets : (n, 6) before the departure and after the arrival impulse
        over_days : transfer time [d]

        Returns
        -------
        TwoPointPlan with dv_depart_m_s, dv_arrive_m_s (n, 3), miss_m (n,), status (n,)

        Raises
        ------
        DomainError
            Shapes or values are not lawful.
        """
        y, z = _states("states", states), _states("targets", targets)
        if len(y) != len(z):
            raise DomainError(Fault("targets", f"{len(z)} rows", f"{len(y)} rows, as many as states"))
        _positive(over_days)
        return two_point(
            self.motion,
            y,
            z,
            depart_days * DAY_S,
            (depart_days + over_days) * DAY_S,
            excess_beta=self._excess(pressure_m2_kg, len(y)),
            accuracy=accuracy,
        )

    def _excess(self, pressure_m2_kg: ArrayLike | None, n: int) -> NDArray[np.float64]:
        """Pressure over gravity beyond the reference's, (n,)."""
        if pressure_m2_kg is None:
            return np.zeros(n)
        area = np.asarray(pressure_m2_kg, dtype=float)
        if area.shape not in ((), (n,)) or not (area >= 0.0).all():
            raise DomainError(Fault("pressure_m2_kg", f"shape {area.shape}", f"one or {n} numbers, 0 or above"))
        return np.array(np.broadcast_to((area - self.pressure_m2_kg) * lightness(1.0), (n,)))


def reference(
    point: str,
    *,
    kind: str = "equilibrium",
    model: str = "circular",
    epoch: str | Epoch | None = None,
    pressure_m2_kg: float = 0.0,
    **kind_options: Any,
) -> ReferenceTrajectory:
    """Build a reference trajectory.

    Parameters
    ----------
    point : "L1" to "L5"
    kind, model : "equilibrium" and "circular" in this version
    epoch : TDB, of time zero (None: 2000-01-01T12:00:00); it places the Earth, and so the ICRF
    pressure_m2_kg : C_R A/m of the reference

    Raises
    ------
    CaseError, DomainError
        Unknown point, kind, model or option.
    """
    if model != "circular":
        raise CaseError(Fault("model", f"got {model!r}", "circular"))
    if kind_options:
        names = ", ".join(kind_options)
        raise CaseError(Fault("reference", f"the kind {kind!r} takes no {names}", "no further options"))
    at = epoch if isinstance(epoch, Epoch) else Epoch.from_iso(epoch or "2000-01-01T12:00:00")
    return ReferenceTrajectory(
        make_reference(kind, point=point, epoch=at, pressure_area_m2_kg=float(pressure_m2_kg))
    )


def assign(
    ref: ReferenceTrajectory,
    states: ArrayLike,
    targets: ArrayLike,
    over_days: float,
    *,
    objective: str = "least-total",
    depart_days: float = 0.0,
    pressure_m2_kg: ArrayLike | None = None,
    mass_kg: ArrayLike = 1.0,
    isp_s: ArrayLike = 100.0,
) -> Pairing:
    """Pair n nodes with m targets at the least two-impulse price on the linear map, with proof.

    Parameters
    ----------
    states : (n, 6) of the nodes at departure;  targets : (m, 6) of the slots at arrival, m <= n
    objective : least-total, least-worst or least-propellant
    mass_kg, isp_s : one or (n,), for least-propellant

    Returns
    -------
    Pairing with slot_of (n,), -1 for a node left over, value, lower_bound, prices (m,)

    Raises
    ------
    CaseError
        Unknown objective, more targets than nodes, more than 5,000.
    """
    if objective not in OBJECTIVES:
        raise CaseError(Fault("objective", f"got {objective!r}", " ".join(OBJECTIVES)))
    y, z = _states("states", states), _states("targets", targets)
    _positive(over_days)
    n, m = len(y), len(z)
    nodes = Candidates(
        np.array([f"row {k}" for k in range(n)], dtype=np.str_),
        np.full(n, "node"),
        y,
        ref._excess(pressure_m2_kg, n),
        np.array(np.broadcast_to(np.asarray(mass_kg, dtype=float), (n,))),
        np.array(np.broadcast_to(np.asarray(isp_s, dtype=float), (n,))),
    )
    places = Places(
        np.array([f"row {k}" for k in range(m)], dtype=np.str_),
        np.full(m, "node"),
        z,
        np.full(m, np.nan),
        np.full(m, -1, dtype=np.int64),
        np.full(m, -1, dtype=np.int64),
        np.zeros(m, dtype=bool),
    )
    linear = LinearTransfer.between(ref.motion, depart_days * DAY_S, (depart_days + over_days) * DAY_S)
    return pair(linear, nodes, places, OBJECTIVES[objective])


def _states(name: str, values: ArrayLike) -> NDArray[np.float64]:
    """Check states (n, 6)."""
    y = np.asarray(values, dtype=float)
    if y.ndim != 2 or y.shape[1] != 6 or not np.isfinite(y).all():
        raise DomainError(Fault(name, f"shape {y.shape}", "shape (n, 6), finite"))
    return y


def _positive(over_days: float) -> None:
    """Refuse a transfer time that is not above 0."""
    if not over_days > 0.0:
        raise DomainError(Fault("over_days", f"got {over_days!r}", "above 0"))
