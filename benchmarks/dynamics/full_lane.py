"""The full lane against general integrators, on the same nodes and one core: speed and error to the truth.

Run: python benchmarks/dynamics/full_lane.py. Needs the `bench` extra for the batch Taylor integrator; without it
those rows are left out. Errors are of positions relative to the reference, which every peer flies too.
"""

from __future__ import annotations

import common
import numpy as np
from peers import (
    heyoka_absolute,
    heyoka_deviation,
    numba_each,
    scipy_each,
    scipy_each_array,
    scipy_vector,
)

from farhold.domain.epoch import YEAR_S, Epoch
from farhold.dynamics.circular import SUN_EARTH, libration_point
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.pool import set_threads

NODES = 10_000
EPOCH = Epoch.from_iso("2035-03-20T00:00:00")
TOLERANCES = (1e-10, 1e-13)
PER_NODE = 3
# nodes abreast: what fills a register of four doubles, and what is quickest here
WIDTHS = (4, 16)
SIZE = np.repeat([SUN_EARTH.length_m, SUN_EARTH.speed_m_s], 3)


class Race:
    """One case: the nodes, the truth of the first of them, and who flew how many nodes how well."""

    def __init__(self, name: str, kind: str, **options: object) -> None:
        self.table = common.truth_table(name)
        self.reference = make_reference(
            kind, point=str(self.table["point"]), epoch=EPOCH, pressure_area_m2_kg=0.0, **options
        )
        self.end_s = float(self.table["output_s"][-1])
        self.states = common.swarm(self.table, NODES)
        point = libration_point(self.reference.point, SUN_EARTH.mu)
        self.own = np.concatenate([point, np.zeros(3)])
        self.still = kind == "equilibrium"
        if not self.still:
            self.own = self.own + np.array(self.reference.provenance["initial_state"], dtype=float)
        angle = {"L4": np.pi / 3, "L5": -np.pi / 3}.get(self.reference.point, 0.0)
        c, s = np.cos(angle), np.sin(angle)
        turn = np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])
        self.turn = np.kron(np.eye(2), turn)
        self.deviation = (self.states / SIZE) @ self.turn.T
        self.absolute = self.deviation + self.own
        self.end = self.end_s * SUN_EARTH.rate_rad_s
        self.works: dict[str, object] = {}
        self.nodes: dict[str, int] = {}
        self.error_m: dict[str, float] = {}

    def add(self, name: str, nodes: int, work: object, form: str) -> None:
        """Enter a peer: fly the truth's nodes once for the error (and to compile), keep the work for timing."""
        known = len(self.table["states"])
        got = work(known)[:known]
        if form == "absolute":
            got = got - got[0]
        if form != "own":
            got = got @ self.turn * SIZE
        error = np.linalg.norm((got - self.table["truth"][: len(got), -1])[:, :3], axis=1)
        self.works[name] = lambda: work(nodes)
        self.nodes[name], self.error_m[name] = nodes, float(error.max())

    def ours(self, accuracy: str, nodes: int) -> np.ndarray:
        return fly(self.reference, self.states[:nodes], [self.end_s], accuracy=accuracy).state[:, 0]

    def run(self, title: str, base: str) -> dict[str, float]:
        """Time all, print the table; returns node-years per second."""
        taken = common.in_turn(self.works)
        rate = {k: self.nodes[k] * self.end_s / YEAR_S / taken[k] for k in taken}
        print(f"\n{title}")
        common.show(
            ["", "nodes", "median s", "node-years/s", f"x {base}", "worst error m"],
            [
                [
                    k,
                    f"{self.nodes[k]}",
                    f"{t:.4g}",
                    f"{rate[k]:.3g}",
                    f"{rate[k] / rate[base]:.3g}",
                    f"{self.error_m[k]:.1e}",
                ]
                for k, t in taken.items()
            ],
        )
        return rate


def add_ours(race: Race) -> None:
    """Enter the full lane at each accuracy, and say what its first call costs beyond a later one."""
    race.ours("draft", 10)
    for accuracy in ("draft", "default", "fine"):
        first = common.seconds(lambda a=accuracy: race.ours(a, NODES))
        race.add(f"full lane, {accuracy}", NODES, lambda n, a=accuracy: race.ours(a, n), "own")
        print(f"first call, {accuracy}, with its search for a scheme and its tables: {first:.2f} s")


