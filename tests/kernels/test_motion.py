"""The kernels of motion against slow forms in plain Python, and without compilation."""

import os
import subprocess
import sys

import mpmath
import numpy as np
import pytest

from farhold.kernels.motion.collocate import fly_shared
from farhold.kernels.motion.deviation import acceleration, fly_own, locate
from farhold.kernels.motion.follow import follow
from farhold.kernels.motion.integrate import dop853
from farhold.kernels.motion.three_body import derivative
from farhold.kernels.status import HIT_PRIMARY, NOT_FINITE, OK, OUTSIDE_TABLES, TOO_MANY_STEPS, meaning

R1 = np.array([1.495978707e11, 0.0, 0.0])
R2 = np.array([7.4798935e10, -1.2955555e11, 0.0])
GM = np.array([1.327e20, 1.3271e20])
GM2 = 4.035e14
RATE = 1.99e-7
# a reference that stands still is one cell of degree 0
STILL = R1.reshape(1, 3, 1)
ACROSS = R1 - R2
RADII = np.array([6.957e8, 6.3781e6])


def located(lanes):
    """Where the reference is, for so many lanes: (11, lanes)."""
    where = np.empty((11, lanes))
    locate(STILL, 0.0, 1.0, np.zeros(lanes), GM, GM2, ACROSS, where)
    return where


def exact_acceleration(state, db):
    """Difference of attractions, pressure and the terms of the axes, in forty digits by subtraction."""
    mp = mpmath.MPContext()
    mp.dps = 40
    d, v = ([mp.mpf(float(x)) for x in part] for part in (state[:3], state[3:]))
    n = mp.mpf(RATE)
    total = [n * n * d[0] + 2 * n * v[1], n * n * d[1] - 2 * n * v[0], mp.mpf(0)]
    for gm, rho in ((mp.mpf(GM[0]), R1), (mp.mpf(GM2), R2)):
        at = [mp.mpf(float(x)) for x in rho]
        there = [a + b for a, b in zip(at, d, strict=True)]
        near, far = (mp.sqrt(mp.fdot(p, p)) ** 3 for p in (at, there))
        for k in range(3):
            total[k] += gm * (at[k] / near - there[k] / far)
            if rho is R1:
                total[k] += mp.mpf(float(db)) * mp.mpf(GM[1]) * there[k] / far
    return [float(x) for x in total]


@pytest.mark.parametrize("size_m", [1e-3, 1.0, 1e3, 1e6, 1e9, 3e10])
def test_acceleration_does_not_cancel(size_m):
    rng = np.random.default_rng(3)
    S = rng.normal(0.0, size_m, (6, 5)) * np.repeat([1.0, RATE], 3)[:, None]
    # of the size of the attraction difference, so that neither hides the other
    db = rng.normal(0.0, 1e-12 * size_m, 5)
    out = np.empty((3, 5))
    acceleration(S, located(5), RATE, db, out)
    exact = np.array([exact_acceleration(S[:, k], db[k]) for k in range(5)]).T
    # terms of size n2 d, a few roundings each
    assert out == pytest.approx(exact, abs=2e-14 * np.abs(exact).max())


def absolute_gradient(mu, beta, place, h=1e-5):
    """Jacobian of the derivative at rest by central differences."""
    columns = []
    for k in range(6):
        rates = []
        for sign in (1.0, -1.0):
            y, dy = np.append(place, [0.1, -0.2, 0.3]), np.empty(6)
            y[k] += sign * h
            derivative(y, mu, beta, dy)
            rates.append(dy.copy())
        columns.append((rates[0] - rates[1]) / (2.0 * h))
    return np.array(columns).T


@pytest.mark.parametrize("mu", [0.0, 0.1])
def test_variational_equations_are_the_gradient_of_the_motion(mu):
    place = np.array([0.4, 0.7, -0.3])
    y = np.concatenate([place, [0.1, -0.2, 0.3], np.eye(6).ravel()])
    dy = np.empty(42)
    derivative(y, mu, 0.05, dy)
    # h2 times third derivatives, 1e-10 times 1e2
    assert dy[6:].reshape(6, 6) == pytest.approx(absolute_gradient(mu, 0.05, place), abs=2e-8)


