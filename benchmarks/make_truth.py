"""Write the truth tables of the dynamics tests: absolute flights by Taylor series in forty digits.

Run: python benchmarks/make_truth.py [folder]. Needs the `dev` extra. Writes one small .npz per case and
`digests.txt` (SHA-256, in the form that `sha256sum --check` reads) into tests/reference/truth, and prints them.

Nothing of farhold's integration is used: a node and its reference are flown apart, in the barycentric rotating
frame, and subtracted. Inputs are doubles, kept exactly as they were flown. A point is solved for in forty
digits; an orbit is taken as the initial state that the reference reports, in twenty.

Source of the recurrences: Jorba and Zou 2005, Experimental Mathematics 14, 99.
"""

from __future__ import annotations

import hashlib
import sys
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import mpmath
import numpy as np

from farhold.domain.epoch import DAY_S, YEAR_S, Epoch
from farhold.dynamics.circular import SUN_EARTH, libration_point, lightness
from farhold.dynamics.reference import make_reference

mp = mpmath.MPContext()
mp.dps = 40

FOLDER = Path(__file__).parents[1] / "tests" / "reference" / "truth"
EPOCH = Epoch.from_iso("2035-03-20T00:00:00")
ORDER = 34
TAIL = mp.mpf(10) ** -36
YEAR_D = YEAR_S / DAY_S
HALO = {"kind": "halo", "family": "north", "az_m": 2e8}


@dataclass(frozen=True)
class Case:
    """What to fly: about which reference, how far from it, until which days.

    `excess` is the size of beta beyond the reference's, `impulses` the number of shared impulses of up to
    `dv_m_s`; the first node is at rest at the reference itself, without pressure or impulses.
    """

    point: str
    radius_m: float
    days: tuple[float, ...]
    reference: dict[str, Any] = field(default_factory=lambda: {"kind": "equilibrium"})
    area_m2_kg: float = 0.0
    excess: float = 0.0
    impulses: int = 0
    dv_m_s: float = 0.0
    nodes: int = 5


YEARLY = (30.0, 0.5 * YEAR_D, YEAR_D)
CASES = {
    "l1_100_km_60_d": Case("L1", 1e5, (20.0, 60.0)),
    "l2_100_km_60_d": Case("L2", 1e5, (20.0, 60.0)),
    "l3_1000_km_1_year": Case("L3", 1e6, YEARLY),
    "l4_1000_km_1_year": Case("L4", 1e6, YEARLY, nodes=9),
    "l5_1000_km_1_year": Case("L5", 1e6, YEARLY),
    "l4_10_m_1_year": Case("L4", 10.0, YEARLY),
    "l4_20000_km_1_year": Case("L4", 2e7, YEARLY),
    "l4_backwards_1_year": Case("L4", 1e6, (-30.0, -YEAR_D)),
    "l4_pressure_1_year": Case("L4", 1e6, YEARLY, area_m2_kg=0.026, excess=4e-6),
    "l4_impulses_1_year": Case("L4", 1e6, YEARLY, area_m2_kg=0.026, excess=2e-6, impulses=52, dv_m_s=0.02),
    "l2_halo_100_km_180_d": Case("L2", 1e5, (30.0, 90.0, 180.0), HALO, nodes=9),
}


def series(state: list[Any], mu: Any, beta: Any) -> list[list[Any]]:
    """Taylor coefficients of the motion: six lists of ORDER + 1 numbers."""
    x = [[value] for value in state]
    bodies = [((1 - mu) * (1 - beta), -mu), (mu, 1 - mu)]
    square: list[list[Any]] = [[], []]
    power: list[list[Any]] = [[], []]
    for n in range(ORDER):
        force = [2 * x[4][n] + x[0][n], x[1][n] - 2 * x[3][n], mp.mpf(0)]
        for (mass, place), s, w in zip(bodies, square, power, strict=True):
            away = ([x[0][0] - place, *x[0][1:]], x[1], x[2])
            s.append(sum(mp.fdot(q, q[::-1]) for q in (r[: n + 1] for r in away)))
            if n == 0:
                w.append(s[0] ** mp.mpf(-1.5))
            else:
                known = mp.fdot([(mp.mpf(j) / 2 - mp.mpf(1.5) * n) * s[n - j] for j in range(n)], w)
                w.append(known / (n * s[0]))
            for axis in range(3):
                force[axis] -= mass * mp.fdot(away[axis][: n + 1], w[::-1])
        for axis in range(3):
            x[axis].append(x[axis + 3][n] / (n + 1))
            x[axis + 3].append(force[axis] / (n + 1))
    return x


def advance(state: list[Any], span: Any, mu: Any, beta: Any) -> list[Any]:
    """Fly an absolute state (6,) over a signed span, all nondimensional."""
    left = span
    while left != 0:
        x = series(state, mu, beta)
        reach = min((TAIL / abs(row[-1])) ** (mp.mpf(1) / ORDER) for row in x if row[-1] != 0)
        step = left if abs(left) <= reach else mp.sign(left) * reach
        powers = [step**n for n in range(ORDER + 1)]
        state = [mp.fdot(row, powers) for row in x]
        left -= step
    return state


def place_of(point: str, mu: Any, beta: Any) -> list[Any]:
    """Displaced libration point in the barycentric frame, to all digits."""
    pull = (1 - mu) * (1 - beta)
    if point in ("L4", "L5"):
        r1 = mp.cbrt(1 - beta)
        x = r1 * r1 / 2
        y = mp.sqrt(r1 * r1 - x * x)
        return [x - mu, y if point == "L4" else -y, mp.mpf(0)]

    def force(x: Any) -> Any:
        return x - pull * (x + mu) / abs(x + mu) ** 3 - mu * (x - 1 + mu) / abs(x - 1 + mu) ** 3

    guess = mp.mpf(float(libration_point(point, float(mu), float(beta))[0]))
    return [mp.findroot(force, guess), mp.mpf(0), mp.mpf(0)]


