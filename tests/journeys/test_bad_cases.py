"""Bad case files: one clear sentence each, exit code 2, whatever is wrong with them."""

from __future__ import annotations

import io
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from farhold.errors import CaseError
from farhold.study.case import load

BASE = """\
schema = 1
epoch = "2035-03-20T00:00:00"
[reference]
point = "L4"
[class.probe]
dry_mass = "9.4 kg"
propellant = "0.30 kg"
specific_impulse = "65 s"
thrust = "20 mN"
[class.hub]
dry_mass = "46 kg"
propellant = "2 kg"
specific_impulse = "210 s"
thrust = "0.5 N"
capacity = 12
link_range = "90 km"
[[swarm]]
class = "probe"
count = 12
prefix = "P"
[formation.near]
rule = "inertial"
[[formation.near.slots]]
class = "probe"
shape = "ring"
radius = "50 km"
count = 12
[formation.far]
rule = "rotating"
[[formation.far.slots]]
file = "far.csv"
[safety]
separation = "200 m"
"""
FAR = "slot,class,x_km,y_km,z_km\n" + "".join(f"f{k},probe,{k}.5,0,{10 * k}\n" for k in range(12))
NAME = "up to 32 of A-Z a-z 0-9 _ . -, beginning with a letter or digit"
MASS = 'a mass in kg, g, mg, t, such as "5 kg"'
PHASES = "deploy hold reshape lose miss regroup retire"
SHAPES = "ball shell ring disk line spiral lattice gaussian"
COLUMNS = "slot, class, x_km, y_km, z_km, node, priority, vn_m_s"
NODES = "node, class, propellant_kg, solar_area_m2, mass_kg"
COUNTED = 'class = "probe"\ncount = 12\nprefix = "P"'
RING = 'radius = "50 km"\ncount = 12'
END = 'separation = "200 m"'


def phase(text: str) -> tuple[str, str]:
    return END, f"{END}\n[[timeline]]\n{text}"


