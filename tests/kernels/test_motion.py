"""The kernels of motion against slow forms in plain Python, and without compilation."""

import os
import subprocess
import sys

import mpmath
import numpy as np
import pytest

from farhold.kernels.motion.deviation import acceleration, fly_block
from farhold.kernels.motion.integrate import dop853
from farhold.kernels.motion.three_body import derivative
from farhold.kernels.status import HIT_PRIMARY, NOT_FINITE, OK, TOO_MANY_STEPS, meaning

R1 = np.array([1.495978707e11, 0.0, 0.0])
R2 = np.array([7.4798935e10, -1.2955555e11, 0.0])
GM = np.array([1.327e20, 1.3271e20])
GM2 = 4.035e14
RATE = 1.99e-7


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
    acceleration(S, R1, R2, GM, GM2, RATE, db, out)
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


def block(lanes):
    """Arguments of a block of so many lanes at rest that fly one step of a day."""
    shape = (1, lanes)
    return {
        "Y": np.zeros((6, lanes)),
        "db": np.zeros(lanes),
        "steps": np.ones(shape, dtype=np.int64),
        "size": np.full(shape, 86400.0),
        "kick": np.full(shape, -1, dtype=np.int64),
        "dv": np.zeros((1, 3, lanes)),
        "keep": np.zeros(shape, dtype=np.int64),
        "out": np.empty((1, 6, lanes)),
    }


def fly(arguments):
    status = np.zeros(arguments["Y"].shape[1], dtype=np.int64)
    fly_block(*arguments.values(), R1, R2, GM, GM2, RATE, np.array([6.957e8, 6.3781e6]), status)
    return arguments["out"], status


def test_lane_with_fewer_steps_stands_still_meanwhile():
    job = block(3)
    job["Y"][0] = 1e6
    job["steps"][0] = [0, 1, 4]
    out, status = fly(job)
    assert (status == OK).all()
    assert (out[0, :, 0] == [1e6, 0, 0, 0, 0, 0]).all()
    alone = block(1)
    alone["Y"][0] = 1e6
    assert (fly(alone)[0][0, :, 0] == out[0, :, 1]).all()


def test_lane_that_is_not_finite_is_marked_and_kept_apart():
    job = block(2)
    job["Y"][4, 0] = np.nan
    out, status = fly(job)
    assert status.tolist() == [NOT_FINITE, OK]
    assert np.isnan(out[0, :, 0]).all()
    assert np.isfinite(out[0, :, 1]).all()


def test_lane_inside_a_body_is_marked():
    job = block(2)
    job["Y"][:3, 0] = -R2 + [1e6, 0.0, 0.0]
    job["size"][0] = 1e-3
    assert fly(job)[1].tolist() == [HIT_PRIMARY, OK]


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
    ],
)
def test_status_is_put_in_words(code, words):
    assert meaning(code) == words


FLIGHT = """
import numpy as np
from farhold.kernels.motion.deviation import fly_block
from farhold.kernels.motion.integrate import dop853
state = np.array([1e6, -2e5, 3e5, 0.01, 0.02, -0.03]).reshape(6, 1)
one = np.ones((1, 1), dtype=np.int64)
out = np.empty((1, 6, 1))
fly_block(
    state, np.array([1e-6]), 3 * one, 86400.0 * one, 0 * one, np.full((1, 3, 1), 0.1), 0 * one, out,
    np.array([1.495978707e11, 0.0, 0.0]), np.array([7.4798935e10, -1.2955555e11, 0.0]),
    np.array([1.327e20, 1.3271e20]), 4.035e14, 1.99e-7, np.array([6.957e8, 6.3781e6]), np.zeros(1, dtype=np.int64),
)
path = np.empty((2, 6))
start = np.array([0.4976, 0.866, 0.01, 0.006, -0.008, 0.0])
dop853(start, np.array([0.0, 0.5]), 0.012, 0.0, 1e-12, 1e-12, path)
print(*[value.hex() for value in [*out.ravel().tolist(), *path[1].tolist()]])
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
