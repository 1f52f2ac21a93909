"""100,000 nodes for a year, 52 impulses and a pressure of its own each: every lane, seconds and memory.

Run: python benchmarks/dynamics/impulses.py. Each lane flies in a process of its own, on one core; memory is what
the process held at most above what it held with the input in it. The first nodes are those of a truth table.
"""

from __future__ import annotations

import json
import statistics
import sys

import common
import numpy as np

from farhold.domain.epoch import Epoch
from farhold.dynamics.fast import fly_fast
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.pool import set_threads

NODES = 100_000
RUNS = 5
LANES = {
    "full lane, default": 0.6,
    "full lane, fine": None,
    "second-order map": 0.15,
    "linear map": 0.05,
    "full lane, own impulse times": None,
}
MOST_MB = 300.0
OWN_OVER_SHARED = 4.0


def fly_one(lane: str) -> None:
    """Fly one lane here; print first and later seconds, memory and worst error as JSON."""
    common.pin()
    set_threads(1)
    table = common.truth_table("l4_impulses_1_year")
    known = len(table["states"])
    rng = np.random.default_rng(3)
    states = common.swarm(table, NODES)
    excess = rng.uniform(-2e-6, 2e-6, NODES)
    excess[:known] = table["excess_beta"]
    when = table["impulse_s"]
    dv = rng.uniform(-0.02, 0.02, (NODES, when.size, 3))
    dv[:known] = table["dv_m_s"]
    end_s = float(table["output_s"][-1])
    if "own" in lane:
        apart_s = end_s / when.size
        when = when + rng.uniform(-0.4, 0.4, (NODES, when.size)) * apart_s
        when[:known] = table["impulse_s"]
    reference = make_reference(
        "equilibrium",
        point="L4",
        epoch=Epoch.from_iso("2035-03-20T00:00:00"),
        pressure_area_m2_kg=float(table["pressure_area_m2_kg"]),
    )
    job = {"excess_beta": excess, "impulse_s": when, "dv_m_s": dv}

    def work() -> np.ndarray:
        if "map" in lane:
            order = 1 if "linear" in lane else 2
            return fly_fast(reference, states, [end_s], order=order, **job).state
        return fly(reference, states, [end_s], accuracy="fine" if "fine" in lane else "default", **job).state

    few = {key: value[:200] if len(value) == NODES else value for key, value in job.items()}
    fly(reference, states[:200], [end_s], **few)
    above = common.Above()
    first = common.seconds(work)
    later = [common.seconds(work) for _ in range(RUNS)]
    peak_mb = above.peak_mb()
    error = np.linalg.norm((work()[:known, 0] - table["truth"][:, -1])[:, :3], axis=1).max()
    found = {"first": first, "median": statistics.median(later), "least": min(later), "mb": peak_mb}
    print(json.dumps({**found, "error": float(error), "own peak": above.peak_is_own}))


def main() -> None:
    """Fly all lanes one after the other and print the table."""
    print(common.machine())
    print(f"{NODES} nodes, 1 year, 52 impulses and a pressure each, one core; medians of {RUNS} runs")
    print(
        "first: with the search for a scheme or the making of the maps, and the compiling if it is the first ever"
    )
    found = {lane: common.apart(__file__, lane) for lane in LANES}
    common.show(
        ["", "median s", "least s", "first s", "MB above input", "worst error m"],
        [
            [
                k,
                f"{v['median']:.3f}",
                f"{v['least']:.3f}",
                f"{v['first']:.2f}",
                f"{v['mb']:.0f}",
                f"{v['error']:.1e}",
            ]
            for k, v in found.items()
        ],
    )
    for lane, most in LANES.items():
        if most is not None:
            common.verdict(
                f"{lane} under {most:g} s", found[lane]["median"] < most, f"{found[lane]['median']:.3f}"
            )
    shared, own = (found[lane]["median"] for lane in ("full lane, default", "full lane, own impulse times"))
    common.verdict(
        f"own times under {OWN_OVER_SHARED:g} x shared", own < OWN_OVER_SHARED * shared, f"{own / shared:.2f}"
    )
    most_mb = max(value["mb"] for value in found.values())
    common.verdict(f"under {MOST_MB:g} MB above the input", most_mb < MOST_MB, f"{most_mb:.0f}")


if __name__ == "__main__":
    if len(sys.argv) > 1:
        fly_one(sys.argv[1])
    else:
        main()