EDITS = {
    # id: (what stands in BASE, what is written instead, the faults)
    "wrong-dimension": (
        '"9.4 kg"',
        '"9.4 km"',
        [f"6: class.probe.dry_mass: got '9.4 km', a length (allowed: {MASS})"],
    ),
    "unknown-unit": (
        '"9.4 kg"',
        '"9.4 kq"',
        [
            "6: class.probe.dry_mass: got '9.4 kq', whose unit 'kq' is not known"
            f" (allowed: {MASS}; did you mean 'kg'?)"
        ],
    ),
    "no-unit": (
        '"9.4 kg"',
        "9.4",
        [f'6: class.probe.dry_mass: 9.4 has no unit (allowed: {MASS}; write "9.4 kg")'],
    ),
    "negative-mass": ('"9.4 kg"', '"-9.4 kg"', ["6: class.probe.dry_mass: got '-9.4 kg' (allowed: above 0)"]),
    "nan": ('"9.4 kg"', "nan", [f"6: class.probe.dry_mass: got nan, which is not finite (allowed: {MASS})"]),
    "nan-text": (
        '"9.4 kg"',
        '"nan kg"',
        [f"6: class.probe.dry_mass: got 'nan kg', which is not finite (allowed: {MASS})"],
    ),
    "no-number": (
        '"9.4 kg"',
        '"heavy"',
        [f"6: class.probe.dry_mass: got 'heavy', which does not begin with a number (allowed: {MASS})"],
    ),
    "missing-key": ('dry_mass = "9.4 kg"\n', "", ["5: class.probe.dry_mass: is missing"]),
    "unknown-key": (
        "[safety]\n",
        "[safety]\nsigma = 3\n",
        ["33: safety.sigma: unknown key 'sigma' (allowed: separation sigmas; did you mean 'sigmas'?)"],
    ),
    "misspelt-key-is-one-fault": (
        "point =",
        "pont =",
        [
            "4: reference.pont: unknown key 'pont' (allowed: amplitude ay az family kind model period phase point"
            " pressure_area span; did you mean 'point'?)"
        ],
    ),
    "unknown-table": (
        "[safety]",
        "[saftey]",
        [
            "32: saftey: unknown key 'saftey' (allowed: class epoch errors formation holding margins operations"
            " rates reference safety schema swarm timeline title trim; did you mean 'safety'?)"
        ],
    ),
    "schema": ("schema = 1", "schema = 7", ["1: schema: got 7 (allowed: 1)"]),
    "no-schema": ("schema = 1\n", "", ["1: schema: is missing (write schema = 1)"]),
    "epoch-form": (
        "2035-03-20T00:00:00",
        "20 March 2035",
        [
            "2: epoch: '20 March 2035' is not an epoch"
            " (allowed: ISO 8601 in TDB from 1900 to 2100, such as 2035-03-20T00:00:00)"
        ],
    ),
    "epoch-date": (
        "2035-03-20",
        "2035-02-30",
        [
            "2: epoch: '2035-02-30T00:00:00' is not a date that exists"
            " (allowed: ISO 8601 in TDB from 1900 to 2100, such as 2035-03-20T00:00:00)"
        ],
    ),
    "unknown-point": ('"L4"', '"L6"', ["4: reference.point: got 'L6' (allowed: L1 L2 L3 L4 L5)"]),
    "kind-key": (
        '"L4"',
        '"L4"\naz = "5 km"',
        [
            "5: reference.az: key 'az' does not go with kind 'equilibrium'"
            " (allowed: point kind model pressure_area)"
        ],
    ),
    "kind-at-point": (
        '"L4"',
        '"L4"\nkind = "lyapunov"\nay = "5 km"',
        ["5: reference.kind: got 'lyapunov' at L4 (allowed: lyapunov at L1 L2 L3)"],
    ),
    "kind-needs-key": (
        '"L4"',
        '"L4"\nkind = "short-period"',
        ["3: reference.amplitude: is missing (allowed: a reference of kind 'short-period' needs amplitude)"],
    ),
    "kind-not-yet": (
        '"L4"',
        '"L4"\nkind = "librating"\nspan = "5 yr"',
        [
            "5: reference.kind: kind 'librating' is not available in this version"
            " (allowed: equilibrium halo lyapunov lissajous short-period long-period)"
        ],
    ),
    "model-not-yet": (
        '"L4"',
        '"L4"\nmodel = "ephemeris"',
        ["5: reference.model: model 'ephemeris' is not available in this version (allowed: model = \"circular\")"],
    ),
    "natural-at-l2": (
        'point = "L4"\n[class.probe]',
        'point = "L2"\n[formation.calm]\nrule = "natural"\nslots = [{ file = "far.csv" }]\n[class.probe]',
        [
            "6: formation.calm.rule: rule 'natural' at L2 is not available in this version"
            " (allowed: rotating or inertial; natural at L3 L4 L5)"
        ],
    ),
    "capacity-alone": (
        'link_range = "90 km"\n',
        "",
        ["15: class.hub.capacity: capacity is given without link_range (allowed: both for a hub, or neither)"],
    ),
    "range-alone": (
        "capacity = 12\n",
        "",
        ["15: class.hub.link_range: link_range is given without capacity (allowed: both for a hub, or neither)"],
    ),
    "coefficient": (
        '"20 mN"\n',
        '"20 mN"\nsolar_coefficient = 2.5\n',
        ["10: class.probe.solar_coefficient: got 2.5 (allowed: 1 to 2)"],
    ),
    "class-name": (
        "[class.hub]",
        '[class."the hub"]',
        [f"10: class.the hub: 'the hub' is not a lawful name (allowed: {NAME})"],
    ),
    "zero-nodes": (
        "count = 12\nprefix",
        "count = 0\nprefix",
        ["19: swarm[1].count: got 0 (allowed: a whole number, 1 to 1000000)"],
    ),
    "text-for-a-count": (
        "count = 12\nprefix",
        'count = "12"\nprefix',
        ["19: swarm[1].count: got '12' (allowed: a whole number, 1 to 1000000)"],
    ),
    "unknown-class": (
        COUNTED,
        COUNTED.replace("probe", "prob"),
        ["18: swarm[1].class: there is no class 'prob' (allowed: probe, hub; did you mean 'probe'?)"],
    ),
    "unlawful-prefix": (
        '"P"',
        '"P/"',
        [f"20: swarm[1].prefix: 'P/' is not a lawful name (allowed: {NAME})"],
    ),
    "prefix-too-long": (
        '"P"',
        f'"{"P" * 31}"',
        [f"20: swarm[1].prefix: makes the name '{'P' * 31}12', which is not lawful (allowed: {NAME})"],
    ),
    "prefix-twice": (
        COUNTED,
        f"{COUNTED}\n[[swarm]]\n{COUNTED}",
        [
            "24: swarm[2].prefix: makes the node name 'P01' a second time (12 in all)"
            " (allowed: names that no other block makes)"
        ],
    ),
    "unknown-shape": (
        '"ring"',
        '"rnig"',
        [f"25: formation.near.slots[1].shape: got 'rnig' (allowed: {SHAPES}; did you mean 'ring'?)"],
    ),
    "no-shape": (
        'shape = "ring"\n',
        "",
        ["23: formation.near.slots[1].shape: is missing (give a shape or a file)"],
    ),
    "key-of-another-shape": (
        RING,
        f"{RING}\nturns = 3",
        [
            "28: formation.near.slots[1].turns: unknown key 'turns'"
            " (allowed: axis centre class count radius seed shape spacing)"
        ],
    ),
    "spacing-without-room": (
        RING,
        f'{RING}\nspacing = "30 km"',
        [
            "28: formation.near.slots[1].spacing: the nearest slots are 25.8819 km apart,"
            " less than the 30 km asked (make the shape larger, or the spacing or the count smaller)"
        ],
    ),
    "separation": (
        '"50 km"',
        '"100 m"',
        [
            "21: formation.near: slots probe-0001 and probe-0002 are 51.8 m apart"
            " (12 slots are too near to another) (allowed: 200 m or more, the [safety] separation)"
        ],
    ),
    "rule": (
        '"inertial"',
        '"inertal"',
        ["22: formation.near.rule: got 'inertal' (allowed: rotating inertial natural; did you mean 'inertial'?)"],
    ),
    "icrf-rotating": (
        'rule = "rotating"',
        'rule = "rotating"\naxes = "icrf"',
        [
            "30: formation.far.axes: axes 'icrf' do not go with rule 'rotating'"
            ' (allowed: rule = "inertial", or no axes)'
        ],
    ),
    "spares-unknown": (
        'rule = "rotating"',
        'rule = "rotating"\nspares = "neer"',
        ["30: formation.far.spares: there is no formation 'neer' (allowed: near, far; did you mean 'near'?)"],
    ),
    "spares-itself": (
        'rule = "rotating"',
        'rule = "rotating"\nspares = "far"',
        ["30: formation.far.spares: formation 'far' names itself (allowed: near)"],
    ),
    "slots-file-missing": (
        '"far.csv"',
        '"fra.csv"',
        ["31: formation.far.slots[1].file: there is no file 'fra.csv' beside the case (did you mean 'far.csv'?)"],
    ),
    "slots-file-ending": (
        '"far.csv"',
        '"far.xls"',
        ["31: formation.far.slots[1].file: got 'far.xls' (allowed: a .csv or .parquet file)"],
    ),
    "phase-unknown": (
        *phase('phase = "holdd"\nfor = "3 d"'),
        [f"35: timeline[1].phase: got 'holdd' (allowed: {PHASES}; did you mean 'hold'?)"],
    ),
    "phase-missing": (*phase('for = "3 d"'), [f"34: timeline[1].phase: is missing (allowed: {PHASES})"]),
    "phase-key-missing": (*phase('phase = "hold"'), ["34: timeline[1].for: is missing"]),
    "phase-target": (
        *phase('phase = "reshape"\nto = "fra"\nover = "3 d"'),
        ["36: timeline[1].to: there is no formation 'fra' (allowed: near, far; did you mean 'far'?)"],
    ),
    "phase-deploy-late": (
        *phase(
            'phase = "hold"\nfor = "3 d"\n[[timeline]]\nphase = "deploy"\nto = "far"\nover = "3 d"\n'
            'release_speed = "1 m/s"\ninterval = "60 s"'
        ),
        ["38: timeline[2].phase: deploy stands after another phase (allowed: deploy first, and once)"],
    ),
    "lost-node-unknown": (
        *phase('phase = "lose"\nnodes = ["P01", "P13"]'),
        [
            "36: timeline[1].nodes[2]: there is no node 'P13' (allowed: P01, P02, P03, P04, P05, P06, P07, P08"
            " and 4 more; did you mean 'P12'?)"
        ],
    ),
    "lost-before-epoch": (
        *phase('phase = "lose"\nnodes = ["P01"]\nat = "2035-01-01"'),
        [
            "37: timeline[1].at: got 2035-01-01T00:00:00, before the case's epoch 2035-03-20T00:00:00"
            " (allowed: the epoch or later)"
        ],
    ),
    "share": (
        END,
        f"{END}\n[rates]\nmissed_burns = 5",
        ['35: rates.missed_burns: 5 has no unit (allowed: a share such as "5 %" or 0.05; write "5 %")'],
    ),
    "share-too-large": (
        END,
        f'{END}\n[rates]\nmissed_burns = "500 %"',
        ['35: rates.missed_burns: got \'500 %\' (allowed: "0 %" to "100 %")'],
    ),
    "gap": (
        END,
        f'{END}\n[errors]\ngaps = [["2035-06-08", "2035-06-01"]]',
        [
            "35: errors.gaps[1]: ends at 2035-06-01T00:00:00, not after its start 2035-06-08T00:00:00"
            " (allowed: a start, then an end after it)"
        ],
    ),
    "margin-kind": (
        END,
        f"{END}\n[margins]\nresidual = 2",
        ["35: margins.residual: got 2 (allowed: a table of keys)"],
    ),
    "toml-quotes": (
        '"9.4 kg"',
        "9.4 kg",
        ["6: cannot be read as TOML: a value has more behind it (a text needs quotes)"],
    ),
    "toml-key-twice": (
        'point = "L4"',
        'point = "L4"\npoint = "L5"',
        ["5: cannot be read as TOML: a key is given twice"],
    ),
    "toml-table-twice": (
        "[safety]",
        "[formation.near]\n[safety]",
        ["32: cannot be read as TOML: the table formation.near is given twice"],
    ),
}


