"""Ten million node-years of linear Monte-Carlo on one core: summed covariances, six normal numbers per node.

Run: python benchmarks/dynamics/monte_carlo.py. Beside it NumPy alone, drawing as many normal numbers, and the
same samples flown one impulse after the other (fewer, scaled).
"""

from __future__ import annotations

import common
import numpy as np

from farhold.domain.epoch import YEAR_S, Epoch
from farhold.dynamics.dispersion import carried_covariance, draw
from farhold.dynamics.reference import make_reference
from farhold.pool import set_threads

NODES, SAMPLES = 10_000, 1_000
BY_IMPULSE = 20
IMPULSES = 52
MOST_S = 3.0


def main() -> None:
    """Time the whole: covariances carried over the impulses, factors, and all samples."""
    common.pin()
    set_threads(1)
    print(common.machine())
    reference = make_reference(
        "equilibrium", point="L4", epoch=Epoch.from_iso("2035-03-20T00:00:00"), pressure_area_m2_kg=0.026
    )
    rng = np.random.default_rng(5)
    mean = np.concatenate([rng.normal(0.0, 1e6, (NODES, 3)), rng.normal(0.0, 0.1, (NODES, 3))], axis=1)
    initial = np.diag([1.0, 1.0, 1.0, 1e-8, 1e-8, 1e-8])
    when = (np.arange(IMPULSES) + 0.5) * YEAR_S / IMPULSES
    errors = rng.uniform(1e-8, 1e-6, (NODES, IMPULSES, 1, 1)) * np.eye(3)
    sigma = rng.uniform(1e-8, 1e-7, NODES)
    hops = [reference.transition(a, b) for a, b in zip([0.0, *when], [*when, YEAR_S], strict=True)]
    response = reference.pressure_response(0.0, YEAR_S)
    spare = np.empty((100, NODES, 6))

    def ours() -> None:
        total = carried_covariance(
            reference, initial, 0.0, YEAR_S, impulse_s=when, impulse_covariance=errors, pressure_sigma=sigma
        )
        drawn = sum(len(batch) for batch in draw(rng, mean, total, SAMPLES))
        assert drawn == SAMPLES

    def bare() -> None:
        for _ in range(SAMPLES // len(spare)):
            rng.standard_normal(out=spare)

    def by_impulse() -> None:
        root = np.sqrt(np.diag(initial))
        spread = np.sqrt(errors[:, :, 0, 0])
        for _ in range(BY_IMPULSE):
            y = rng.standard_normal((NODES, 6)) * root
            for k, hop in enumerate(hops):
                y = y @ hop.T
                if k < IMPULSES:
                    y[:, 3:] += rng.standard_normal((NODES, 3)) * spread[:, k, None]
            y += mean + (rng.standard_normal(NODES) * sigma)[:, None] * response

    ours()
    taken = common.in_turn(
        {"summed covariances": ours, "NumPy's numbers alone": bare, "by impulse": by_impulse}, 5
    )
    taken["by impulse"] *= SAMPLES / BY_IMPULSE
    years = NODES * SAMPLES
    print(
        f"{NODES} nodes, {SAMPLES} samples of one year with {IMPULSES} impulses; by impulse: {BY_IMPULSE}, scaled"
    )
    common.show(["", "median s", "node-years/s"], [[k, f"{t:.3g}", f"{years / t:.3g}"] for k, t in taken.items()])
    found = taken["summed covariances"]
    common.verdict(f"1e7 node-years under {MOST_S:g} s", found < MOST_S, f"{found:.2f}")


if __name__ == "__main__":
    main()
