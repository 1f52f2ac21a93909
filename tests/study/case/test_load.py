"""What a case resolves to: SI values, defaults, names, the digest."""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from scipy.spatial import cKDTree

from farhold.domain import epoch as epochs
from farhold.domain.margins import Margins
from farhold.domain.node_class import NodeClass
from farhold.errors import CaseError
from farhold.planning.shapes import SHAPES
from farhold.study.case import (
    Deploy,
    Errors,
    Hold,
    Holding,
    Lose,
    Rates,
    Regroup,
    Reshape,
    Retire,
    Safety,
    Trim,
    load,
)
from farhold.study.case.parts.nodes import counted_names

CONFIGS = Path(__file__).parents[3] / "configs"
DAY_S = 86400.0

SMALL = """\
schema = 1
epoch = 2035-03-20T00:00:00
reference = { point = "L4" }
[class.probe]
dry_mass = "9 kg"
propellant = "1 kg"
specific_impulse = "65 s"
thrust = "20 mN"
solar_area = "0.1 m2"
solar_coefficient = 1.5
[class.other]
dry_mass = "4 kg"
propellant = "0 kg"
specific_impulse = "1 min"
thrust = "1 N"
[[swarm]]
class = "probe"
count = 3
prefix = "P"
[[swarm]]
class = "other"
count = 1
prefix = "X"
[formation.a]
rule = "inertial"
[[formation.a.slots]]
file = "a.csv"
"""
SLOTS = "slot,class,x_km,y_km,z_km\ns1,probe,1,0,0\ns2,probe,2,0,0\ns3,probe,3,0,0\ns4,other,4,5,6\n"


def small(folder: Path, text: str = SMALL, **files: str) -> Path:
    path = folder / "case.toml"
    path.write_text(text, encoding="utf-8")
    for name, content in {"a": SLOTS, **files}.items():
        (folder / f"{name}.csv").write_text(content, encoding="utf-8")
    return path


@pytest.mark.parametrize("name", ["marram", "l4_inertial", "l2_wide"])
def test_config_loads_places_every_node_and_keeps_its_separation(name: str) -> None:
    case = load(CONFIGS / f"{name}.toml")
    state = case.initial_state()
    assert (state.slot != "").all()
    for formation in case.formations.values():
        points = formation.slots.position_m
        assert cKDTree(points).query(points, k=2)[0][:, 1].min() >= case.safety.separation_m


def test_every_config_is_loaded_by_the_test_above() -> None:
    assert {path.stem for path in CONFIGS.glob("*.toml")} >= {"marram", "l4_inertial", "l2_wide"}


@pytest.mark.parametrize(
    ("name", "formations"), [("marram", ["huddle", "wide"]), ("l2_wide", ["furled", "net", "coil"])]
)
def test_config_hubs_can_serve_every_member_in_range(name: str, formations: list[str]) -> None:
    case = load(CONFIGS / f"{name}.toml")
    hub = next(one for one in case.classes if one.is_hub)
    assert hub.capacity is not None
    assert hub.link_range_m is not None
    for slots in (case.formations[formation].slots for formation in formations):
        hubs = slots.position_m[slots.class_name == hub.name]
        distance_m, nearest = cKDTree(hubs).query(slots.position_m[slots.class_name != hub.name])
        assert distance_m.max() <= hub.link_range_m
        if formations[0] == "huddle":
            assert len(hubs) * hub.capacity >= nearest.size


def test_configs_show_every_shape() -> None:
    text = "".join(path.read_text(encoding="utf-8") for path in CONFIGS.glob("*.toml"))
    assert [shape for shape in SHAPES if f'shape = "{shape}"' not in text] == []


def test_every_key_of_a_class_reaches_its_record(tmp_path: Path) -> None:
    more = """specific_impulse = "65 s"
impulse_bit = "0.5 mN s"
attitude_per_year = "5 cm/s"
thrust_efficiency = 0.94
sun_cone = "30 deg"
leak_per_year = "1 g"
attitude_thruster = { specific_impulse = "40 s" }
capacity = 80
link_range = "260 km"
"""
    probe = load(small(tmp_path, SMALL.replace('specific_impulse = "65 s"\n', more))).classes[0]
    assert probe == NodeClass(
        "probe", 9.0, 1.0, 65.0, 0.02, 0.5e-3, 0.1, 1.5, 0.05, 0.94, np.radians(30), 1e-3, 40.0, 80, 260e3
    )


