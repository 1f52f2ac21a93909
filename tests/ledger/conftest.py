"""A small swarm of two classes and a book of it."""

import numpy as np
import pytest

from farhold.domain.epoch import Epoch
from farhold.domain.margins import Margins
from farhold.domain.node_class import NodeClass
from farhold.domain.state import SwarmState
from farhold.ledger import Book, Terms

EPOCH = Epoch.from_iso("2035-03-20")


def _swarm(n=6):
    """Two hubs and n - 2 probes, the k-th in slot Sk of `huddle`."""
    probe = NodeClass("probe", 9.4, 0.3, 65.0, 0.02, solar_area_m2=0.09, attitude_m_s_per_year=0.05)
    hub = NodeClass("hub", 46.0, 2.0, 210.0, 0.5, thrust_efficiency=0.94, attitude_isp_s=60.0, capacity=80)
    index = np.array([1, 1] + [0] * (n - 2))
    dry_kg, loaded_kg = np.array([9.4, 46.0])[index], np.array([0.3, 2.0])[index]
    return SwarmState(
        classes=(probe, hub),
        node=np.array([f"H{k}" if k < 2 else f"P{k:05d}" for k in range(n)]),
        class_index=index,
        mass_kg=dry_kg + loaded_kg,
        dry_mass_kg=dry_kg,
        loaded_kg=loaded_kg,
        solar_area_m2=np.full(n, 0.09),
        alive=np.ones(n, dtype=bool),
        formation=np.full(n, "huddle"),
        slot=np.array([f"S{k}" for k in range(n)]),
        since_s=np.zeros(n),
    )


def _terms(state, title="Marram"):
    return Terms.of(state, title=title, epoch=EPOCH, margins=Margins(contingency_m_s=0.2))


@pytest.fixture(scope="session")
def epoch():
    return EPOCH


@pytest.fixture(scope="session")
def make_swarm():
    return _swarm


@pytest.fixture(scope="session")
def make_terms():
    return _terms


@pytest.fixture
def swarm():
    return _swarm()


@pytest.fixture
def book(tmp_path, swarm):
    return Book.create(tmp_path / "book", _terms(swarm), swarm, demand_m_s_yr=1.0)