def refused(path: Path) -> str:
    with pytest.raises(CaseError) as caught:
        load(path)
    assert caught.value.exit_code == 2
    return str(caught.value)


def written(folder: Path, text: str = BASE, far: str | bytes = FAR) -> Path:
    (folder / "far.csv").write_bytes(far if isinstance(far, bytes) else far.encode())
    path = folder / "case.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_base_case_is_lawful(tmp_path: Path) -> None:
    assert len(load(written(tmp_path)).nodes) == 12


@pytest.mark.parametrize("edit", EDITS.values(), ids=EDITS.keys())
def test_bad_case_is_refused_in_one_sentence(tmp_path: Path, edit: tuple[str, str, list[str]]) -> None:
    old, new, faults = edit
    assert old in BASE
    text = BASE.replace(old, new, 1)
    assert refused(written(tmp_path, text)) == "\n".join(f"case.toml:{fault}" for fault in faults)


FILES = {
    # id: (far.csv, the faults)
    "empty": ("", ["far.csv: is empty (allowed: a line of column names, then one row or more)"]),
    "header-only": (
        "slot,class,x_km,y_km,z_km\n",
        ["far.csv: holds no rows (allowed: one row or more below the line of column names)"],
    ),
    "column-missing": (
        "slot,class,x_km,y_km\na,probe,1,2\n",
        [f"far.csv: has no column 'z_km' (its columns: slot, class, x_km, y_km) (allowed: {COLUMNS})"],
    ),
    "column-unknown": (
        "slot,class,x_km,y_km,z_km,prio\na,probe,1,2,3,1\n",
        [f"far.csv: unknown column 'prio' (allowed: {COLUMNS}; did you mean 'priority'?)"],
    ),
    "text-for-number": (
        FAR.replace("3.5,0", "east,0"),
        ["far.csv:5: x_km: got 'east' (allowed: a finite number)"],
    ),
    "nan-coordinate": (
        FAR.replace("3.5,0", "3.5,nan"),
        ["far.csv:5: y_km: got 'nan' (allowed: a finite number)"],
    ),
    "cells": (FAR.replace("3.5,0,", "3.5,"), ["far.csv:5: has 4 cells under 5 column names"]),
    "unlawful-slot": (
        FAR.replace("f3", "f 3"),
        [f"far.csv:5: slot: 'f 3' is not a lawful name (allowed: {NAME})"],
    ),
    "slot-twice": (
        FAR.replace("f3", "f2"),
        [
            "case.toml:28: formation.far: slot 'f2' is named 2 times (at far.csv:4, far.csv:5)"
            " (allowed: each name once)"
        ],
    ),
    "class-unknown": (
        FAR.replace("f3,probe", "f3,prob"),
        ["far.csv:5: class: there is no class 'prob' (allowed: hub, probe; did you mean 'probe'?)"],
    ),
    "too-near": (
        FAR.replace("f3,probe,3.5,0,30", "f3,probe,2.5,0.1,20"),
        [
            "case.toml:28: formation.far: slots f2 and f3 are 100 m apart (2 slots are too near to another)"
            " (allowed: 200 m or more, the [safety] separation)"
        ],
    ),
    "velocity-of-a-fixed-slot": (
        "slot,class,x_km,y_km,z_km,vn_m_s\na,probe,1,2,3,0.5\n",
        ["far.csv:2: vn_m_s: a velocity does not go with rule 'rotating' (allowed: empty or 0)"],
    ),
    "pin-unknown": (
        "slot,class,x_km,y_km,z_km,node\na,probe,1,2,3,P99\n",
        ["far.csv:2: node: there is no node 'P99' (allowed: a node of the swarm; did you mean 'P09'?)"],
    ),
    "pin-of-another-class": (
        "slot,class,x_km,y_km,z_km,node\na,hub,1,2,3,P09\n",
        [
            "far.csv:2: node: node 'P09' is of class 'probe', slot 'a' is for 'hub'"
            " (allowed: a node of the slot's class)"
        ],
    ),
    "pin-twice": (
        "slot,class,x_km,y_km,z_km,node\na,probe,1,2,3,P09\nb,probe,2,2,3,P09\n",
        ["far.csv:3: node: node 'P09' is pinned twice, also to 'a' (allowed: one slot)"],
    ),
    "coincident": (
        FAR.replace("f3,probe,3.5,0,30", "f3,probe,2.5,0,20"),
        [
            "case.toml:28: formation.far: slots f2 and f3 are 0 m apart (2 slots are too near to another)"
            " (allowed: 200 m or more, the [safety] separation)"
        ],
    ),
    "not-text": (
        FAR.encode().replace(b"f3", b"\xff3"),
        ["far.csv:5: holds bytes that are not UTF-8 text (allowed: CSV in UTF-8)"],
    ),
}


