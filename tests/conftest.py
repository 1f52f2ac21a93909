"""Fixtures and settings that all folders share."""

import os

import numpy as np
import pytest
from hypothesis import HealthCheck, settings

from farhold import pool
from farhold.domain.epoch import Epoch
from farhold.domain.formation import Formation, SlotTable
from farhold.dynamics.absolute import propagate
from farhold.dynamics.circular import SUN_EARTH, ThreeBody
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference


def pytest_configure():
    """Compile the kernels once, in one process, before the workers of pytest-xdist start."""
    if "PYTEST_XDIST_WORKER" not in os.environ:
        reference = make("L4")
        fly(reference, np.zeros((1, 6)), [1.0])
        propagate([0.5, 0.5, 0.0, 0.0, 0.0, 0.0], [0.0, 0.1], 1e-6)


settings.register_profile(
    "ci",
    derandomize=True,
    deadline=None,
    max_examples=50,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
settings.load_profile("ci")

EPOCH = Epoch.from_iso("2035-03-20T00:00:00")


def make(point, *, system=SUN_EARTH, pressure_area_m2_kg=0.0):
    return make_reference(
        "equilibrium", point=point, epoch=EPOCH, pressure_area_m2_kg=pressure_area_m2_kg, system=system
    )


@pytest.fixture(scope="session")
def equilibrium():
    """Makes an equilibrium reference: equilibrium(point, system=..., pressure_area_m2_kg=...)."""
    return make


@pytest.fixture(scope="session")
def unit_system():
    """Makes a three-body problem of mass ratio mu whose units are 1: unit_system(mu)."""
    return lambda mu: ThreeBody(1.0 - mu, mu, 1.0)


@pytest.fixture(scope="session")
def ref_l1():
    return make("L1")


@pytest.fixture(scope="session")
def ref_l2():
    return make("L2")


@pytest.fixture(scope="session")
def ref_l4():
    return make("L4")


@pytest.fixture(scope="session")
def ref_l5():
    return make("L5")


@pytest.fixture
def set_threads():
    """Sets the number of threads for one test."""
    before = pool._count
    yield pool.set_threads
    pool.set_threads(before)


@pytest.fixture(scope="session")
def slots_under():
    """Makes a formation of places (m, 3) [m] under a rule: slots_under(rule, position_m)."""

    def form(rule, position_m):
        m = len(position_m)
        table = SlotTable(
            np.array([f"s{k}" for k in range(m)], dtype=np.str_),
            np.full(m, "probe"),
            position_m,
            np.full(m, np.nan),
            np.full(m, "", dtype=np.str_),
            np.zeros(m),
        )
        return Formation("ring", rule, table)

    return form
