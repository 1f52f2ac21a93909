"""Closed loops of holding, short to write down."""

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S
from farhold.dynamics.circular import lightness
from farhold.planning.holding.loop import Loop, Spacecraft, hold

ERRORLESS = {"rule": "rotating", "policy": "revisit", "start_s": 0.0, "box_m": 1e9}


@pytest.fixture(scope="session")
def make_loop():
    """Makes a loop without errors: make_loop(cadence_d=7.0, fix_d=1.0, span_d=..., **fields of Loop)."""

    def make(*, cadence_d=7.0, fix_d=1.0, span_d=371.0, **fields):
        times = {"cadence_s": cadence_d * DAY_S, "fix_s": fix_d * DAY_S, "span_s": span_d * DAY_S}
        return Loop(**(ERRORLESS | times | fields))

    return make


@pytest.fixture(scope="session")
def held(make_loop):
    """Holds nodes at places (n, 3) [m]: held(reference, places, samples=1, seed=1, ..., **fields of the loop)."""

    def run(reference, place_m, *, samples=1, seed=1, area_m2_kg=0.026, excess_beta=0.0, least_m_s=0.0, **fields):
        place = np.atleast_2d(np.asarray(place_m, dtype=float))
        n = len(place)
        craft = Spacecraft(
            place, np.full(n, lightness(area_m2_kg)), np.full(n, excess_beta), np.full(n, least_m_s)
        )
        return hold(reference, make_loop(**fields), craft, samples, np.random.default_rng(seed))

    return run