def add_heyoka(race: Race, nodes: int, tolerances: tuple[float | None, ...]) -> bool:
    """Enter the batch Taylor integrator, on absolute states and on deviations; False where it is not there."""
    try:
        makers = [
            (
                f"{width}{'' if tolerance is None else f', {tolerance:g}'}{told}",
                form,
                states,
                make,
                tolerance,
                width,
            )
            for tolerance in tolerances
            for told, form, states, make, widths in (
                ("", "absolute", race.absolute, heyoka_absolute, WIDTHS),
                (", deviations", "relative", race.deviation, heyoka_about(race), WIDTHS[-1:]),
            )
            for width in widths
        ]
        for label, form, states, make, tolerance, width in makers:
            one = make(SUN_EARTH.mu, width, tolerance)
            race.add(f"heyoka by {label}", nodes, lambda n, f=one, s=states: f(s[:n], race.end), form)
    except ImportError:
        print("heyoka is not installed (extra `bench`): its rows are left out")
        return False
    return True


def heyoka_about(race: Race) -> object:
    """Maker of the integrator of deviations from the reference of a race."""
    return lambda mu, width, tolerance: heyoka_deviation(mu, race.own, race.still, width, tolerance)


def near_l4() -> None:
    mu = SUN_EARTH.mu
    race = Race("l4_1000_km_1_year", "equilibrium")
    for tol in TOLERANCES:
        for name, peer, nodes in (
            ("SciPy per node", scipy_each, PER_NODE),
            ("SciPy per node, array rates", scipy_each_array, PER_NODE),
            ("SciPy vector", scipy_vector, NODES),
            ("numba DOP853", numba_each, NODES),
        ):
            race.add(
                f"{name} {tol:g}",
                nodes,
                lambda n, p=peer, t=tol: p(race.absolute[:n], race.end, mu, t),
                "absolute",
            )
    taylor = add_heyoka(race, NODES, (None, 1e-12))
    add_ours(race)
    rate = race.run("L4, 1000 km, 1 year", "SciPy per node 1e-13")
    error = race.error_m
    ours = rate["full lane, default"]
    for name, least in (
        ("SciPy per node, array rates", 1000.0),
        ("SciPy per node", 1000.0),
        ("SciPy vector", 20.0),
        ("numba DOP853", 4.0),
    ):
        tight, loose = (ours / rate[f"{name} {tol:g}"] for tol in reversed(TOLERANCES))
        common.verdict(
            f"default is {least:g} x {name} at 1e-13", tight >= least, f"{tight:.3g}; {loose:.3g} at its 1e-10"
        )
    less = min(error[f"numba DOP853 {tol:g}"] for tol in TOLERANCES) / error["full lane, default"]
    common.verdict("100 x less error than numba DOP853", less >= 100.0, f"{less:.3g}")
    common.verdict(
        "fine is within 10 micrometres", error["full lane, fine"] < 1e-5, f"{error['full lane, fine']:.1e} m"
    )
    common.verdict(
        "default is within 1 mm", error["full lane, default"] < 1e-3, f"{error['full lane, default']:.1e} m"
    )
    if taylor:
        against_taylor(race, rate)


def about_a_halo() -> None:
    race = Race("l2_halo_100_km_180_d", "halo", family="north", az_m=2e8)
    mu = SUN_EARTH.mu
    race.add("numba DOP853 1e-13", 1000, lambda n: numba_each(race.absolute[:n], race.end, mu, 1e-13), "absolute")
    taylor = add_heyoka(race, 2000, (None, 1e-12))
    add_ours(race)
    rate = race.run("L2 halo, az 200,000 km, 100 km, 180 d", "numba DOP853 1e-13")
    error = race.error_m["full lane, default"]
    common.verdict("default is within 1 mm", error < 1e-3, f"{error:.1e} m")
    if taylor:
        against_taylor(race, rate)


def against_taylor(race: Race, rate: dict[str, float], least: float = 1.5) -> None:
    """Compare each form of the batch Taylor integrator with the quickest lane that is no less exact."""
    for name in [key for key in rate if key.startswith("heyoka")]:
        no_worse = [k for k in rate if k.startswith("full") and race.error_m[k] <= max(race.error_m[name], 1e-6)]
        best = max(no_worse, key=rate.__getitem__, default="full lane, fine")
        ratio = rate[best] / rate[name]
        common.verdict(f"{best} is {least:g} x {name}, at no more error", ratio >= least, f"{ratio:.3g}")


def main() -> None:
    """Both cases on one core."""
    common.pin()
    set_threads(1)
    print(common.machine("scipy", "heyoka"))
    print(f"one core, medians of {common.ROUNDS} runs taken in turn; SciPy per node on {PER_NODE} nodes, scaled")
    near_l4()
    about_a_halo()


if __name__ == "__main__":
    main()
