"""What share of the core's measured multiply-add peak the full lane reaches.

Run: python benchmarks/dynamics/peak.py. The peak is a compiled loop of independent multiply-adds in registers, as
the compiler vectorises it here; the work of the lane is counted from its loops (a division or a root as one).
"""

from __future__ import annotations

import common
import numpy as np
from numba import njit

from farhold.domain.epoch import Epoch
from farhold.dynamics.lanes.request import checked, legs_of
from farhold.dynamics.lanes.shared import scheme_for
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.pool import set_threads

NODES = 10_000
LANES = 256
REPEATS = 200_000
# operations of one sample of the remainder, by series and in closed form, and of a change of place
SERIES, CLOSED, CHANGE = 75, 71, 8
EPOCH = Epoch.from_iso("2035-03-20T00:00:00")


@njit(fastmath={"contract"}, inline="always")
def _four(x, a, b):
    return (((x * a + b) * a + b) * a + b) * a + b


@njit(fastmath={"contract"}, nogil=True)
def multiply_add(x, a, b, repeats):
    """Sixteen multiply-adds on each element of x, many times; elements are independent of each other."""
    for _ in range(repeats):
        for i in range(x.size):
            x[i] = _four(_four(_four(_four(x[i], a, b), a, b), a, b), a, b)


def operations(nodes: int, sweeps: int, closed: bool) -> int:
    """Floating-point operations of one arc for one lane; see kernels.motion.collocate."""
    places = nodes * 3 * 13
    samples = sweeps * nodes * (CLOSED if closed else SERIES)
    gathers = (sweeps - 1) * nodes * 3 * 6 * nodes
    return places + samples + gathers + nodes * CHANGE + 6 * 13 + 6 * 6 * nodes


def main() -> None:
    """Measure peak and lane in turn on one core."""
    common.pin()
    set_threads(1)
    print(common.machine())
    x = np.ones(LANES)
    multiply_add(x, 0.5, 0.5, 1)
    works = {"peak": lambda: multiply_add(x, 0.5, 0.5, REPEATS // 4)}
    counts = {"peak": float(32 * LANES * (REPEATS // 4))}
    for name, kind, options in (
        ("l4_1000_km_1_year", "equilibrium", {}),
        ("l2_halo_100_km_180_d", "halo", {"family": "north", "az_m": 2e8}),
    ):
        table = common.truth_table(name)
        point, end_s = str(table["point"]), float(table["output_s"][-1])
        reference = make_reference(kind, point=point, epoch=EPOCH, pressure_area_m2_kg=0.0, **options)
        states = common.swarm(table, NODES)
        asked = checked(states, [end_s], 0.0, None, None, None)
        legs = legs_of(asked)
        for accuracy in ("draft", "default", "fine"):
            scheme = scheme_for(reference, asked.reach_m(reference), 0.0, end_s, legs.span_s[0], accuracy)
            arcs = int(np.ceil(end_s / scheme.longest_s - 1e-9))
            label = f"{name}, {accuracy}: {arcs} arcs of {scheme.nodes} nodes, {scheme.sweeps} sweeps"
            label += ", closed form" if scheme.closed else ", series"
            counts[label] = float(NODES * arcs * operations(scheme.nodes, scheme.sweeps, scheme.closed))
            works[label] = lambda r=reference, s=states, e=end_s, a=accuracy: fly(r, s, [e], accuracy=a)
            works[label]()
    taken = common.in_turn(works)
    rate = {k: counts[k] / t / 1e9 for k, t in taken.items()}
    common.show(
        ["", "1e9 operations/s", "share of peak"],
        [[k, f"{v:.1f}", f"{100.0 * v / rate['peak']:.0f} %"] for k, v in rate.items()],
    )


if __name__ == "__main__":
    main()
