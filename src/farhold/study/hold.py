"""The holding study: what it costs to keep a formation in its slots, by closed-loop simulation."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from farhold.domain.epoch import DAY_S, YEAR_S
from farhold.dynamics.circular import lightness
from farhold.dynamics.trajectory import Reference
from farhold.errors import CaseError, Fault
from farhold.planning.holding.loop import Held, Loop, Spacecraft
from farhold.planning.holding.loop import hold as hold_nodes
from farhold.planning.holding.policies import POLICIES
from farhold.planning.holding.price import holding_m_s
from farhold.pool import run_blocks, set_threads
from farhold.propellant.rocket import propellant_kg
from farhold.study.campaign import Campaign, Chunk, Findings, check_folder, chunk_rng, run_campaign
from farhold.study.campaign.histogram import Histogram
from farhold.study.campaign.intervals import mean_interval, quantile_interval, support_warning
from farhold.study.case.faults import unknown_name
from farhold.study.case.record import Case
from farhold.study.provenance import provenance
from farhold.study.setting import Setting, setting_of, states_of
from farhold.watch import SILENT, Watch

__all__ = ["hold"]

_LANES = 40_000
_PARTS = 4
_LOW_M_S_YR, _HIGH_M_S_YR = 1e-6, 1e4
_RATIO_FROM_M_S_YR = 0.05


@dataclass(frozen=True, slots=True, eq=False)
class _Payload:
    """What a chunk needs: nodes in blocks, every sample of a node in one chunk."""

    reference: Reference
    loop: Loop
    craft: Spacecraft
    mass_kg: NDArray[np.float64]
    isp_s: NDArray[np.float64]
    samples: int
    seed: int
    nodes_per_chunk: int


def hold(
    case: Case,
    formation: str,
    *,
    for_days: float,
    policy: str | None = None,
    samples: int = 20,
    seed: int | None = None,
    filtered: bool = True,
    folder: str | Path | None = None,
    resume: bool = False,
    force: bool = False,
    cluster: str | None = None,
    allow_mixed: bool = False,
    threads: int | None = None,
    words: Sequence[str] = (),
    watch: Watch = SILENT,
) -> Findings:
    """Hold `formation` in a closed loop, with all errors of the case drawn anew for each sample.

    Parameters
    ----------
    case : from :func:`farhold.load`; its errors, rates, holding and reference are used
    formation : name of the formation to hold
    for_days : length [d], three decisions or more
    policy : box, revisit, target-point or unstable-mode (None: the case's)
    samples : draws per node
    seed : of all draws (None: the case's)
    filtered : False steers by each fix as it is, to show what that costs
    folder : where to keep the study, to be resumed; None keeps nothing
    resume, force, cluster, allow_mixed, words : see :func:`farhold.study.campaign.run_campaign`

    Returns
    -------
    Findings: `summary` is the JSON document "hold", `tables` has ``nodes``, one row per node

    Raises
    ------
    CaseError, DomainError
        An argument is unknown or out of range (exit 2).
    """
    case.formation(formation, "--formation")
    chosen = policy or case.holding.policy
    if chosen not in POLICIES:
        raise unknown_name("--policy", chosen, "policy", POLICIES)
    if not samples >= 1:
        raise CaseError(Fault("--samples", f"got {samples}", "1 or more"))
    if not 0.0 < for_days <= 36525.0:
        raise CaseError(Fault("--for", f"got {for_days:g} d", "above 0 d, up to 100 years"))
    if folder is not None:
        check_folder(folder, resume=resume, force=force)
    begin = time.perf_counter()
    set_threads(threads)
    setting = setting_of(case, formation)
    # a reference that ends earlier says so here, before anything is written
    setting.reference.primaries_m(for_days * DAY_S)
    payload = _payload(setting, chosen, for_days, samples, case.seed if seed is None else seed, filtered)
    n = len(payload.craft)
    campaign: Campaign[_Sums] = Campaign(
        "hold",
        {
            "case_sha256": case.sha256,
            "formation": formation,
            "for_days": for_days,
            "policy": chosen,
            "samples": samples,
            "filtered": filtered,
            "nodes_per_chunk": payload.nodes_per_chunk,
        },
        payload.seed,
        -(-n // payload.nodes_per_chunk),
        payload,
        _compute,
        lambda: _Sums.fresh(samples),
        _Sums.with_chunk,
        lambda sums: _findings(setting, formation, payload, for_days, sums),
    )
    found = run_campaign(
        campaign,
        folder=folder,
        resume=resume,
        force=force,
        cluster=cluster,
        allow_mixed=allow_mixed,
        words=words,
        watch=watch,
    )
    return replace(found, summary=found.summary | {"seconds": time.perf_counter() - begin})


def _payload(setting: Setting, policy: str, for_days: float, samples: int, seed: int, filtered: bool) -> _Payload:
    """Gather what the chunks need."""
    case, state = setting.case, setting.state
    errors = case.errors
    states, rule = states_of(setting, 0.0, state.formation, state.slot)
    kinds = np.unique(rule)
    if kinds.size > 1:
        raise CaseError(
            Fault(
                "--formation",
                f"its nodes sit under more than one rule ({', '.join(map(str, kinds))})",
                "a formation that seats every node under one rule",
            )
        )
    bits = state.per_class("impulse_bit_n_s") / state.mass_kg
    loop = Loop(
        rule=str(kinds[0]),
        policy=policy,
        start_s=0.0,
        span_s=for_days * DAY_S,
        cadence_s=case.holding.cadence_s,
        fix_s=errors.measurement_cadence_s,
        box_m=case.holding.box_m,
        gaps_s=errors.gaps_s,
        drop_outs=errors.drop_outs,
        fix_position_m=errors.navigation_position_m,
        fix_velocity_m_s=errors.navigation_velocity_m_s,
        filtered=filtered,
        acceleration_m_s2=errors.unmodelled_acceleration_m_s2,
        pressure_spread=errors.area_spread,
        magnitude=errors.execution_magnitude,
        fixed_m_s=errors.execution_fixed_m_s,
        pointing_rad=errors.execution_pointing_rad,
        missed=case.rates.missed_burns,
        failures_per_year=case.rates.failures_per_year,
    )
    craft = Spacecraft(states[:, :3], state.pressure_area_m2_kg * lightness(1.0), setting.excess_beta, bits)
    return _Payload(
        setting.reference,
        loop,
        craft,
        state.mass_kg,
        state.per_class("effective_isp_s"),
        samples,
        seed,
        max(1, _LANES // samples),
    )


def _compute(payload: _Payload, index: int) -> Chunk:
    """Hold one block of nodes over all samples, in parts that the threads share."""
    first = index * payload.nodes_per_chunk
    last = min(first + payload.nodes_per_chunk, len(payload.craft))
    cuts = np.unique(np.linspace(first, last, _PARTS + 1).astype(int))
    parts: list[Held | None] = [None] * (len(cuts) - 1)

    def part(k: int) -> None:
        rng = chunk_rng(payload.seed, index, k)
        rows = slice(int(cuts[k]), int(cuts[k + 1]))
        parts[k] = hold_nodes(payload.reference, payload.loop, payload.craft.part(rows), payload.samples, rng)

    run_blocks(part, range(len(parts)))
    held = [one for one in parts if one is not None]

    def all_of(name: str) -> NDArray[Any]:
        return np.concatenate([getattr(one, name) for one in held])

    steady = all_of("steady_m_s_yr")
    burnt = propellant_kg(
        payload.mass_kg[first:last, None],
        all_of("total_m_s"),
        payload.isp_s[first:last, None],
    )
    counted = np.isfinite(steady)
    histogram = Histogram.log(_LOW_M_S_YR, _HIGH_M_S_YR)
    histogram.add(np.maximum(steady[counted], _LOW_M_S_YR))
    filled = np.where(counted, steady, 0.0)
    per_node = np.maximum(counted.sum(axis=1), 1)
    return {
        "steady_mean": filled.sum(axis=1) / per_node,
        "steady_max": np.where(counted, steady, -np.inf).max(axis=1),
        "startup_mean": all_of("startup_m_s").mean(axis=1),
        "startup_max": all_of("startup_m_s").max(axis=1),
        "burns_mean": np.where(counted, all_of("burns_per_year"), 0.0).sum(axis=1) / per_node,
        "outside_mean": all_of("outside").mean(axis=1),
        "outside_any": (all_of("outside") > 0.0).any(axis=1),
        "worst": all_of("worst_m").max(axis=1),
        "rms": np.sqrt(np.square(all_of("rms_m")).mean(axis=1)),
        "lost": all_of("lost").sum(axis=1),
        "burnt_mean": burnt.mean(axis=1),
        "burnt_max": burnt.max(axis=1),
        "sample_sum": filled.sum(axis=0),
        "sample_count": counted.sum(axis=0),
        **histogram.to_arrays("steady"),
    }


@dataclass(frozen=True, slots=True, eq=False)
class _Sums:
    """What the chunks so far came to: columns per node, sums per sample, the histogram of all."""

    columns: dict[str, list[NDArray[Any]]]
    sample_sum: NDArray[np.float64]
    sample_count: NDArray[np.int64]
    histogram: Histogram

    @classmethod
    def fresh(cls, samples: int) -> _Sums:
        """Begin."""
        return cls(
            {}, np.zeros(samples), np.zeros(samples, dtype=np.int64), Histogram.log(_LOW_M_S_YR, _HIGH_M_S_YR)
        )

    @staticmethod
    def with_chunk(sums: _Sums, chunk: Chunk) -> _Sums:
        """Add one chunk."""
        for name in _COLUMNS:
            sums.columns.setdefault(name, []).append(np.asarray(chunk[name]))
        sums.histogram.add_arrays(chunk, "steady")
        return replace(
            sums,
            sample_sum=sums.sample_sum + np.asarray(chunk["sample_sum"]),
            sample_count=sums.sample_count + np.asarray(chunk["sample_count"]),
        )

    def column(self, name: str) -> NDArray[Any]:
        """Give one column over all nodes."""
        return np.concatenate(self.columns[name])


_COLUMNS = (
    "steady_mean",
    "steady_max",
    "startup_mean",
    "startup_max",
    "burns_mean",
    "outside_mean",
    "outside_any",
    "worst",
    "rms",
    "lost",
    "burnt_mean",
    "burnt_max",
)


def _findings(setting: Setting, formation: str, payload: _Payload, for_days: float, sums: _Sums) -> Findings:
    """Make the document, the table of nodes and the remarks."""
    case, state = setting.case, setting.state
    rule = np.full(len(state), payload.loop.rule)
    continuous = (
        holding_m_s(
            setting.reference,
            rule,
            payload.craft.place_m,
            0.0,
            0.0,
            for_days * DAY_S,
            setting.excess_beta,
        )
        / (for_days * DAY_S)
        * YEAR_S
    )
    nodes = pd.DataFrame(
        {
            "node": state.node,
            "class": state.class_name,
            "slot": state.slot,
            "dv_mean_m_s_yr": sums.column("steady_mean"),
            "dv_max_m_s_yr": np.maximum(sums.column("steady_max"), 0.0),
            "continuous_m_s_yr": continuous,
            "startup_mean_m_s": sums.column("startup_mean"),
            "impulses_per_year": sums.column("burns_mean"),
            "outside_share": sums.column("outside_mean"),
            "worst_m": sums.column("worst"),
            "rms_m": sums.column("rms"),
            "propellant_mean_kg": sums.column("burnt_mean"),
            "propellant_max_kg": sums.column("burnt_max"),
        }
    )
    mean = float(sums.sample_sum.sum() / max(1, sums.sample_count.sum()))
    steady = float(continuous.mean())
    per_sample = (sums.sample_sum / np.maximum(sums.sample_count, 1))[sums.sample_count > 0]
    histogram = sums.histogram
    draws = int(histogram.count)
    quantiles = {name: histogram.quantile(p).value if draws else None for name, p in _QUANTILES.items()}
    summary = {
        "kind": "hold",
        "schema": 1,
        "case": case.title,
        "formation": formation,
        "policy": payload.loop.policy,
        "for_days": for_days,
        "nodes": len(state),
        "samples": payload.samples,
        "seed": payload.seed,
        "lane": "fast",
        "model": setting.reference.model,
        "dv_per_year": {
            "mean_m_s": mean,
            **quantiles,
            "max_m_s": float(nodes["dv_max_m_s_yr"].max()),
            "max_node": str(nodes["node"].iloc[int(nodes["dv_max_m_s_yr"].argmax())]),
            "continuous_m_s": steady,
            "ratio": mean / steady if steady >= _RATIO_FROM_M_S_YR else None,
        },
        "startup": {
            "mean_m_s": float(nodes["startup_mean_m_s"].mean()),
            "max_m_s": float(sums.column("startup_max").max()),
        },
        "impulses_per_year": float(nodes["impulses_per_year"].mean()),
        "violations": {
            "share": float(nodes["outside_share"].mean()),
            "worst_m": float(nodes["worst_m"].max()),
            "nodes": int(sums.column("outside_any").sum()),
        },
        "propellant": {
            "total_kg": float(nodes["propellant_mean_kg"].sum()),
            "max_kg": float(nodes["propellant_max_kg"].max()),
        },
        "interval_95": {
            "mean_m_s": list(mean_interval(per_sample)),
            "p99_m_s": list(quantile_interval(histogram, 0.99)) if draws else [None, None],
        },
        "seconds": None,
        "provenance": provenance(case.sha256, payload.seed, None),
    }
    return Findings(summary, {"nodes": nodes}, _notes(payload, draws, int(sums.column("lost").sum())))


_QUANTILES = {"p50_m_s": 0.5, "p95_m_s": 0.95, "p99_m_s": 0.99}


def _notes(payload: _Payload, draws: int, lost: int) -> list[str]:
    """Say what a reader of the numbers should know."""
    notes = [
        "steady prices count whole cadences after the first two; motion by the linear flow about the reference, "
        "fixes filtered" + ("" if payload.loop.filtered else " not at all")
    ]
    warning = support_warning(0.99, draws, "draws")
    if warning:
        notes.append(warning)
    if payload.samples < 2:
        notes.append("one sample gives no interval for the mean; ask for two or more")
    loop, growth = payload.loop, payload.reference.unstable_rate_1_s()
    blind = max([loop.fix_s, *(last - first for first, last in loop.gaps_s)])
    if loop.filtered and growth and growth * blind > 1.0:
        notes.append(
            f"up to {blind / DAY_S:g} d pass without a fix, and deviations grow e-fold in "
            f"{1.0 / growth / DAY_S:.3g} d: the filter's gains do not know that, and prices may be far too high"
        )
    if lost:
        notes.append(f"{lost} of {draws} draws fail before the end and count until then")
    return notes
