"""The public names: few, literal, resolved late, each with a home and a docstring."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import farhold

TREE = ast.parse(Path(farhold.__file__).read_text())


def literal(name):
    for step in TREE.body:
        if isinstance(step, ast.Assign) and ast.unparse(step.targets[0]) == name:
            return ast.literal_eval(step.value)
    raise AssertionError(f"{name} is not assigned")


@pytest.mark.parametrize("name", farhold.__all__)
def test_public_name_is_there_and_says_what_it_does(name):
    assert getattr(farhold, name).__doc__


@pytest.mark.parametrize("name", farhold.__all__)
def test_public_name_lives_where_its_home_says(name):
    home = literal("_HOMES")[name]
    assert getattr(farhold, name).__module__.startswith(f"farhold.{home}")


def test_public_names_are_literal_few_and_in_order():
    names = literal("__all__")
    assert names == farhold.__all__
    assert len(names) == len(set(names)) <= 30
    assert set(names) == set(literal("_HOMES"))
    assert names == sorted(names, key=lambda name: (name.islower(), name))


def test_public_names_are_known_to_type_checkers():
    block = next(step for step in TREE.body if isinstance(step, ast.If))
    known = {alias.name for step in block.body for alias in step.names}
    assert known == set(farhold.__all__)


def test_public_names_are_listed():
    assert dir(farhold) == sorted(farhold.__all__)


def test_unknown_name_is_an_attribute_error():
    with pytest.raises(AttributeError, match="module 'farhold' has no attribute 'quota'"):
        farhold.quota  # noqa: B018 - the look-up is the test


def test_import_alone_loads_nothing_that_computes():
    probe = "import sys, farhold; print([m for m in ('numpy', 'numba', 'pandas', 'astropy') if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


@pytest.mark.parametrize(
    ("name", "code"),
    [
        ("CaseError", 2),
        ("DomainError", 2),
        ("OutputExistsError", 2),
        ("UnaffordableError", 3),
        ("LedgerError", 4),
        ("NoSolutionError", 5),
        ("ConvergenceError", 5),
    ],
)
def test_error_has_its_exit_code(name, code):
    assert getattr(farhold, name).exit_code == code
    assert issubclass(getattr(farhold, name), farhold.FarholdError)