@pytest.mark.parametrize("edit", FILES.values(), ids=FILES.keys())
def test_bad_slots_file_is_refused_with_its_line(tmp_path: Path, edit: tuple[str | bytes, list[str]]) -> None:
    far, faults = edit
    assert refused(written(tmp_path, far=far)) == "\n".join(faults)


NODE_FILES = {
    "unknown-class": (
        "node,class\nA,probe\nB,prob\n",
        "nodes.csv:3: class: there is no class 'prob' (allowed: probe, hub; did you mean 'probe'?)",
    ),
    "twice": (
        "node,class\nA,probe\nA,hub\n",
        "nodes.csv:3: node: node 'A' is named twice, also at nodes.csv:2 (allowed: each name once)",
    ),
    "no-class": (
        "node\nA\n",
        f"nodes.csv: has no column 'class' (its columns: node) (allowed: {NODES})",
    ),
    "propellant": (
        "node,class,propellant_kg\nA,probe,-1\n",
        "nodes.csv:2: propellant_kg: got -1 (allowed: 0 or more)",
    ),
    "mass": (
        "node,class,propellant_kg,mass_kg\nA,probe,3,2\n",
        "nodes.csv:2: mass_kg: got 2, which leaves -1 kg without the propellant of 3 kg"
        " (allowed: the mass at load, more than the propellant)",
    ),
    "none": (
        "node,class\n",
        "nodes.csv: holds no rows (allowed: one row or more below the line of column names)",
    ),
}


