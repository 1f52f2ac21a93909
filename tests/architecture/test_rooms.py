"""The rooms: every choice is one file and one line in a literal table, with a label and a sample."""

import ast
import tomllib
from pathlib import Path

import pytest

import farhold
from farhold.dynamics.reference import KINDS
from farhold.interfaces.cli import COMMANDS
from farhold.interfaces.export import EXPORTS
from farhold.planning.assignment.objectives import OBJECTIVES
from farhold.planning.shapes import SHAPES

ROOT = Path(__file__).parents[2]
SOURCE = Path(farhold.__file__).parent
LABELS = {
    **{f"reference {name}": label for name, (_, label) in KINDS.items()},
    **{f"command {name}": label for name, (_, label) in COMMANDS.items()},
    **{f"export {name}": label for name, (*_, label) in EXPORTS.items()},
    **{f"objective {name}": one.label for name, one in OBJECTIVES.items()},
    **{f"shape {name}": one.label for name, one in SHAPES.items()},
}
TABLES = {
    "dynamics/reference": ("KINDS", KINDS),
    "interfaces/cli": ("COMMANDS", COMMANDS),
    "interfaces/export": ("EXPORTS", EXPORTS),
    "planning/assignment/objectives": ("OBJECTIVES", OBJECTIVES),
    "planning/shapes": ("SHAPES", SHAPES),
}


def texts(folder, ending):
    """All files below a folder as one text."""
    return "\n".join(path.read_text() for path in sorted((ROOT / folder).rglob(f"*{ending}")))


def shapes_of_configs():
    for path in sorted((ROOT / "configs").glob("*.toml")):
        for formation in tomllib.loads(path.read_text())["formation"].values():
            yield from (block["shape"] for block in formation["slots"] if "shape" in block)


@pytest.mark.parametrize("label", LABELS.values(), ids=LABELS)
def test_choice_has_a_label_of_one_line(label):
    assert 5 < len(label) <= 80
    assert "\n" not in label


def test_labels_differ():
    assert len(set(LABELS.values())) == len(LABELS)


@pytest.mark.parametrize(("room", "name", "table"), [(room, *pair) for room, pair in TABLES.items()], ids=TABLES)
def test_table_of_a_room_is_literal(room, name, table):
    # no registration at import, no comprehension: what can be chosen is to be read in one place
    tree = ast.parse((SOURCE / room / "__init__.py").read_text())
    found = [
        step.value
        for step in tree.body
        if isinstance(step, ast.AnnAssign) and isinstance(step.target, ast.Name) and step.target.id == name
    ]
    assert len(found) == 1
    assert [ast.literal_eval(key) for key in found[0].keys] == list(table)


@pytest.mark.parametrize("room", ["planning/assignment/objectives", "planning/shapes"])
def test_room_has_one_file_per_choice(room):
    names = {name.replace("-", "_") for name in TABLES[room][1]}
    assert {path.stem for path in (SOURCE / room).glob("*.py")} == names | {"__init__"}


@pytest.mark.parametrize("room", TABLES)
def test_files_of_a_room_do_not_know_each_other(room):
    package = "farhold." + room.replace("/", ".")
    choices = {"planning/assignment/objectives", "planning/shapes", "dynamics/reference"}
    files = [path for path in (SOURCE / room).glob("*.py") if path.stem != "__init__" and room in choices]
    known = [
        (path.name, step.module)
        for path in files
        for step in ast.walk(ast.parse(path.read_text()))
        if isinstance(step, ast.ImportFrom) and (step.module or "").startswith(package)
    ]
    assert known == []


@pytest.mark.parametrize("shape", SHAPES)
def test_shape_appears_in_a_config(shape):
    assert shape in set(shapes_of_configs())


@pytest.mark.parametrize("objective", OBJECTIVES)
def test_objective_knows_its_own_name_and_is_tested(objective):
    assert OBJECTIVES[objective].name == objective
    assert objective in texts("tests/planning", ".py") + texts("tests/study", ".py")


@pytest.mark.parametrize("kind", KINDS)
def test_reference_kind_appears_in_a_config_or_is_the_default(kind):
    assert kind == "equilibrium" or f'kind = "{kind}"' in texts("configs", ".toml")
