"""What starting the program may cost: nothing that computes is imported before a command runs."""

import ast
import json
import subprocess
import sys
from pathlib import Path

import pytest

import farhold.interfaces.cli as cli

PROBE = """
import json, sys
from farhold.interfaces.cli import main
code = main({words!r})
print(json.dumps([code, sorted({{name.split(".")[0] for name in sys.modules}})]))
"""
HEAVY = {"numpy", "scipy", "numba", "pandas", "pyarrow", "astropy", "pydantic", "rich", "xlsxwriter"}


@pytest.mark.parametrize(
    "words",
    [["--help"], [], ["--version"], ["ledger", "--help"], ["check", "--help"], ["qoute"]],
    ids=["help", "nothing", "version", "group", "command", "unknown"],
)
def test_start_imports_nothing_that_computes(words):
    done = subprocess.run(
        [sys.executable, "-c", PROBE.format(words=words)], capture_output=True, text=True, check=True
    )
    code, modules = json.loads(done.stdout.splitlines()[-1])
    assert code == (2 if words == ["qoute"] else 0)
    assert HEAVY.isdisjoint(modules)
    assert "click" in modules


ROOM = Path(cli.__file__).parent
COMMAND_FILES = sorted(ROOM.glob("*_command.py"))


def imported_modules(path):
    for step in ast.walk(ast.parse(path.read_text())):
        if isinstance(step, ast.ImportFrom):
            yield step.module or ""
            yield from (f"{step.module}.{name.name}" for name in step.names)
        elif isinstance(step, ast.Import):
            yield from (name.name for name in step.names)


@pytest.mark.parametrize("path", COMMAND_FILES, ids=lambda path: path.stem)
def test_command_file_imports_no_other_command(path):
    assert [name for name in imported_modules(path) if name.endswith("_command")] == []


def test_every_command_file_has_its_line_in_the_table():
    assert {path.stem for path in COMMAND_FILES} == {module for module, _ in cli.COMMANDS.values()}
