"""One small reference of each kind that moves, all with pressure, made once."""

import pytest

from farhold.domain.epoch import Epoch
from farhold.dynamics.reference import KINDS, make_reference

EPOCH = Epoch.from_iso("2035-03-20T00:00:00")
ORBITS = {
    "halo": {"point": "L2", "family": "north", "az_m": 2e8},
    "lyapunov": {"point": "L1", "ay_m": 3e8},
    "lissajous": {"point": "L2", "ay_m": 2.5e8, "az_m": 1e8, "span_s": 4e7},
    "short-period": {"point": "L4", "amplitude_m": 1e9},
    "long-period": {"point": "L5", "amplitude_m": 1e6},
}


def make(kind, **options):
    return make_reference(kind, **{"epoch": EPOCH, "pressure_area_m2_kg": 0.026, **ORBITS[kind], **options})


@pytest.fixture(scope="session")
def make_orbit():
    """Makes a reference of a kind with some of its options replaced: make_orbit(kind, az_m=...)."""
    return make


@pytest.fixture(scope="session")
def make_anew():
    """Makes a reference of a kind though it was made before: make_anew(kind)."""
    return lambda kind: KINDS[kind][0](epoch=EPOCH, pressure_area_m2_kg=0.026, **ORBITS[kind])


@pytest.fixture(scope="session")
def orbits():
    """The references by kind."""
    return {kind: make(kind) for kind in ORBITS}


@pytest.fixture(params=ORBITS)
def orbit(request, orbits):
    """Each of the references."""
    return orbits[request.param]


@pytest.fixture(params=[kind for kind in ORBITS if kind != "lissajous"])
def loop(request, orbits):
    """Each of the periodic references."""
    return orbits[request.param]
