"""References for use from Python: fly, transition and two-point transfers without a case."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from farhold.domain.epoch import DAY_S, Epoch
from farhold.dynamics.circular import lightness
from farhold.dynamics.dispersion import carried_covariance
from farhold.dynamics.fast import FastFlight, choose_lane, fly_fast
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference, options_of
from farhold.dynamics.trajectory import Reference
from farhold.errors import CaseError, DomainError, Fault
from farhold.planning.assignment.objectives import OBJECTIVES
from farhold.planning.assignment.pairing import Candidates, Pairing, Places, pair
from farhold.planning.knowledge import horizon_days
from farhold.planning.transfer.linear import LinearTransfer
from farhold.planning.transfer.two_point import TwoPointPlan, two_point

__all__ = ["ReferenceTrajectory", "assign", "reference"]

_OPTIONS: dict[str, tuple[str, float | None]] = {
    "family": ("family", None),
    "az_km": ("az_m", 1e3),
    "ay_km": ("ay_m", 1e3),
    "amplitude_km": ("amplitude_m", 1e3),
    "period_days": ("period_s", DAY_S),
    "phase_deg": ("phase_rad", math.pi / 180.0),
    "span_days": ("span_s", DAY_S),
}


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

    def fly_fast(
        self,
        states: ArrayLike,
        output_days: ArrayLike,
        *,
        order: int | None = None,
        tolerance_m: float | None = None,
        start_days: float = 0.0,
        pressure_m2_kg: ArrayLike | None = None,
        impulses: tuple[ArrayLike, ArrayLike] | None = None,
    ) -> FastFlight:
        """Fly nodes by Taylor maps, with the error estimated and checked on the full lane.

        Parameters
        ----------
        order : 1, 2 or 3; None: the lowest that keeps `tolerance_m`
        tolerance_m : largest position error allowed [m], 1 mm where None
        states, output_days, start_days, pressure_m2_kg, impulses : as :meth:`fly`, impulse times (k,)

        Returns
        -------
        FastFlight with state (n, m, 6), order, error_m, checked_m, sound

        Raises
        ------
        DomainError
            Shapes or values are not lawful, or no order keeps the tolerance (use :meth:`fly`).
        """
        y = np.atleast_2d(np.asarray(states, dtype=float))
        when, dv = (None, None) if impulses is None else (np.asarray(impulses[0]) * DAY_S, impulses[1])
        output_s = np.asarray(output_days, dtype=float) * DAY_S
        given: dict[str, Any] = {
            "start_s": start_days * DAY_S,
            "excess_beta": self._excess(pressure_m2_kg, len(y)),
            "impulse_s": when,
            "dv_m_s": dv,
        }
        chosen = (
            choose_lane(self.motion, y, output_s, tolerance_m=tolerance_m, **given) if order is None else order
        )
        if chosen is None:
            limit = 1e-3 if tolerance_m is None else tolerance_m
            raise DomainError(
                Fault("order", f"no map keeps {limit:g} m for these nodes", "1, 2 or 3", "use fly, the full lane")
            )
        return fly_fast(self.motion, y, output_s, order=chosen, **given)

    def covariance(
        self,
        initial: ArrayLike,
        from_days: float,
        to_days: float,
        *,
        impulse_days: ArrayLike = (),
        impulse_covariance: ArrayLike | None = None,
    ) -> NDArray[np.float64]:
        """Covariance (n, 6, 6) of deviations at `to_days` on the linear map, R, T, N, SI.

        Parameters
        ----------
        initial : (6, 6) or (n, 6, 6) at `from_days`
        impulse_days, impulse_covariance : (k,), and (k, 3, 3) or (n, k, 3, 3) of the execution of impulses

        Raises
        ------
        DomainError
            Shapes do not fit, or impulse times lie outside the span.
        """
        return carried_covariance(
            self.motion,
            initial,
            from_days * DAY_S,
            to_days * DAY_S,
            impulse_s=np.asarray(impulse_days, dtype=float) * DAY_S,
            impulse_covariance=impulse_covariance,
        )

    def knowledge_days(
        self,
        *,
        position_m: float,
        velocity_m_s: float,
        acceleration_m_s2: float = 0.0,
        asked_m: float = 10.0,
        start_days: float = 0.0,
    ) -> float | None:
        """Days until the 3-D rms position error after one fix exceeds `asked_m`; None: not within ten years.

        Parameters
        ----------
        position_m, velocity_m_s, acceleration_m_s2 : 1-sigma errors per axis of the fix, and unmodelled

        Raises
        ------
        DomainError
            A negative or not finite error.
        """
        return horizon_days(
            self.motion,
            position_m=position_m,
            velocity_m_s=velocity_m_s,
            acceleration_m_s2=acceleration_m_s2,
            asked_m=asked_m,
            start_s=start_days * DAY_S,
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
    kind : "equilibrium", "halo", "lyapunov", "lissajous", "short-period" or "long-period"
    model : "circular" in this version
    epoch : TDB, of time zero (None: 2000-01-01T12:00:00); it places the Earth, and so the ICRF
    pressure_m2_kg : C_R A/m of the reference
    kind_options : `family` ("north" or "south") and `az_km` or `period_days` of a halo; `ay_km` of a lyapunov;
        `ay_km`, `az_km` and `span_days` of a lissajous; `amplitude_km` of a short-period or long-period; of all
        but the equilibrium `phase_deg`, where it is at the epoch

    Raises
    ------
    CaseError, DomainError
        Unknown point, kind, model or option; a value out of range.
    ConvergenceError
        There is no such orbit.
    """
    if model != "circular":
        raise CaseError(Fault("model", f"got {model!r}", "circular"))
    at = epoch if isinstance(epoch, Epoch) else Epoch.from_iso(epoch or "2000-01-01T12:00:00")
    options = _in_si(kind, kind_options)
    return ReferenceTrajectory(
        make_reference(kind, point=point, epoch=at, pressure_area_m2_kg=float(pressure_m2_kg), **options)
    )


def _in_si(kind: str, given: dict[str, Any]) -> dict[str, Any]:
    """Rename the options of a kind to those of its room, in SI; refuse what the kind does not take or misses."""
    due, free = options_of(kind)
    allowed = {name: key for name, (key, _) in _OPTIONS.items() if key in due + free}
    wrong = [name for name in given if name not in allowed]
    if wrong:
        raise CaseError(
            Fault(
                "reference",
                f"the kind {kind!r} takes no {', '.join(wrong)}",
                " ".join(allowed) or "no further options",
            )
        )
    missing = [name for name, key in allowed.items() if key in due and name not in given]
    if missing:
        raise CaseError(Fault("reference", f"the kind {kind!r} needs {', '.join(missing)}", " ".join(allowed)))
    options: dict[str, Any] = {}
    for name, value in given.items():
        key, unit = _OPTIONS[name]
        if unit is None or value is None:
            options[key] = value
            continue
        try:
            options[key] = float(value) * unit
        except (TypeError, ValueError):
            raise CaseError(Fault(f"reference.{name}", f"got {value!r}", "a number")) from None
    return options


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
