"""``drift`` and ``hold`` as they are typed: text, documents, folders, faults and exit codes."""

import json

import pytest
from click.testing import CliRunner

from farhold.interfaces.cli import cli
from farhold.interfaces.cli.text import CAUTION

CASE = """
schema = 1
title = "Tern: [b]a trial[/b] at L4"
epoch = "2035-03-20T00:00:00"
[reference]
point = "L4"
[class.probe]
dry_mass = "9.4 kg"
propellant = "0.30 kg"
specific_impulse = "65 s"
thrust = "20 mN"
impulse_bit = "0.5 mN s"
solar_area = "0.09 m2"
solar_coefficient = 1.3
[[swarm]]
class = "probe"
count = 6
prefix = "P"
[formation.near]
rule = "inertial"
[[formation.near.slots]]
class = "probe"
shape = "ring"
radius = "100 km"
count = 6
[errors]
navigation_position = "1 m"
navigation_velocity = "0.1 mm/s"
release_speed = "1 cm/s"
area_spread = "3 %"
"""
LENGTH = {"drift": "10 d", "hold": "35 d"}
STUDIES = sorted(LENGTH)
PICTURES = {"drift": ["baselines", "drift_fan"], "hold": ["against_continuous", "who_pays"]}
TABLES = {"drift": ["baselines", "displacement", "nodes"], "hold": ["nodes"]}


@pytest.fixture
def case(tmp_path):
    path = tmp_path / "tern.toml"
    path.write_text(CASE)
    return path


@pytest.fixture
def call(case):
    """Runs a study at 80 columns: call("drift", "--seed", 3, code=0)."""

    def run(study, *words, code=0, formation="near", length=None):
        typed = [study, case, "--formation", formation, "--for", length or LENGTH[study], "--samples", 2, *words]
        done = CliRunner(env={"COLUMNS": "80"}).invoke(cli, [str(word) for word in typed])
        assert done.exit_code == code, done.output
        return done

    return run


@pytest.mark.parametrize("study", STUDIES)
def test_json_is_one_document_and_nothing_else(call, study):
    done = call(study, "--json", "--quiet")
    summary = json.loads(done.stdout)
    assert (summary["kind"], summary["nodes"], summary["samples"]) == (study, 6, 2)
    assert summary["case"] == "Tern: [b]a trial[/b] at L4"
    assert done.stderr == ""


@pytest.mark.parametrize("study", STUDIES)
def test_text_fits_eighty_columns_and_carries_the_caution(call, study):
    text = call(study).stdout
    assert max(map(len, text.splitlines())) <= 80
    assert CAUTION in " ".join(text.split())
    assert "Tern: [b]a trial[/b] at L4" in text
    assert "\x1b" not in text


@pytest.mark.parametrize("study", STUDIES)
def test_text_names_seed_samples_and_the_notes(call, study):
    text = " ".join(call(study, "--seed", 41).stdout.split())
    assert "6 nodes, 2 samples, seed 41" in text
    assert "the 99 % quantile rests on 12 draws" in text
    assert "-o DIR keeps tables, pictures and the way to resume" in text


def test_text_of_hold_names_the_worst_off_and_the_continuous_price(call):
    text = call("hold").stdout
    assert all(word in text for word in ("worst off", "continuous", "start-up", "burns", "box", "propellant"))
    assert "Node by node" in text


def test_text_of_drift_names_days_and_the_worst(call):
    text = call("drift").stdout
    assert all(word in text for word in ("leaves box", "baselines", "closest", "Distance from the slot"))
    assert "out of range" not in text


@pytest.mark.parametrize("study", STUDIES)
def test_folder_keeps_tables_and_pictures(call, study, tmp_path):
    kept = tmp_path / "kept"
    call(study, "-o", kept)
    assert sorted(path.stem for path in kept.glob("*.parquet")) == TABLES[study]
    assert sorted(path.stem for path in kept.glob("*.png")) == PICTURES[study]
    assert sorted(path.stem for path in kept.glob("*.svg")) == PICTURES[study]


@pytest.mark.parametrize("study", STUDIES)
def test_folder_that_is_there_is_refused_without_force(call, study, tmp_path):
    kept = tmp_path / "kept"
    first = json.loads(call(study, "-o", kept, "--json", "--quiet").stdout)
    document = json.loads(call(study, "-o", kept, "--json", "--quiet", code=2).stdout)
    assert (document["kind"], document["exit"]) == ("fault", 2)
    again = json.loads(call(study, "-o", kept, "--json", "--quiet", "--force").stdout)
    assert {**again, "seconds": None} == {**first, "seconds": None}


@pytest.mark.parametrize("study", STUDIES)
def test_finished_study_is_shown_again_by_resume(call, study, tmp_path):
    kept = tmp_path / "kept"
    first = json.loads(call(study, "-o", kept, "--json", "--quiet").stdout)
    again = json.loads(call(study, "-o", kept, "--json", "--quiet", "--resume").stdout)
    assert {**again, "seconds": None} == {**first, "seconds": None}


@pytest.mark.parametrize("study", STUDIES)
def test_resume_with_other_inputs_is_refused_by_name(call, study, tmp_path):
    kept = tmp_path / "kept"
    call(study, "-o", kept)
    document = json.loads(call(study, "-o", kept, "--resume", "--seed", 5, "--json", "--quiet", code=2).stdout)
    assert any("seed" in fault["where"] + fault["what"] for fault in document["faults"])


@pytest.mark.parametrize(
    ("words", "where", "hint"),
    [
        ({"formation": "nere"}, "--formation", "did you mean 'near'?"),
        ({"length": "10"}, "--for", None),
        ({"length": "0 d"}, "--for", None),
        ({"length": "10 km"}, "--for", None),
    ],
)
@pytest.mark.parametrize("study", STUDIES)
def test_argument_that_makes_no_sense_is_one_fault_of_exit_2(call, study, words, where, hint):
    document = json.loads(call(study, "--json", "--quiet", code=2, **words).stdout)
    assert document["kind"] == "fault"
    assert [fault["where"] for fault in document["faults"]] == [where]
    assert hint is None or document["faults"][0]["hint"] == hint


@pytest.mark.parametrize(
    ("study", "words", "where"),
    [
        ("hold", ["--policy", "hover"], "--policy"),
        ("hold", ["--samples", "0"], "--samples"),
        ("drift", ["--samples", "0"], "--samples"),
        ("drift", ["--seed", "-1"], "--seed"),
        ("drift", ["--accuracy", "rough"], "--accuracy"),
        ("drift", ["--pair-samples", "many"], "--pair-samples"),
    ],
)
def test_option_out_of_range_is_one_fault_of_exit_2(call, study, words, where):
    document = json.loads(call(study, *words, "--json", "--quiet", code=2).stdout)
    assert [fault["where"] for fault in document["faults"]] == [where]


def test_span_without_a_steady_part_is_refused(call):
    document = json.loads(call("hold", "--json", "--quiet", code=2, length="20 d").stdout)
    assert document["faults"] == [
        {
            "where": "--for",
            "what": "20 d hold no steady part",
            "allowed": "21 d (three decisions) or more",
            "hint": "",
        }
    ]


@pytest.mark.parametrize("study", STUDIES)
def test_nothing_is_written_on_a_fault(call, study, tmp_path):
    kept = tmp_path / "kept"
    call(study, "-o", kept, code=2, formation="nere")
    assert not kept.exists()
