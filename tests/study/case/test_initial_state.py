"""Where nodes sit before any ledger says so."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from farhold.errors import CaseError
from farhold.study.case import Case, load

HEAD = """\
schema = 1
epoch = "2035-03-20T00:00:00"
reference = { point = "L5" }
class.probe = { dry_mass = "9 kg", propellant = "1 kg", specific_impulse = "65 s", thrust = "20 mN" }
class.hub = { dry_mass = "40 kg", propellant = "2 kg", specific_impulse = "210 s", thrust = "1 N" }
swarm = [{ class = "hub", count = 2, prefix = "H" }, { class = "probe", count = 4, prefix = "P" }]
"""
FORMATIONS = """\
[formation.first]
rule = "rotating"
slots = [{ file = "first.csv" }]
[formation.second]
rule = "inertial"
spares = "shelf"
slots = [{ file = "second.csv" }]
[formation.shelf]
rule = "inertial"
[[formation.shelf.slots]]
class = "probe"
shape = "line"
length = "900 km"
count = 10
"""
TABLES = {
    "first.csv": "slot,class,x_km,y_km,z_km,node\n"
    "a,probe,1,0,0,\nb,hub,2,0,0,H02\nc,probe,3,0,0,P04\nd,hub,4,0,0,\ne,probe,5,0,0,\nf,probe,6,0,0,P01\n",
    "second.csv": "slot,class,x_km,y_km,z_km\na,probe,1,0,0\nb,probe,2,0,0\nc,hub,3,0,0\nd,hub,4,0,0\n",
}


def made(folder: Path, timeline: str = "") -> Case:
    for name, text in TABLES.items():
        (folder / name).write_text(text)
    path = folder / "case.toml"
    path.write_text(HEAD + FORMATIONS + timeline)
    return load(path)


def seats(case: Case, **options: object) -> dict[str, str]:
    state = case.initial_state(**options)  # type: ignore[arg-type]
    return {
        str(node): f"{formation}/{slot}"
        for node, formation, slot in zip(state.node, state.formation, state.slot, strict=True)
    }


def test_kth_node_of_a_class_takes_its_kth_slot_and_pins_hold(tmp_path: Path) -> None:
    assert seats(made(tmp_path)) == {
        "H01": "first/d",
        "H02": "first/b",
        "P01": "first/f",
        "P02": "first/a",
        "P03": "first/e",
        "P04": "first/c",
    }


def test_left_over_nodes_go_to_the_spares(tmp_path: Path) -> None:
    placed = seats(made(tmp_path), formation="second")
    assert placed["P02"] == "second/b"
    assert placed["P03"] == "shelf/probe-0001"
    assert placed["P04"] == "shelf/probe-0002"


@pytest.mark.parametrize(
    ("timeline", "name"),
    [
        ("", "first"),
        ('[[timeline]]\nphase = "reshape"\nto = "second"\nover = "9 d"\n', "second"),
        ('[[timeline]]\nphase = "hold"\nfor = "9 d"\n', "first"),
    ],
)
def test_opening_formation_is_the_first_phases_target(tmp_path: Path, timeline: str, name: str) -> None:
    case = made(tmp_path, timeline)
    assert case.opening_formation == name
    assert case.initial_state().formation[0] == name


def test_state_carries_the_load(tmp_path: Path) -> None:
    state = made(tmp_path).initial_state()
    np.testing.assert_allclose(state.mass_kg, [42, 42, 10, 10, 10, 10])
    np.testing.assert_allclose(state.loaded_kg, [2, 2, 1, 1, 1, 1])
    assert state.alive.all()
    assert not state.since_s.any()


def test_node_without_a_place_is_named(tmp_path: Path) -> None:
    case = made(tmp_path)
    with pytest.raises(CaseError) as caught:
        case.initial_state("shelf")
    assert caught.value.exit_code == 2
    assert str(caught.value) == (
        "formation.shelf: 2 of 6 nodes have no slot of their class: H01, H02 (allowed: a slot for every node;"
        ' add slots, take away nodes, or name a formation for the rest with spares = "...")'
    )
    placed = seats(case, formation="shelf", allow_unplaced=True)
    assert placed["H01"] == "/"
    assert placed["P04"] == "shelf/probe-0004"


def test_unknown_formation_is_refused_with_the_nearest(tmp_path: Path) -> None:
    with pytest.raises(CaseError) as caught:
        made(tmp_path).formation("secnd", "--to")
    assert str(caught.value) == (
        "--to: there is no formation 'secnd' (allowed: first, second, shelf; did you mean 'second'?)"
    )