@pytest.mark.parametrize("edit", NODE_FILES.values(), ids=NODE_FILES.keys())
def test_bad_nodes_file_is_refused_with_its_line(tmp_path: Path, edit: tuple[str, str]) -> None:
    nodes, fault = edit
    (tmp_path / "nodes.csv").write_text(nodes)
    assert refused(written(tmp_path, BASE.replace(COUNTED, 'file = "nodes.csv"'))) == fault


@pytest.mark.parametrize("cut", [None, 20, -20], ids=["text", "start", "end"])
def test_damaged_parquet_is_refused(tmp_path: Path, cut: int | None) -> None:
    sink = io.BytesIO()
    pq.write_table(
        pa.table({"slot": ["a"], "class": ["probe"], "x_km": [1.0], "y_km": [2.0], "z_km": [3.0]}), sink
    )
    (tmp_path / "far.parquet").write_bytes(FAR.encode() if cut is None else sink.getvalue()[:cut])
    assert refused(written(tmp_path, BASE.replace("far.csv", "far.parquet"))) == (
        "far.parquet: cannot be read as Parquet: the file is damaged, cut short, or of another kind"
        " (write it again, or give a .csv file)"
    )


def test_missing_case_is_refused_with_the_nearest_file(tmp_path: Path) -> None:
    written(tmp_path)
    path = tmp_path / "cas.toml"
    assert (
        refused(path) == f"{path}: there is no such file (allowed: a case file in TOML; did you mean 'case.toml'?)"
    )


