"""Nodes and places without a case."""

import numpy as np
import pytest

from farhold.domain.epoch import DAY_S
from farhold.planning.assignment.pairing import Candidates, Places
from farhold.planning.transfer.linear import LinearTransfer


@pytest.fixture(scope="session")
def linear(ref_l4):
    """The map of 30 d at L4."""
    return LinearTransfer.between(ref_l4, 0.0, 30.0 * DAY_S)


@pytest.fixture(scope="session")
def nodes():
    """Makes candidates: nodes(states, class_name=..., mass_kg=..., isp_s=...)."""

    def build(states, class_name="probe", mass_kg=10.0, isp_s=65.0, excess_beta=0.0):
        n = len(states)
        return Candidates(
            np.array([f"P{k:02d}" for k in range(n)], dtype=np.str_),
            np.broadcast_to(np.asarray(class_name, dtype=np.str_), (n,)).copy(),
            np.asarray(states, dtype=float),
            *(np.broadcast_to(np.asarray(x, dtype=float), (n,)).copy() for x in (excess_beta, mass_kg, isp_s)),
        )

    return build


@pytest.fixture(scope="session")
def places():
    """Makes places: places(states, class_name=..., priority=..., pinned=..., held_by=..., spare=...)."""

    def build(states, class_name="probe", priority=np.nan, pinned=-1, held_by=-1, spare=False):
        m = len(states)
        return Places(
            np.array([f"s{k:02d}" for k in range(m)], dtype=np.str_),
            np.broadcast_to(np.asarray(class_name, dtype=np.str_), (m,)).copy(),
            np.asarray(states, dtype=float),
            np.broadcast_to(np.asarray(priority, dtype=float), (m,)).copy(),
            np.broadcast_to(np.asarray(pinned, dtype=np.int64), (m,)).copy(),
            np.broadcast_to(np.asarray(held_by, dtype=np.int64), (m,)).copy(),
            np.broadcast_to(np.asarray(spare, dtype=bool), (m,)).copy(),
        )

    return build


@pytest.fixture(scope="session")
def price_of(linear):
    """Gives prices (n, m) [m/s] pair by pair from the transition matrix alone: price_of(nodes, places)."""

    def build(nodes, places):
        phi, out = linear.phi, np.empty((len(nodes.name), len(places.name)))
        for i, j in np.ndindex(out.shape):
            pushed = phi @ nodes.state[i] + nodes.excess_beta[i] * linear.response
            first = np.linalg.solve(phi[:3, 3:], places.state[j, :3] - pushed[:3])
            last = places.state[j, 3:] - pushed[3:] - phi[3:, 3:] @ first
            out[i, j] = np.linalg.norm(first) + np.linalg.norm(last)
        return out

    return build
