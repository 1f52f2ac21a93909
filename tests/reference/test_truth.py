"""The full lane against flights in forty digits, tabulated by benchmarks/make_truth.py."""

import hashlib
from pathlib import Path

import numpy as np
import pytest

from farhold.dynamics.circular import SUN_EARTH
from farhold.dynamics.lanes.accuracy import ACCURACIES
from farhold.dynamics.propagate import fly
from farhold.dynamics.reference import make_reference
from farhold.kernels.status import OK

FOLDER = Path(__file__).parent / "truth"
DIGESTS = dict(line.split()[::-1] for line in (FOLDER / "digests.txt").read_text().splitlines())
CASES = sorted(name.removesuffix(".npz") for name in DIGESTS)
HALO = "l2_halo_100_km_180_d"
# the accuracies are promised for 1000 km and a year, that is for an end 40,000 km away; beyond, they scale
PROMISED_AT_M = 4e7


@pytest.fixture(scope="module")
def reference_of(equilibrium, ref_l4):
    """Makes the reference of a table: reference_of(table)."""

    def make(table):
        point, area = str(table["point"]), float(table["pressure_area_m2_kg"])
        if not table["initial_state"].size:
            return equilibrium(point, pressure_area_m2_kg=area)
        return make_reference(
            "halo", point=point, epoch=ref_l4.epoch, pressure_area_m2_kg=area, family="north", az_m=2e8
        )

    return make


@pytest.fixture
def table(name):
    with np.load(FOLDER / f"{name}.npz") as stored:
        return dict(stored)


def flown(reference, table, accuracy, impulse_s=None):
    states = [table["states"], table["output_s"]]
    job = {"excess_beta": table["excess_beta"], "accuracy": accuracy}
    if table["impulse_s"].size:
        when = table["impulse_s"] if impulse_s is None else impulse_s
        job |= {"impulse_s": when, "dv_m_s": table["dv_m_s"]}
    flight = fly(reference, *states, **job)
    assert (flight.status == OK).all()
    assert flight.accurate
    return flight.state


def errors_m(state, table):
    return np.linalg.norm((state - table["truth"])[..., :3], axis=2)


def allowed_m(table, accuracy):
    size = np.linalg.norm(table["truth"][..., :3], axis=2)
    return ACCURACIES[accuracy] * np.maximum(1.0, size / PROMISED_AT_M)


def test_every_table_has_its_digest():
    assert sorted(path.stem for path in FOLDER.glob("*.npz")) == CASES


@pytest.mark.parametrize("name", CASES)
def test_table_is_the_one_that_was_made(name):
    assert hashlib.sha256((FOLDER / f"{name}.npz").read_bytes()).hexdigest() == DIGESTS[f"{name}.npz"]


@pytest.mark.parametrize("name", CASES)
def test_table_was_made_with_the_constants_in_use(table):
    assert table["gm_m3_s2"].tolist() == [SUN_EARTH.gm1_m3_s2, SUN_EARTH.gm2_m3_s2]
    assert float(table["length_m"]) == SUN_EARTH.length_m


@pytest.mark.parametrize("accuracy", list(ACCURACIES))
@pytest.mark.parametrize("name", CASES)
def test_flight_is_the_truth_within_the_accuracy_asked(reference_of, table, accuracy):
    reference = reference_of(table)
    state = flown(reference, table, accuracy)
    assert (errors_m(state, table) <= allowed_m(table, accuracy)).all()
    # rates may be off by what a place is, times a few of the motion's fastest rates
    off = np.linalg.norm((state - table["truth"])[..., 3:], axis=2)
    assert (off <= 5.0 * reference.rate_rad_s * allowed_m(table, accuracy)).all()


@pytest.mark.parametrize("accuracy", list(ACCURACIES))
@pytest.mark.parametrize("name", ["l4_impulses_1_year"])
def test_flight_with_times_of_its_own_is_the_truth_too(reference_of, table, accuracy):
    own = np.tile(table["impulse_s"], (len(table["states"]), 1))
    state = flown(reference_of(table), table, accuracy, own)
    assert (errors_m(state, table) <= allowed_m(table, accuracy)).all()


@pytest.mark.parametrize("name", [HALO])
def test_halo_of_the_table_is_the_halo_in_use(reference_of, table):
    # both in long double, where there is one; a double has 2e-16 of the point's distance
    start = np.array(reference_of(table).provenance["initial_state"], dtype=float)
    assert start == pytest.approx(table["initial_state"].astype(float), abs=1e-15)


@pytest.mark.parametrize("accuracy", ["default", "fine"])
@pytest.mark.parametrize("name", [HALO])
def test_flight_about_a_halo_is_right_to_a_millimetre(reference_of, table, accuracy):
    # the motion grows by some thousand in the 180 days
    assert errors_m(flown(reference_of(table), table, accuracy), table).max() < 1e-3


@pytest.mark.parametrize("name", CASES)
def test_node_at_the_reference_stays_there_exactly(reference_of, table):
    assert (flown(reference_of(table), table, "default")[0] == 0.0).all()
    assert np.abs(table["truth"][0]).max() < 1e-6
