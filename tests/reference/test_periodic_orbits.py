"""Published periodic orbits close when flown by the adaptive integrator (check values O1 to O7)."""

import numpy as np
import pytest

from farhold.dynamics.absolute import jacobi_constant, propagate

# mu, state, period, allowed misses in place and velocity, published Jacobi constant (None: none)
ARENSTORF = 0.012277471
CATALOGUE = 3.0542e-6
ORBITS = {
    # O1: Hairer, Norsett, Wanner, Solving Ordinary Differential Equations I, 2nd ed. 1993, p. 129. The
    # orbit passes close to the smaller body twice: a rounding at the start comes back 1e5 times larger
    "arenstorf": (
        ARENSTORF,
        (0.994, 0.0, 0.0, 0.0, -2.00158510637908252240537862224, 0.0),
        17.0652165601579625588917206249,
        (2e-11, 5e-9),
        None,
    ),
    # O2: the same book (from memory)
    "arenstorf-2": (
        ARENSTORF,
        (0.994, 0.0, 0.0, 0.0, -2.0317326295573368357302057924, 0.0),
        11.124340337266085134999734047,
        (2e-11, 5e-9),
        None,
    ),
    # O4: JPL three-body periodic orbit catalogue, Sun-Earth L2 northern halo 1197, with the catalogue's own
    # mu; the multiplier of 1000 turns a rounding of 2e-16, some dozens of them, into 1e-11
    "l2-halo": (
        CATALOGUE,
        (1.0110059685997803, 0.0, 4.5638537751076817e-3, 0.0, -1.1344790710813389e-2, 0.0),
        3.0803024932763416,
        (1e-11, 2e-11),
        3.0007124352932899,
    ),
    # O5, O6: the same catalogue, L1 halo and L1 Lyapunov orbit
    "l1-halo": (
        CATALOGUE,
        (0.98891420553289477, 0.0, 0.0030040412483433019, 0.0, 0.010113524775185567, 0.0),
        3.0530728500125566,
        (1e-11, 2e-11),
        3.0007793700125,
    ),
    "l1-lyapunov": (
        CATALOGUE,
        (0.9919572253872686, 0.0, 0.0, 0.0, -0.011810020232594805, 0.0),
        3.0848099797153212,
        (1e-11, 2e-11),
        3.0008030429632,
    ),
    # O7: D. Grebow, MS thesis, Purdue 2006, Earth-Moon L4 short period; printed to 15 decimals but
    # corrected to 1e-9 only, as its closure in extended precision (2.5e-9) shows
    "l4-short": (
        0.01215058560962404,
        (0.497653463566241, 0.866025403784439, 0.0, 0.006195078418070, -0.008234243375973, 0.0),
        6.582664326977796,
        (3e-9, 3e-9),
        None,
    ),
}

# O3: K. C. Howell 1984, Celestial Mechanics 32, 53, Table I, mu = 0.04: x0, z0, vy0, T/2, C
HOWELL = [
    (0.723268, 0.040000, 0.198019, 1.300177, 3.329168),
    (0.729988, 0.215589, 0.397259, 1.348532, 3.030033),
    (0.753700, 0.267595, 0.399909, 1.211253, 2.937178),
    (0.777413, 0.284268, 0.361870, 1.101099, 2.928754),
    (0.801125, 0.299382, 0.312474, 1.017241, 2.930700),
    (0.817724, 0.313788, 0.271306, 0.978635, 2.929481),
]


@pytest.mark.parametrize("name", ORBITS)
def test_published_orbit_closes_after_its_period(name):
    mu, start, period, allowed, _ = ORBITS[name]
    miss = propagate(start, [0.0, period], mu).state[-1] - start
    assert np.linalg.norm(miss[:3]) < allowed[0]
    assert np.linalg.norm(miss[3:]) < allowed[1]


@pytest.mark.parametrize("name", ORBITS)
def test_jacobi_constant_is_kept_along_the_orbit(name):
    # an integral of the motion; terms up to 2 mu / r = 4 and v2 = 4 near the bodies, 1000 steps of rounding
    mu, start, period, _, _ = ORBITS[name]
    constant = jacobi_constant(propagate(start, np.linspace(0.0, period, 50), mu).state, mu)
    assert np.ptp(constant) < 2e-11


@pytest.mark.parametrize("name", [name for name, orbit in ORBITS.items() if orbit[4] is not None])
def test_jacobi_constant_is_the_published_one(name):
    # printed to 13 decimals or more, of a sum of numbers near 3
    mu, start, _, _, published = ORBITS[name]
    assert jacobi_constant(start, mu) == pytest.approx(published, abs=6e-14)


@pytest.mark.parametrize("row", HOWELL)
def test_halo_of_howell_crosses_the_plane_squarely_after_half_its_period(row):
    # six printed digits, grown by the orbit over half a turn: up to 4e-5 in extended precision
    x, z, vy, half, _ = row
    end = propagate([x, 0.0, z, 0.0, vy, 0.0], [0.0, half], 0.04).state[-1]
    assert abs(end[[1, 3, 5]]).max() < 5e-5


@pytest.mark.parametrize("row", HOWELL)
def test_halo_of_howell_has_the_printed_jacobi_constant(row):
    # six printed digits of place and speed: dC = 2 v dv + ... up to 2e-6
    x, z, vy, _, constant = row
    assert jacobi_constant([x, 0.0, z, 0.0, vy, 0.0], 0.04) == pytest.approx(constant, abs=2e-6)


@pytest.mark.parametrize("name", ORBITS)
def test_orbit_flown_forwards_and_back_returns(name):
    mu, start, period, allowed, _ = ORBITS[name]
    there = propagate(start, [0.0, 0.4 * period], mu).state[-1]
    back = propagate(there, [0.4 * period, 0.0], mu).state[-1]
    assert np.linalg.norm(back[:3] - start[:3]) < 10.0 * allowed[0]


@pytest.mark.parametrize("name", ["l2-halo", "l1-halo", "l1-lyapunov", "l4-short"])
def test_orbit_is_its_own_mirror_image_in_time(name):
    # the motion is unchanged by (y, t) -> (-y, -t): a path flown backwards is the mirror of one flown forwards
    mu, start, period, _, _ = ORBITS[name]
    mirror = np.array([1.0, -1.0, 1.0, -1.0, 1.0, -1.0])
    forwards = propagate(start, [0.0, 0.3 * period], mu).state[-1]
    backwards = propagate(mirror * start, [0.0, -0.3 * period], mu).state[-1]
    assert mirror * backwards == pytest.approx(forwards, abs=1e-12)
