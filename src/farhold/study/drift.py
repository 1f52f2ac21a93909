"""The drift study: how a swarm spreads when it is left alone, with all errors of its release drawn anew."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

from farhold.domain.epoch import DAY_S
from farhold.dynamics.circular import lightness
from farhold.errors import CaseError, Fault
from farhold.pool import set_threads
from farhold.study.campaign import Campaign, Findings, check_folder, run_campaign
from farhold.study.case.faults import unknown_name
from farhold.study.case.record import Case
from farhold.study.drift_chunks import DriftPayload, DriftSums, compute
from farhold.study.drift_findings import findings
from farhold.study.setting import Setting, setting_of, states_of
from farhold.watch import SILENT, Watch

__all__ = ["drift"]

_LANES = 200_000
_MOST_CHUNKS = 200
_PAIRS = 20_000
_GRID = (0.25, 0.5, 1.0, 2.0, 3.0, 5.0, 7.0, 10.0, 14.0, 21.0, 30.0, 45.0, 60.0, 90.0, 120.0, 180.0, 240.0, 300.0)


def drift(
    case: Case,
    formation: str,
    *,
    for_days: float,
    samples: int = 20,
    pair_samples: int = 3,
    seed: int | None = None,
    accuracy: str = "default",
    lane: str = "full",
    folder: str | Path | None = None,
    resume: bool = False,
    force: bool = False,
    cluster: str | None = None,
    allow_mixed: bool = False,
    threads: int | None = None,
    words: Sequence[str] = (),
    watch: Watch = SILENT,
) -> Findings:
    """Let `formation` go from rest in its slots and look where its nodes drift.

    Each sample draws anew: position and velocity errors of navigation, release speed, and the pressure of each
    node within the area spread, all normal, per axis.

    Parameters
    ----------
    case : from :func:`farhold.load`
    formation : name of the formation to let go
    for_days : length [d]
    samples : draws of the whole swarm
    pair_samples : samples, beside the nominal flight, in which distances and links are looked at
    seed : of all draws (None: the case's)
    accuracy : of the full lane
    lane : "full", or "fast": second-order maps, with their error estimated, checked and said
    folder : where to keep the study, to be resumed; None keeps nothing
    resume, force, cluster, allow_mixed, words : see :func:`farhold.study.campaign.run_campaign`

    Returns
    -------
    Findings: `summary` is the JSON document "drift"; `tables` has ``nodes``, ``displacement``, ``baselines``

    Raises
    ------
    CaseError, DomainError
        An argument is unknown or out of range (exit 2).
    """
    case.formation(formation, "--formation")
    if not 0.0 < for_days <= 36525.0:
        raise CaseError(Fault("--for", f"got {for_days:g} d", "above 0 d, up to 100 years"))
    if not samples >= 1:
        raise CaseError(Fault("--samples", f"got {samples}", "1 or more"))
    if lane not in ("full", "fast"):
        raise unknown_name("--lane", lane, "lane", ("full", "fast"))
    if not pair_samples >= 0:
        raise CaseError(Fault("--pair-samples", f"got {pair_samples}", "0 or more"))
    if folder is not None:
        check_folder(folder, resume=resume, force=force)
    begin = time.perf_counter()
    set_threads(threads)
    setting = setting_of(case, formation)
    payload = _payload(
        setting, for_days, samples, pair_samples, case.seed if seed is None else seed, accuracy, lane
    )
    campaign: Campaign[DriftSums] = Campaign(
        "drift",
        {
            "case_sha256": case.sha256,
            "formation": formation,
            "for_days": for_days,
            "samples": samples,
            "pair_samples": pair_samples,
            "accuracy": accuracy,
            "lane": lane,
            "samples_per_chunk": payload.samples_per_chunk,
        },
        payload.seed,
        -(-samples // payload.samples_per_chunk),
        payload,
        compute,
        lambda: DriftSums.fresh(payload),
        DriftSums.with_chunk,
        lambda sums: findings(setting, formation, payload, for_days, sums),
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


def _payload(
    setting: Setting, for_days: float, samples: int, pair_samples: int, seed: int, accuracy: str, lane: str
) -> DriftPayload:
    """Gather what the chunks need."""
    case, state = setting.case, setting.state
    errors = case.errors
    n = len(state)
    days = np.array([day for day in _GRID if day < for_days] + [for_days])
    states, _ = states_of(setting, 0.0, state.formation, state.slot)
    places = np.stack(
        [
            states_of(setting, float(day) * DAY_S, state.formation, state.slot)[0][:, :3].astype(np.float64)
            for day in days
        ]
    )
    hubs = np.array([c.is_hub for c in state.classes])[state.class_index]
    ranges = [c.link_range_m for c in state.classes if c.is_hub and c.link_range_m is not None]
    least = max(-(-_LANES // n), -(-samples // _MOST_CHUNKS))
    rng = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(2**31,)))
    pairs = rng.integers(0, n, size=(min(_PAIRS, n * (n - 1) // 2), 2)) if n > 1 else np.zeros((0, 2), dtype=int)
    return DriftPayload(
        reference=setting.reference,
        days=days,
        states=states,
        places_m=places,
        beta=state.pressure_area_m2_kg * lightness(1.0),
        excess_beta=setting.excess_beta,
        position_m=errors.navigation_position_m,
        velocity_m_s=errors.navigation_velocity_m_s,
        release_m_s=errors.release_speed_m_s,
        area_spread=errors.area_spread,
        tolerance_m=case.holding.box_m,
        hubs=hubs,
        link_range_m=max(ranges) if ranges else None,
        pairs=pairs[pairs[:, 0] != pairs[:, 1]],
        samples=samples,
        pair_samples=pair_samples,
        seed=seed,
        samples_per_chunk=min(samples, least),
        accuracy=accuracy,
        lane=lane,
    )
