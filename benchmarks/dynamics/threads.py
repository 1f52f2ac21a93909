"""Two threads against one: 100,000 nodes, a year, 52 impulses each.

Run: python benchmarks/dynamics/threads.py. Needs two cores that are free. The first row, multiply-adds that share
nothing, is what the machine gives two threads at the time: where it is below 2, other programs take the rest.
"""

from __future__ import annotations

import os
import statistics

import common
import numpy as np
from peak import LANES, multiply_add

from farhold.domain.epoch import DAY_S, YEAR_S, Epoch
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.pool import run_blocks, set_threads

NODES, IMPULSES, ROUNDS = 100_000, 52, 7
LEAST = 1.7


def main() -> None:
    """Shared and own impulse times, one and two threads in turn."""
    print(common.machine())
    usable = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    if usable < 2:
        raise SystemExit("this process may use one core only: nothing to compare")
    reference = make_reference(
        "equilibrium", point="L4", epoch=Epoch.from_iso("2035-03-20T00:00:00"), pressure_area_m2_kg=0.0
    )
    rng = np.random.default_rng(2)
    states = np.concatenate([rng.normal(0.0, 5e5, (NODES, 3)), rng.normal(0.0, 0.1, (NODES, 3))], axis=1)
    excess = rng.uniform(-2e-6, 2e-6, NODES)
    shared = (np.arange(IMPULSES) + 0.5) * YEAR_S / IMPULSES
    own = shared + rng.uniform(-2.0, 2.0, (NODES, IMPULSES)) * DAY_S
    dv = rng.uniform(-0.02, 0.02, (NODES, IMPULSES, 3))
    work = {
        "multiply-adds alone": lambda: run_blocks(
            lambda x: multiply_add(x, 0.5, 0.5, 15_000), [np.ones(LANES) for _ in range(8)]
        ),
        "shared times": lambda: fly(reference, states, [YEAR_S], excess_beta=excess, impulse_s=shared, dv_m_s=dv),
        "own times": lambda: fly(reference, states, [YEAR_S], excess_beta=excess, impulse_s=own, dv_m_s=dv),
    }
    taken: dict[tuple[str, int], list[float]] = {(name, count): [] for name in work for count in (1, 2)}
    for turn in range(ROUNDS + 1):
        for (name, count), values in taken.items():
            set_threads(count)
            spent = common.seconds(work[name])
            if turn:
                values.append(spent)
    rows = []
    for name in work:
        one, two = taken[name, 1], taken[name, 2]
        middle = statistics.median(one), statistics.median(two)
        ratios = f"{middle[0] / middle[1]:.2f}", f"{min(one) / min(two):.2f}"
        rows.append([name, f"{middle[0]:.3f}", f"{middle[1]:.3f}", *ratios])
    common.show(["", "one thread s", "two threads s", "ratio of medians", "of least times"], rows)
    given = rows[0][3]
    for row in rows[1:]:
        common.verdict(
            f"two threads {LEAST:g} x one, {row[0]}",
            float(row[3]) >= LEAST,
            f"{row[3]} where the machine gives {given}",
        )


if __name__ == "__main__":
    main()
