"""The house rules: sizes, floors, one compiler, no printing, no notes to self."""

import ast
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

import farhold

ROOT = Path(__file__).parents[2]
SOURCE = Path(farhold.__file__).parent
FILES = sorted(SOURCE.rglob("*.py"))
FOLDERS = sorted({path.parent for path in FILES})
MOST_LINES, MOST_FILES, MOST_FUNCTION_LINES = 400, 12, 100
ROOMS = {
    "dynamics/reference",
    "interfaces/cli",
    "interfaces/export",
    "kernels/motion/perturbations",
    "planning/assignment/objectives",
    "planning/holding/policies",
    "planning/shapes",
    "study",
    "study/case",
}
CONTRACTS = tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["importlinter"]["contracts"]


def named(path):
    return path.relative_to(SOURCE).as_posix()


def calls(path):
    """Names called or used as decorators in a file."""
    for step in ast.walk(ast.parse(path.read_text())):
        if isinstance(step, ast.Call):
            yield ast.unparse(step.func)
        elif isinstance(step, ast.FunctionDef):
            yield from (ast.unparse(one) for one in step.decorator_list)


def imports(path):
    for step in ast.walk(ast.parse(path.read_text())):
        if isinstance(step, ast.ImportFrom):
            yield step.module or ""
        elif isinstance(step, ast.Import):
            yield from (name.name for name in step.names)


@pytest.mark.parametrize("path", FILES, ids=named)
def test_file_is_short_enough_to_read(path):
    assert len(path.read_text().splitlines()) <= MOST_LINES


@pytest.mark.parametrize("folder", [f for f in FOLDERS if named(f) not in ROOMS], ids=named)
def test_folder_holds_few_files(folder):
    assert len(list(folder.glob("*.py"))) <= MOST_FILES


@pytest.mark.parametrize("path", FILES, ids=named)
def test_file_has_no_function_that_nobody_can_read(path):
    steps = ast.walk(ast.parse(path.read_text()))
    long = [
        step.name
        for step in steps
        if isinstance(step, ast.FunctionDef) and step.end_lineno - step.lineno >= MOST_FUNCTION_LINES
    ]
    assert long == []


@pytest.mark.parametrize("path", FILES, ids=named)
def test_file_says_what_it_is_for(path):
    assert ast.get_docstring(ast.parse(path.read_text()))


@pytest.mark.parametrize("path", FILES, ids=named)
def test_file_has_no_note_to_self(path):
    assert not re.search(r"\b(TODO|FIXME|XXX|HACK)\b", path.read_text())


@pytest.mark.parametrize("path", [p for p in FILES if named(p) != "kernels/jit.py"], ids=named)
def test_only_one_file_knows_the_compiler(path):
    used = {name.split(".")[-1] for name in calls(path)}
    assert not used & {"njit", "jit", "vectorize", "guvectorize", "cfunc"}


@pytest.mark.parametrize("path", FILES, ids=named)
def test_nothing_prints_on_its_own(path):
    assert "print" not in set(calls(path))


@pytest.mark.parametrize("path", FILES, ids=named)
def test_nothing_seeds_the_shared_generator(path):
    assert not {"np.random.seed", "random.seed"} & set(calls(path))


@pytest.mark.parametrize("path", FILES, ids=named)
def test_nothing_reaches_for_the_network(path):
    heads = {name.split(".")[0] for name in imports(path)}
    assert not heads & {"requests", "urllib", "http", "ssl", "ftplib", "aiohttp", "httpx"}
    # the lock asks for the name of this host, nothing more
    assert not {"socket.socket", "socket.create_connection"} & set(calls(path))


@pytest.mark.parametrize("path", [p for p in FILES if named(p).split("/")[:2] != ["study", "case"]], ids=named)
def test_only_the_case_knows_pydantic(path):
    assert "pydantic" not in {name.split(".")[0] for name in imports(path)}


@pytest.mark.parametrize("path", [p for p in FILES if named(p).startswith("ledger/")], ids=named)
def test_ledger_knows_no_dynamics(path):
    floors = {name.split(".")[1] for name in imports(path) if name.startswith("farhold.")}
    assert not floors & {"dynamics", "kernels", "planning", "study", "interfaces"}


def test_every_package_and_module_has_its_floor():
    floors = next(one for one in CONTRACTS if one["name"].startswith("floors"))
    given = {name.strip() for layer in floors["layers"] for name in layer.split("|")}
    here = {path.stem if path.suffix else path.name for path in SOURCE.iterdir() if path.name[0] not in "._"}
    assert here - given - {"py"} == set()
    assert given - here == set()
    assert floors["exhaustive"] is True


@pytest.mark.parametrize("contract", CONTRACTS, ids=lambda one: one["name"])
def test_contract_has_no_exception(contract):
    assert not {"ignore_imports", "unmatched_ignore_imports_alerting"} & set(contract)


def test_imports_keep_every_contract():
    done = subprocess.run(
        [sys.executable, "-c", "from importlinter.cli import lint_imports; raise SystemExit(lint_imports())"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout
    assert f"Contracts: {len(CONTRACTS)} kept, 0 broken" in done.stdout


@pytest.mark.parametrize("path", [*FILES, *sorted((ROOT / "configs").iterdir())], ids=lambda path: path.name)
def test_file_names_no_path_of_the_machine_it_was_written_on(path):
    assert not re.search(r"/(work|home|root|Users)/", path.read_text())