def test_massless_secondary_pulls_nothing_even_at_its_place():
    dy = np.empty(6)
    derivative(np.array([1.0, 0.0, 0.0, 0.0, 0.0, 0.0]), 0.0, 0.0, dy)
    assert (dy == 0.0).all()


@pytest.mark.parametrize("t", [-3.0, 0.0, 4.9, 5.0, 17.3, 20.0, 26.0])
def test_reference_is_located_on_its_chebyshev_series(t):
    # cells of 5 s from t = 0; beyond either end the last cell's series goes on
    track = np.random.default_rng(5).normal(0.0, 1e9, (4, 3, 7))
    track[:, :, 0] += [1e11, 2e11, 3e11]
    cell = min(max(int(t // 5.0), 0), 3)
    place = np.polynomial.chebyshev.chebval(2.0 * (t / 5.0 - cell) - 1.0, track[cell].T)
    where = np.empty((11, 1))
    locate(track, 0.0, 5.0, np.array([t]), GM, GM2, ACROSS, where)
    sun, earth = np.linalg.norm(place), np.linalg.norm(place - ACROSS)
    exact = [*place, *(place - ACROSS), sun**-2, *(GM / sun**3), earth**-2, GM2 / earth**3]
    assert where[:, 0] == pytest.approx(exact, rel=1e-13)


def block(lanes):
    """Arguments of a block of so many lanes at rest that fly one step of a day."""
    shape = (1, lanes)
    return {
        "Y": np.zeros((6, lanes)),
        "db": np.zeros(lanes),
        "t": np.zeros(lanes),
        "steps": np.ones(shape, dtype=np.int64),
        "size": np.full(shape, 86400.0),
        "kick": np.full(shape, -1, dtype=np.int64),
        "dv": np.zeros((lanes, 1, 3)),
        "keep": np.zeros(shape, dtype=np.int64),
        "out": np.empty((1, 6, lanes)),
    }


def fly(arguments):
    status = np.zeros(arguments["Y"].shape[1], dtype=np.int64)
    fly_own(*arguments.values(), STILL, 0.0, 1.0, ACROSS, GM, GM2, RATE, 0.5, status)
    return arguments["out"], status


def test_lane_with_fewer_steps_stands_still_meanwhile():
    job = block(3)
    job["Y"][0] = 1e6
    job["steps"][0] = [0, 1, 4]
    out, status = fly(job)
    assert (status == OK).all()
    assert (out[0, :, 0] == [1e6, 0, 0, 0, 0, 0]).all()
    assert job["t"].tolist() == [0.0, 86400.0, 4 * 86400.0]
    alone = block(1)
    alone["Y"][0] = 1e6
    assert (fly(alone)[0][0, :, 0] == out[0, :, 1]).all()


def test_lanes_go_through_arcs_of_their_own():
    # the same three days in arcs 1 + 2 and 2 + 1, and in one: asked days and steps agree, so do the bits
    job = block(3)
    job["Y"][0] = 1e6
    job["steps"] = np.array([[1, 2, 3], [2, 1, 0]])
    job["size"] = np.full((2, 3), 86400.0)
    job["kick"] = np.full((2, 3), -1)
    job["keep"] = np.array([[0, 0, 1], [1, 1, 0]])
    job["out"] = np.empty((2, 6, 3))
    out, _ = fly(job)
    assert (out[1] == out[1][:, :1]).all()
    assert (out[0, :, 0] != out[0, :, 1]).any()


def test_lane_that_is_not_finite_is_marked_and_kept_apart():
    job = block(2)
    job["Y"][4, 0] = np.nan
    out, status = fly(job)
    assert status.tolist() == [OUTSIDE_TABLES, OK]
    assert np.isnan(out[0, :, 0]).all()
    assert np.isfinite(out[0, :, 1]).all()


@pytest.mark.parametrize("body", [R1, R2])
@pytest.mark.parametrize(("share", "status"), [(0.49, OUTSIDE_TABLES), (0.51, OK)])
def test_lane_near_a_body_is_marked(body, share, status):
    # nearer than half of what the reference is: fixed steps are not trusted there
    job = block(2)
    job["Y"][:3, 0] = (share - 1.0) * body
    job["size"][0] = 1e-3
    assert fly(job)[1].tolist() == [status, OK]


def one_node(**changes):
    """Arguments of `follow` for a node at rest at 1000 km that flies one arc of a day."""
    return {
        "y": np.array([[1e6], [0.0], [0.0], [0.0], [0.0], [0.0]]),
        "db": np.zeros(1),
        "t0": 0.0,
        "span": np.array([86400.0]),
        "kick": np.array([-1]),
        "dv": np.zeros((1, 3)),
        "keep": np.array([0]),
        "out": np.full((1, 6), np.nan),
        **changes,
    }


def followed(job, rtol=1e-13, atol=1e-6, radii=RADII):
    status = follow(*job.values(), STILL, 0.0, 1.0, ACROSS, GM, GM2, RATE, radii, rtol, atol)
    return job["out"], status


@pytest.mark.parametrize(("body", "radius"), [(R1, RADII[0]), (R2, RADII[1])])
def test_followed_node_that_falls_on_a_body_meets_its_surface(body, radius):
    # from 30 radii at rest; it comes down long before the end
    start = -body + 30.0 * radius * body / np.linalg.norm(body)
    job = one_node(y=np.append(start, np.zeros(3)).reshape(6, 1), span=np.array([864000.0]))
    out, status = followed(job)
    assert status == HIT_PRIMARY
    assert np.isnan(out).all()
    assert np.linalg.norm(job["y"][:3, 0] + body) < radius


def test_followed_node_that_passes_outside_a_body_does_not_meet_it():
    # speed of a circle at 1.5 radii of the Earth, in axes that turn a thousand times slower
    start = np.append(-R2 + [1.5 * RADII[1], 0.0, 0.0], [0.0, np.sqrt(GM2 / (1.5 * RADII[1])), 0.0])
    out, status = followed(one_node(y=start.reshape(6, 1)))
    assert status == OK
    assert np.linalg.norm(out[0, :3] + R2) == pytest.approx(1.5 * RADII[1], rel=0.01)


def test_followed_node_that_is_not_finite_is_reported():
    assert followed(one_node(db=np.array([np.nan])))[1] == NOT_FINITE


def test_followed_node_that_needs_steps_without_end_is_reported():
    # onto a point: no radius stops the fall
    start = np.append(-R2 + [1e7, 0.0, 0.0], np.zeros(3)).reshape(6, 1)
    status = followed(one_node(y=start), radii=np.zeros(2))[1]
    assert status in (TOO_MANY_STEPS, NOT_FINITE)


@pytest.mark.parametrize("arcs", [1, 3])
def test_followed_node_goes_where_fixed_steps_lead(arcs):
    job = block(1)
    job["Y"][:, 0] = [1e6, -2e5, 3e5, 0.01, 0.02, -0.03]
    job["db"][:] = 1e-6
    job["steps"][0] = 30
    own, _ = fly(job)
    start = np.array([[1e6], [-2e5], [3e5], [0.01], [0.02], [-0.03]])
    pieces = {"span": np.full(arcs, 30.0 * 86400.0 / arcs), "kick": np.full(arcs, -1)}
    keep = np.append(np.full(arcs - 1, -1), 0)
    out, status = followed(one_node(y=start, db=np.full(1, 1e-6), keep=keep, **pieces))
    assert status == OK
    assert out[0] == pytest.approx(own[0, :, 0], rel=1e-11)


def test_remainder_is_the_attraction_less_its_linear_part():
    # one arc of an hour on tables of free motion, so that nothing but the remainder acts: N t2/2 and N t, where
    # N is the difference of attraction less what it is to first order
    tau, span = 0.5 * (1.0 + np.array([-1.0, 1.0]) / np.sqrt(3.0)), 3600.0
    places = np.zeros((1, 2, 3, 6))
    places[0, :, :, :3], places[0, :, :, 3:] = np.eye(3), (tau * span)[:, None, None] * np.eye(3)
    phi = np.eye(6)[None].copy()
    phi[0, :3, 3:] = span * np.eye(3)
    outer = np.zeros((1, 2, 6, 3))
    outer[0, :, :3] = (0.5 * span**2 * (1.0 - tau))[:, None, None] * np.eye(3)
    outer[0, :, 3:] = 0.5 * span * np.eye(3)
    still = np.zeros((1, 2, 2, 3, 3))
    Y, out = np.zeros((6, 8)), np.zeros((1, 6, 8))
    Y[:3] = np.array([[3e9], [-1e9], [2e9]])
    sites = [np.tile(r, (1, 2, 1)) for r in (R1, R2)]
    moved, far, db = np.zeros(8), np.zeros(8), np.zeros(8)
    arc, none = np.zeros(1, dtype=np.int64), np.full(1, -1)
    fly_shared(
        Y, db, arc, phi, np.zeros((1, 6)), places, np.zeros((1, 2, 3)), still, outer, *sites, GM, GM2, True, 2,
        none, np.zeros((8, 0, 3)), arc, out, moved, far,
    )  # fmt: skip
    d = np.array([3e9, -1e9, 2e9])
    pull = np.zeros(3)
    for gm, rho in ((GM[0], R1), (GM2, R2)):
        size = np.linalg.norm(rho)
        exact = gm * (rho / size**3 - (rho + d) / np.linalg.norm(rho + d) ** 3)
        pull += exact - gm / size**3 * (3.0 * (rho @ d) / size**2 * rho - d)
    # a rounding of 3e9 m is 5e-7 m
    assert out[0, :3, 0] - d == pytest.approx(0.5 * span**2 * pull, abs=1e-6)
    assert out[0, 3:, 0] == pytest.approx(span * pull, rel=1e-9)
    # how much nearer than the reference the node comes to either body
    nearer = [1.0 - (np.linalg.norm(rho + d) / np.linalg.norm(rho)) ** 2 for rho in (R1, R2)]
    assert far[0] == pytest.approx(max(*nearer, 0.0), rel=1e-12)
    assert (out[0] == out[0][:, :1]).all()


def test_too_small_a_step_is_reported():
    # a fall into the primary, which the step size cannot follow to the end
    y = np.array([0.1, 0.0, 0.0, 0.0, -0.1, 0.0])
    status, steps = dop853(y, np.array([0.0, 1.0]), 0.0, 0.0, 1e-14, 1e-14, np.empty((2, 6)))
    assert status in (TOO_MANY_STEPS, NOT_FINITE)
    assert steps > 1


@pytest.mark.parametrize(
    ("code", "words"),
    [
        (OK, "done"),
        (NOT_FINITE, "the state stopped being a finite number"),
        (HIT_PRIMARY, "the path meets the Sun or the Earth"),
        (TOO_MANY_STEPS, "the step size fell below what the span allows"),
        (OUTSIDE_TABLES, "the path leaves where the tables of the arcs hold"),
    ],
)
def test_status_is_put_in_words(code, words):
    assert meaning(code) == words


FLIGHT = """
import numpy as np
from farhold.kernels.motion.collocate import fly_shared
from farhold.kernels.motion.deviation import fly_own
from farhold.kernels.motion.follow import follow
from farhold.kernels.motion.integrate import dop853
from farhold.kernels.motion.maps import carry, fly_maps
from farhold.kernels.motion.sampling import spread
from farhold.kernels.motion.totals import totals
start = np.array([1e6, -2e5, 3e5, 0.01, 0.02, -0.03])
db, dv = np.array([1e-6]), np.full((1, 1, 3), 0.1)
sun, earth = np.array([1.495978707e11, 0.0, 0.0]), np.array([7.4798935e10, -1.2955555e11, 0.0])
gm, gm2, rate = np.array([1.327e20, 1.3271e20]), 4.035e14, 1.99e-7
way = sun.reshape(1, 3, 1), 0.0, 1.0, sun - earth, gm, gm2, rate
one, zero = np.ones((1, 1), dtype=np.int64), np.zeros(1, dtype=np.int64)
own = np.empty((1, 6, 1))
fly_own(
    start.reshape(6, 1).copy(), db, np.zeros(1), 3 * one, 86400.0 * one, 0 * one, dv, 0 * one, own, *way, 0.5,
    zero.copy(),
)
alone = np.empty((1, 6))
follow(
    start.reshape(6, 1).copy(), db, 0.0, np.full(1, 259200.0), zero, dv[0], zero, alone, *way,
    np.array([6.957e8, 6.3781e6]), 1e-13, 1e-6,
)
rng = np.random.default_rng(8)
scale = np.array([1e6, 1e6, 1e6, 0.1, 0.1, 0.1])
phi = rng.normal(size=(1, 6, 6)) * scale[:, None] / scale
places, inner = rng.normal(size=(1, 2, 3, 6)) * 1e6 / scale, rng.normal(size=(1, 2, 2, 3, 3)) * 1e9
outer = rng.normal(size=(1, 2, 6, 3)) * 1e9 * scale[:, None] / 1e6
sites = [np.tile(r, (1, 2, 1)) for r in (sun, earth)]
tables = phi, rng.normal(size=(1, 6)) * scale, places, rng.normal(size=(1, 2, 3)), inner, outer, *sites
numbers = []
for closed in (False, True):
    shared, moved, far = np.empty((1, 6, 1)), np.empty(1), np.empty(1)
    fly_shared(
        start.reshape(6, 1).copy(), db, zero, *tables, gm, gm2, closed, 3, zero, dv, zero, shared, moved, far,
    )
    numbers += [*shared.ravel(), *moved, *far]
y = np.zeros((6, 119))
y[np.arange(6), np.arange(6)] = 1.0
names = [(i,) for i in range(7)] + [(i, j) for i in range(7) for j in range(i, 7)]
place = {name: k for k, name in enumerate(names)}
pairs = np.array([(i, j, place[tuple(sorted((i, j)))]) for i in range(7) for j in range(7)])
carry(y, *(table[0] for table in tables), gm, gm2, pairs)
for order in (1, 2, 3):
    mapped = np.empty((1, 6, 1))
    maps = np.ascontiguousarray(y.T)[None]
    fly_maps(start.reshape(6, 1).copy(), db, order, zero, maps, zero, dv, zero, mapped)
    numbers += [*mapped.ravel()]
drawn = np.empty((2, 1, 6))
spread(start[None], np.tril(rng.normal(size=(1, 6, 6))), rng.normal(size=(2, 1, 6)), drawn)
path = np.empty((2, 6))
dop853(np.array([0.4976, 0.866, 0.01, 0.006, -0.008, 0.0]), np.array([0.0, 0.5]), 0.012, 0.0, 1e-12, 1e-12, path)
numbers += [*own.ravel(), *alone.ravel(), *y.ravel(), *drawn.ravel(), *totals(dv), *path[1]]
print(*[float(value).hex() for value in numbers])
"""


def run_flight(**environment):
    """Numbers that the flight gives in a process of its own."""
    done = subprocess.run(
        [sys.executable, "-c", FLIGHT],
        env={**os.environ, **environment},
        capture_output=True,
        text=True,
        check=True,
        timeout=120,
    )
    return np.array([float.fromhex(word) for word in done.stdout.split()])


def test_kernels_give_the_same_numbers_without_compilation():
    # contraction of a product and a sum into one rounding is all that may differ
    compiled, plain = run_flight(), run_flight(NUMBA_DISABLE_JIT="1")
    assert compiled == pytest.approx(plain, rel=1e-12)
