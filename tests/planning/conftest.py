"""Formations of a few slots, made without a case."""

import numpy as np
import pytest

from farhold.domain.formation import Formation, SlotTable


@pytest.fixture(scope="session")
def formation():
    """Makes a formation of slots (m, 3) [m]: formation(rule, position_m, vn_m_s=..., start_s=..., axes=...)."""

    def build(rule, position_m, *, vn_m_s=0.0, **options):
        place = np.atleast_2d(np.asarray(position_m, dtype=float))
        m = len(place)
        slots = SlotTable(
            np.array([f"s{k}" for k in range(m)], dtype=np.str_),
            np.full(m, "probe"),
            place,
            np.full(m, np.nan),
            np.full(m, "", dtype=np.str_),
            np.broadcast_to(np.asarray(vn_m_s, dtype=float), (m,)).copy(),
        )
        return Formation("ring", rule, slots, **options)

    return build


@pytest.fixture(scope="session")
def cloud():
    """Makes (n, 6) states of places within radius_m and speeds within speed_m_s: cloud(seed, n, radius_m, ...)."""

    def build(seed, n, radius_m, speed_m_s=0.0):
        rng = np.random.default_rng(seed)
        way = rng.normal(size=(2, n, 3))
        way /= np.linalg.norm(way, axis=2, keepdims=True)
        size = rng.uniform(0.2, 1.0, size=(2, n, 1))
        return np.hstack([radius_m * way[0] * size[0], speed_m_s * way[1] * size[1]])

    return build