def test_marram_resolves_to_the_values_it_states() -> None:
    case = load(CONFIGS / "marram.toml")
    assert case.title == "Marram: solar-wind tomography at L5"
    assert case.epoch == epochs.Epoch.from_iso("2035-03-20")
    assert (case.reference.point, case.reference.kind, case.reference.model) == (
        "L5",
        "equilibrium",
        "circular",
    )
    probe, hub = case.classes
    assert (probe.dry_mass_kg, probe.isp_s, probe.thrust_n, probe.impulse_bit_n_s) == (9.4, 65, 0.02, 0.5e-3)
    assert (hub.capacity, hub.link_range_m) == (80, 260e3)
    assert len(case.nodes) == 976
    assert case.nodes.node[[0, 15, 16, 975]].tolist() == ["H01", "H16", "P0001", "P0960"]
    assert list(case.formations) == ["huddle", "wide"]
    assert case.errors == Errors(1.0, 1e-4, DAY_S, (), 0.0, 1e-10, 0.01, 2e-5, np.radians(1), 0.03, 0.01)
    assert case.margins.contingency_m_s == 0.2
    assert case.burns_per_day == 2000
    assert case.timeline == (
        Deploy("huddle", 40 * DAY_S, 0.3, 60.0),
        Hold(120 * DAY_S),
        Reshape("wide", 30 * DAY_S),
        Lose(("H03",)),
        Regroup(20 * DAY_S),
        Hold(200 * DAY_S),
        Retire(0.5),
    )


def test_marram_probe_reaches_about_20_m_s_by_the_rocket_equation() -> None:
    probe = load(CONFIGS / "marram.toml").classes[0]
    capacity = probe.isp_s * 9.80665 * np.log(1 + probe.propellant_kg / probe.dry_mass_kg)
    assert capacity == pytest.approx(20, rel=0.05)


def test_marram_reshape_is_affordable_by_the_rule_of_two_distances_over_time() -> None:
    case = load(CONFIGS / "marram.toml")
    huddle, wide = (case.formations[name].slots.position_m for name in ("huddle", "wide"))
    dv = 2 * np.linalg.norm(wide - huddle, axis=1) / (30 * DAY_S)
    assert 0.3 < np.median(dv) < 1.0
    assert dv.max() < 2.0


def test_defaults_are_those_of_the_design(tmp_path: Path) -> None:
    case = load(small(tmp_path))
    assert case.title == "case"
    assert case.errors == Errors()
    assert case.errors.execution_magnitude == 0
    assert case.rates == Rates(0.0, 0.0)
    assert case.holding == Holding("box", 2000.0, 7 * DAY_S)
    assert case.trim == Trim((2.0, 10.0, -2.0))
    assert case.safety == Safety(200.0, 3.0)
    assert (case.margins.manoeuvre, case.margins.attitude, case.margins.residual) == (0.05, 1.0, 0.02)
    assert case.margins == Margins()
    assert case.burns_per_day is None
    assert case.timeline == ()


def test_reference_pressure_is_the_count_mean_at_loaded_mass(tmp_path: Path) -> None:
    assert load(small(tmp_path)).reference_pressure_m2_kg == pytest.approx(3 * (1.5 * 0.1 / 10) / 4)
    text = SMALL.replace('"L4" }', '"L4", pressure_area = "0.02 m2/kg" }')
    assert load(small(tmp_path, text)).reference_pressure_m2_kg == 0.02


