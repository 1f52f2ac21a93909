"""The closed loop of holding: fixes, estimates, decisions, burns and motion of many nodes over many samples."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import YEAR_S
from farhold.dynamics.trajectory import Reference
from farhold.errors import DomainError, Fault
from farhold.kernels.control.filter import grow, measure, replace
from farhold.kernels.control.holding import advance, burn, decide_box, decide_linear
from farhold.planning.holding.flow import Flow, flow, slot_turn
from farhold.planning.holding.policies import POLICIES
from farhold.planning.holding.policy import Feedback, Policy

__all__ = ["Held", "Loop", "Spacecraft", "hold"]

_LOOKS = 8
_LEAST_STEPS = 4
_WATCHED = 0.95
_SETTLING_CADENCES = 2
_SHORTEST_STEP_S = 600.0
_MOST_E_FOLDS = 10.0
_FORGETTING_S = 180.0 * 86400.0


@dataclass(frozen=True, slots=True)
class Loop:
    """How nodes are held; all errors are 1 sigma, per axis.

    Attributes
    ----------
    rule : of the slots;  policy : a key of POLICIES
    start_s, span_s : start and length;  cadence_s : time between decisions;  fix_s : time between fixes
    box_m : half-width on each axis
    gaps_s : (start, end) of spans without fixes;  drop_outs : share of fixes lost
    fix_position_m, fix_velocity_m_s : errors of a fix;  filtered : False takes the fix for the estimate
    acceleration_m_s2 : unmodelled acceleration, constant per sample;  pressure_spread : share of each node's own
    magnitude, fixed_m_s, pointing_rad : execution errors;  missed : share of burns missed
    failures_per_year : share of nodes lost per year
    """

    rule: str
    policy: str
    start_s: float
    span_s: float
    cadence_s: float
    fix_s: float
    box_m: float
    gaps_s: tuple[tuple[float, float], ...] = ()
    drop_outs: float = 0.0
    fix_position_m: float = 0.0
    fix_velocity_m_s: float = 0.0
    filtered: bool = True
    acceleration_m_s2: float = 0.0
    pressure_spread: float = 0.0
    magnitude: float = 0.0
    fixed_m_s: float = 0.0
    pointing_rad: float = 0.0
    missed: float = 0.0
    failures_per_year: float = 0.0

    @property
    def step_s(self) -> float:
        """Step of the simulation: a divisor of the times between decisions and fixes, four or more a decision."""
        step = float(self.common_s)
        while self.cadence_s / step < _LEAST_STEPS:
            step /= 2.0
        return step

    @property
    def common_s(self) -> int:
        """Longest time, in whole seconds, that divides those between decisions and between fixes."""
        return math.gcd(round(self.cadence_s), round(self.fix_s))

    def __post_init__(self) -> None:
        if self.policy not in POLICIES:
            raise DomainError(Fault("holding.policy", f"got {self.policy!r}", " ".join(POLICIES)))
        if self.common_s < _SHORTEST_STEP_S:
            raise DomainError(
                Fault(
                    "holding.cadence",
                    f"{self.cadence_s:g} s and a measurement every {self.fix_s:g} s have no common step",
                    "times with a common divisor of ten minutes or more",
                    "make the cadence a multiple of the measurement cadence",
                )
            )
        if not self.span_s >= (_SETTLING_CADENCES + 1) * self.cadence_s:
            raise DomainError(
                Fault(
                    "--for",
                    f"{self.span_s / 86400.0:g} d hold no steady part",
                    f"{(_SETTLING_CADENCES + 1) * self.cadence_s / 86400.0:g} d (three decisions) or more",
                )
            )


@dataclass(frozen=True, slots=True, eq=False)
class Spacecraft:
    """The n nodes held.

    Attributes
    ----------
    place_m : (n, 3) slots at the start, rotating axes
    beta, excess_beta : (n,) pressure over gravity, in all and beyond the reference's
    least_m_s : (n,) smallest burn that the thruster makes
    """

    place_m: NDArray[np.float64]
    beta: NDArray[np.float64]
    excess_beta: NDArray[np.float64]
    least_m_s: NDArray[np.float64]

    def __len__(self) -> int:
        return len(self.place_m)

    def part(self, rows: slice) -> Spacecraft:
        """Return some of the nodes."""
        return Spacecraft(self.place_m[rows], self.beta[rows], self.excess_beta[rows], self.least_m_s[rows])


@dataclass(frozen=True, slots=True, eq=False)
class Held:
    """What holding came to, per node and sample, all (n, samples).

    Attributes
    ----------
    steady_m_s_yr : burns over whole cadences after the first two, per year; NaN for a node lost before
    startup_m_s : burns of the first two cadences;  total_m_s : all burns
    burns_per_year : their number in the steady part
    outside : share of steps that end outside the box;  worst_m : largest distance on any axis
    rms_m : root mean square distance from the slot;  lost : bool, failed during the span
    """

    steady_m_s_yr: NDArray[np.float64]
    startup_m_s: NDArray[np.float64]
    total_m_s: NDArray[np.float64]
    burns_per_year: NDArray[np.float64]
    outside: NDArray[np.float64]
    worst_m: NDArray[np.float64]
    rms_m: NDArray[np.float64]
    lost: NDArray[np.bool_]


def hold(reference: Reference, loop: Loop, craft: Spacecraft, samples: int, rng: np.random.Generator) -> Held:
    """Hold nodes at their slots in a closed loop (design section 5, holding policies).

    Truth and estimate move by the linear flow about the reference under the pull at the slot: exact for
    rotating slots of a reference at rest, linear in the slot's place else. Fixes come at each multiple of the
    time between them, outside gaps, less drop-outs; decisions at each multiple of the cadence, fix first.

    Parameters
    ----------
    craft : n nodes;  samples : draws of all errors per node
    rng : generator of all random numbers, drawn step by step

    Returns
    -------
    Held, (n, samples) each
    """
    lanes = _Lanes.of(reference, loop, craft, samples, rng)
    step = loop.step_s
    steps = int(loop.span_s // step)
    per_decision, per_fix = round(loop.cadence_s / step), round(loop.fix_s / step)
    steady_from = _SETTLING_CADENCES * per_decision
    steady_to = steps // per_decision * per_decision
    for k in range(steps):
        now = loop.start_s + k * step
        if k % per_fix == 0 and not any(first <= now < last for first, last in loop.gaps_s):
            lanes.fix(loop, rng)
        steady = steady_from <= k < steady_to
        if k % per_decision == 0:
            lanes.decide(reference, loop, now, rng, steady)
            if steady:
                lanes.steady += lanes.spent
                lanes.decisions += lanes.alive
            elif k < steady_from:
                lanes.startup += lanes.spent
            lanes.total += lanes.spent
        lanes.move(reference, loop, now)
        lanes.fail(loop, (k + 1) * step)
    return lanes.result(loop.cadence_s / YEAR_S, (len(craft), samples))


class _Lanes:
    """State of all nodes and samples, lanes last."""

    def __init__(self, width: int) -> None:
        self.truth, self.estimate = np.zeros((6, width)), np.zeros((6, width))
        self.known, self.hidden, self.believed = (np.zeros((3, width)) for _ in range(3))
        self.place, self.dv = np.zeros((3, width)), np.zeros((3, width))
        self.covariance, self.work = np.zeros((18, width)), np.zeros((6, width))
        self.spent, self.startup, self.steady, self.total = (np.zeros(width) for _ in range(4))
        self.worst, self.square = np.zeros(width), np.zeros(width)
        self.outside, self.burns = np.zeros(width, dtype=np.int64), np.zeros(width, dtype=np.int64)
        self.alive = np.ones(width, dtype=bool)
        self.dies_s = np.full(width, np.inf)
        self.least = np.zeros(width)
        self.seen_steps, self.decisions = np.zeros(width, dtype=np.int64), np.zeros(width, dtype=np.int64)

    @classmethod
    def of(
        cls, reference: Reference, loop: Loop, craft: Spacecraft, samples: int, rng: np.random.Generator
    ) -> _Lanes:
        """Set all nodes in their slots, with their errors drawn."""
        n = len(craft)
        lanes = cls(n * samples)
        push = reference.pressure_field(craft.place_m, loop.start_s)
        known = craft.excess_beta[:, None] * push
        exact = reference.autonomous and loop.rule == "rotating"
        if exact:
            known = known + reference.field(craft.place_m, "rotating", loop.start_s)
        elif loop.rule != "natural":
            lanes.place[:] = np.repeat(craft.place_m.T, samples, axis=1)
        lanes.known[:] = np.repeat(known.T, samples, axis=1)
        area = rng.standard_normal(n * samples) * loop.pressure_spread
        own = np.repeat((craft.beta[:, None] * push).T, samples, axis=1)
        lanes.hidden[:] = own * area + loop.acceleration_m_s2 * rng.standard_normal((3, n * samples))
        lanes.least[:] = np.repeat(craft.least_m_s, samples)
        spread2 = (loop.pressure_spread * np.repeat(craft.beta * np.linalg.norm(push, axis=1), samples)) ** 2
        for c in range(3):
            lanes.covariance[6 * c] = loop.fix_position_m**2
            lanes.covariance[6 * c + 2] = loop.fix_velocity_m_s**2
            lanes.covariance[6 * c + 5] = loop.acceleration_m_s2**2 + (spread2 if c == 0 else 0.0)
        lanes.estimate[:3] = loop.fix_position_m * rng.standard_normal((3, n * samples))
        lanes.estimate[3:] = loop.fix_velocity_m_s * rng.standard_normal((3, n * samples))
        if loop.failures_per_year > 0.0:
            rate = -math.log1p(-min(loop.failures_per_year, 1.0 - 1e-12)) / YEAR_S
            lanes.dies_s = rng.exponential(1.0 / rate, n * samples)
        return lanes

    def fix(self, loop: Loop, rng: np.random.Generator) -> None:
        """Measure every node that is not dropped out."""
        width = self.alive.size
        seen = self.alive.copy()
        if loop.drop_outs > 0.0:
            seen &= rng.random(width) >= loop.drop_outs
        noise = rng.standard_normal((6, width))
        noise[:3] *= loop.fix_position_m
        noise[3:] *= loop.fix_velocity_m_s
        if loop.filtered:
            variances = loop.fix_position_m**2, loop.fix_velocity_m_s**2
            measure(self.truth, self.estimate, self.believed, self.covariance, seen, noise, *variances)
        else:
            replace(self.truth, self.estimate, seen, noise)

    def decide(
        self, reference: Reference, loop: Loop, now_s: float, rng: np.random.Generator, counted: bool
    ) -> None:
        """Decide and burn."""
        policy = POLICIES[loop.policy]
        spans, looked, index = _looks(policy, loop.cadence_s)
        feedback, seen = _answers(reference, loop, _moment(reference, now_s), spans, looked)
        if policy.boxed:
            decide_box(
                self.estimate,
                self.known,
                self.believed,
                self.place,
                loop.box_m,
                _WATCHED,
                np.ascontiguousarray(seen.state[:, :3]),
                np.ascontiguousarray(seen.steady[:, :3]),
                np.ascontiguousarray(seen.slot[:, :3]),
                feedback.state,
                feedback.steady,
                feedback.slot,
                index,
                self.dv,
            )
        else:
            decide_linear(
                self.estimate,
                self.known,
                self.believed,
                self.place,
                feedback.state[0],
                feedback.steady[0],
                feedback.slot[0],
                self.dv,
            )
        width = self.alive.size
        ready = self.alive.copy()
        if loop.missed > 0.0:
            ready &= rng.random(width) >= loop.missed
        burn(
            self.dv,
            self.least,
            ready,
            rng.standard_normal((4, width)),
            loop.magnitude,
            loop.fixed_m_s,
            loop.pointing_rad,
            self.truth,
            self.estimate,
            self.covariance,
            self.spent,
            self.burns,
            counted,
        )

    def move(self, reference: Reference, loop: Loop, now_s: float) -> None:
        """Carry everything over one step."""
        step = loop.step_s
        table = flow(reference, loop.rule, _moment(reference, now_s), (step,))
        slot = table.slot[0] if self.place.any() else np.zeros((6, 3))
        advance(
            self.truth,
            self.estimate,
            self.known,
            self.hidden,
            self.believed,
            self.place,
            table.state[0],
            table.steady[0],
            slot,
            slot_turn(reference, loop.rule, step),
            loop.box_m,
            self.outside,
            self.worst,
            self.square,
            self.work,
        )
        self.seen_steps += self.alive
        if loop.filtered:
            forget = (loop.acceleration_m_s2**2 + 1e-24) / _FORGETTING_S
            grow(self.covariance, step, forget)

    def fail(self, loop: Loop, after_s: float) -> None:
        """Take nodes out of service; what they do afterwards no longer counts."""
        if loop.failures_per_year > 0.0:
            dead = np.flatnonzero(self.alive & (self.dies_s <= after_s))
            self.alive[dead] = False
            for values in (self.truth, self.estimate, self.known, self.hidden, self.believed, self.place):
                values[:, dead] = 0.0

    def result(self, cadence_years: float, shape: tuple[int, int]) -> Held:
        """Gather per node and sample."""
        years = np.where(self.decisions > 0, self.decisions * cadence_years, np.nan)
        steady, burns = self.steady / years, self.burns / years
        looked = np.maximum(self.seen_steps, 1)
        return Held(
            steady.reshape(shape),
            self.startup.reshape(shape),
            self.total.reshape(shape),
            burns.reshape(shape),
            (self.outside / looked).reshape(shape),
            self.worst.reshape(shape),
            np.sqrt(self.square / looked).reshape(shape),
            np.logical_not(self.alive).reshape(shape),
        )


def _moment(reference: Reference, now_s: float) -> float:
    """Time that tables are made for: one for all where nothing depends on it."""
    return 0.0 if reference.autonomous else now_s


def _looks(policy: Policy, cadence_s: float) -> tuple[tuple[float, ...], tuple[float, ...], NDArray[np.int64]]:
    """Horizons of a policy, all times it looks at, and which of those show the path up to each horizon.

    Row 0 of the index holds, in its first place, how many of the times lie before the next decision.
    """
    spans = policy.horizons(cadence_s)
    if not policy.boxed:
        return spans, spans, np.zeros((1, 1), dtype=np.int64)
    wanted = sorted({span * k / _LOOKS for span in spans for k in range(1, _LOOKS + 1)})
    index = np.full((len(spans), _LOOKS), -1, dtype=np.int64)
    for row, span in enumerate(spans):
        index[row] = [wanted.index(span * k / _LOOKS) for k in range(1, _LOOKS + 1)]
    index[0, 0] = sum(time <= cadence_s for time in wanted)
    return spans, tuple(wanted), index


def _answers(
    reference: Reference, loop: Loop, now_s: float, spans: tuple[float, ...], looked: tuple[float, ...]
) -> tuple[Feedback, Flow]:
    """Feedback of the policy and the flow to all times looked at, as known at one decision."""
    growth = reference.unstable_rate_1_s()
    last = max(loop.cadence_s, _MOST_E_FOLDS / growth) if growth else math.inf
    if reference.span_s is not None:
        last = min(last, reference.span_s[1] - now_s)
    spans = tuple(min(span, last) for span in spans)
    looked = tuple(min(time, last) for time in looked)
    seen = flow(reference, loop.rule, now_s, looked)
    at = [looked.index(span) for span in spans]
    ahead = Flow(seen.state[at], seen.steady[at], seen.slot[at])
    return POLICIES[loop.policy].feedback(ahead), seen