def nodes_of(case: Case, name: str) -> dict[str, np.ndarray]:
    """Doubles to fly: states (n, 6), excess_beta (n,), impulse_s (k,), dv_m_s (n, k, 3), output_s (m,)."""
    rng = np.random.default_rng(list(name.encode()))
    n, k = case.nodes, case.impulses
    state = rng.normal(size=(n, 2, 3))
    state /= np.linalg.norm(state, axis=2, keepdims=True)
    share = rng.uniform(0.0, 0.5 * np.pi, n)
    state[:, 0] *= case.radius_m * np.cos(share)[:, None]
    state[:, 1] *= case.radius_m * SUN_EARTH.rate_rad_s * np.sin(share)[:, None]
    state[0] = 0.0
    excess = rng.uniform(-case.excess, case.excess, n)
    excess[0] = 0.0
    dv = rng.uniform(-case.dv_m_s, case.dv_m_s, (n, k, 3))
    dv[0] = 0.0
    return {
        "states": state.reshape(n, 6),
        "output_s": np.array(case.days) * DAY_S,
        "excess_beta": excess,
        "impulse_s": (np.arange(k) + 0.5) * (case.days[-1] * DAY_S / max(k, 1)),
        "dv_m_s": dv,
    }


def fly(case: Case, flown: dict[str, np.ndarray], start: list[str]) -> np.ndarray:
    """Deviations (n, m, 6) at the asked times; `start` is the reference's reported state, empty at a point."""
    gm1, gm2, length = (mp.mpf(x) for x in (SUN_EARTH.gm1_m3_s2, SUN_EARTH.gm2_m3_s2, SUN_EARTH.length_m))
    mu, rate = gm2 / (gm1 + gm2), mp.sqrt((gm1 + gm2) / length**3)
    beta = mp.mpf(lightness(case.area_m2_kg))
    c, s = {"L3": (-1, 0), "L4": (0.5, mp.sqrt(3) / 2), "L5": (0.5, -mp.sqrt(3) / 2)}.get(case.point, (1, 0))
    units = [length] * 3 + [length * rate] * 3

    def turned(v: list[Any], sign: int) -> list[Any]:
        return [w for a, b, z in (v[:3], v[3:]) for w in (c * a - sign * s * b, sign * s * a + c * b, z)]

    if start:
        centre = [mp.mpf(float(v)) for v in libration_point(case.point, SUN_EARTH.mu)] + [mp.mpf(0)] * 3
        own = [a + b for a, b in zip(turned([mp.mpf(v) for v in start], 1), centre, strict=True)]
    else:
        own = [*place_of(case.point, mu, beta), *[mp.mpf(0)] * 3]
    events = sorted({*flown["output_s"].tolist(), *flown["impulse_s"].tolist()}, key=abs)
    way, here, now = {}, own, mp.mpf(0)
    for event in events:
        here = advance(here, (mp.mpf(event) - now) * rate, mu, beta) if start else own
        way[event], now = here, mp.mpf(event)
    out = np.empty((len(flown["states"]), flown["output_s"].size, 6))
    for i, state in enumerate(flown["states"]):
        deviation = turned([mp.mpf(float(v)) / u for v, u in zip(state, units, strict=True)], 1)
        body, now = [a + b for a, b in zip(own, deviation, strict=True)], mp.mpf(0)
        pushed = beta + mp.mpf(float(flown["excess_beta"][i]))
        for event in events:
            body, now = advance(body, (mp.mpf(event) - now) * rate, mu, pushed), mp.mpf(event)
            for k in np.flatnonzero(flown["impulse_s"] == event):
                push = turned([mp.mpf(0)] * 3 + [mp.mpf(float(v)) / units[3] for v in flown["dv_m_s"][i, k]], 1)
                body = [a + b for a, b in zip(body, push, strict=True)]
            for m in np.flatnonzero(flown["output_s"] == event):
                apart = turned([a - b for a, b in zip(body, way[event], strict=True)], -1)
                out[i, m] = [float(a * u) for a, u in zip(apart, units, strict=True)]
    return out


def main() -> None:
    """Write all tables and their digests."""
    folder = Path(sys.argv[1]) if len(sys.argv) > 1 else FOLDER
    folder.mkdir(parents=True, exist_ok=True)
    lines = []
    for name, case in CASES.items():
        reference = make_reference(
            point=case.point, epoch=EPOCH, pressure_area_m2_kg=case.area_m2_kg, **case.reference
        )
        start = reference.provenance.get("initial_state", [])
        flown = nodes_of(case, name)
        path = folder / f"{name}.npz"
        np.savez(
            path,
            **flown,
            truth=fly(case, flown, start),
            point=np.array(case.point),
            pressure_area_m2_kg=np.array(case.area_m2_kg),
            radius_m=np.array(case.radius_m),
            gm_m3_s2=np.array([SUN_EARTH.gm1_m3_s2, SUN_EARTH.gm2_m3_s2]),
            length_m=np.array(SUN_EARTH.length_m),
            initial_state=np.array(start, dtype="U32"),
        )
        lines.append(f"{hashlib.sha256(path.read_bytes()).hexdigest()}  {path.name}")
        print(lines[-1], flush=True)
    (folder / "digests.txt").write_text("\n".join(lines) + "\n")


if __name__ == "__main__":
    main()