def test_listed_nodes_override_their_class(tmp_path: Path) -> None:
    text = SMALL.replace('class = "probe"\ncount = 3\nprefix = "P"', 'file = "nodes.csv"')
    nodes = "node,class,propellant_kg,solar_area_m2,mass_kg\nP1,probe,,,\nP2,probe,0.5,0.2,\nP3,probe,0.5,,12\n"
    case = load(small(tmp_path, text, nodes=nodes))
    np.testing.assert_allclose(case.nodes.loaded_kg, [1, 0.5, 0.5, 0])
    np.testing.assert_allclose(case.nodes.dry_mass_kg, [9, 9, 11.5, 4])
    np.testing.assert_allclose(case.nodes.mass_kg, case.nodes.dry_mass_kg + case.nodes.loaded_kg)
    np.testing.assert_allclose(case.nodes.solar_area_m2, [0.1, 0.2, 0.1, 0])


@pytest.mark.parametrize(
    ("count", "last"), [(1, "P01"), (16, "P16"), (100, "P0100"), (960, "P0960"), (10_000, "P010000")]
)
def test_counted_names_have_an_even_number_of_digits(count: int, last: str) -> None:
    names = counted_names("P", count)
    assert names[-1] == last
    assert len({len(name) for name in names}) == 1


def test_slots_of_shapes_are_numbered_through_the_blocks_of_a_class(tmp_path: Path) -> None:
    block = """[[formation.a.slots]]
class = "probe"
shape = "line"
length = "10 km"
count = 2
centre = ["0 km", "{} km", "0 km"]
"""
    text = SMALL.replace('[[formation.a.slots]]\nfile = "a.csv"\n', block.format(0) + block.format(99))
    slots = load(small(tmp_path, text)).formations["a"].slots
    assert slots.slot.tolist() == ["probe-0001", "probe-0002", "probe-0003", "probe-0004"]
    np.testing.assert_allclose(slots.position_m[:, 1], [-5e3, 5e3, 94e3, 104e3])


def test_formation_start_counts_from_the_epoch(tmp_path: Path) -> None:
    text = SMALL.replace('rule = "inertial"', 'rule = "inertial"\nstart = "2035-03-22"\naxes = "icrf"')
    formation = load(small(tmp_path, text)).formations["a"]
    assert (formation.start_s, formation.axes) == (2 * DAY_S, "icrf")


def test_digest_depends_on_content_alone(tmp_path: Path) -> None:
    (tmp_path / "one").mkdir()
    (tmp_path / "two").mkdir()
    first = load(small(tmp_path / "one")).sha256
    assert load(small(tmp_path / "two")).sha256 == first
    assert load(small(tmp_path / "two", a=SLOTS.replace("1,0,0", "1,0,1"))).sha256 != first
    assert load(small(tmp_path / "one", SMALL + "\n")).sha256 != first


def test_windows_line_ends_keep_the_lines(tmp_path: Path) -> None:
    path = small(tmp_path)
    path.write_bytes(SMALL.replace("9 kg", "9 km").replace("\n", "\r\n").encode())
    with pytest.raises(CaseError, match=r"case.toml:5: class.probe.dry_mass: got '9 km'"):
        load(path)


def test_all_faults_are_said_at_once_in_the_order_of_lines(tmp_path: Path) -> None:
    text = (
        SMALL.replace('"9 kg"', '"9 km"')
        .replace('class = "other"', 'class = "othr"')
        .replace('"inertial"', '"still"')
    )
    with pytest.raises(CaseError) as caught:
        load(small(tmp_path, text.replace("count = 3", "count = 0")))
    assert [fault.where for fault in caught.value.faults] == [
        "case.toml:5: class.probe.dry_mass",
        "case.toml:18: swarm[1].count",
        "case.toml:21: swarm[2].class",
        "case.toml:25: formation.a.rule",
    ]


def test_loading_marram_is_quick() -> None:
    load(CONFIGS / "marram.toml")
    began = time.perf_counter()
    load(CONFIGS / "marram.toml")
    assert time.perf_counter() - began < 0.5


def test_importing_the_case_brings_no_heavy_package() -> None:
    heavy = "('astropy', 'numba', 'pandas', 'pyarrow')"
    code = "import farhold.study.case, sys; print([m for m in HEAVY if m in sys.modules])".replace("HEAVY", heavy)
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