def test_folder_for_a_case_is_refused(tmp_path: Path) -> None:
    assert refused(tmp_path) == (
        f"{tmp_path}: is a folder (allowed: a case file in TOML; name the .toml file in it)"
    )


def test_case_of_other_bytes_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "case.toml"
    path.write_bytes(b'schema = 1\ntitle = "\xff"\n')
    assert refused(path) == "case.toml:2: holds bytes that are not UTF-8 text (allowed: TOML in UTF-8)"


def test_empty_case_names_all_that_is_due(tmp_path: Path) -> None:
    keys = ("schema", "epoch", "reference", "class", "swarm", "formation")
    assert [fault.split(": ")[1] for fault in refused(written(tmp_path, "")).splitlines()] == list(keys)


def test_schema_and_cross_references_are_said_together(tmp_path: Path) -> None:
    text = BASE.replace('"9.4 kg"', '"9.4 m"').replace(COUNTED, COUNTED.replace("probe", "proob"))
    faults = refused(written(tmp_path, text)).splitlines()
    assert [fault.split(": ")[1] for fault in faults] == ["class.probe.dry_mass", "swarm[1].class"]


def test_faults_of_several_tables_are_said_together(tmp_path: Path) -> None:
    text = BASE.replace('"50 km"', '"100 m"').replace(END, f'{END}\n[[timeline]]\nphase = "lose"\nnodes = ["X"]')
    faults = refused(written(tmp_path, text, far=FAR.replace("3.5,0", "x,0"))).splitlines()
    assert [fault.split(": ")[0] for fault in faults] == ["case.toml:21", "far.csv:5", "case.toml:36"]
