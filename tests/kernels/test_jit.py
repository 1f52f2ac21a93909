"""The folder of the compiled code: named by the sources, and not missed where it cannot be written."""

import os
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from farhold.kernels import jit

KERNELS = Path(jit.__file__).parent
FILES = sorted(str(path.relative_to(KERNELS)) for path in KERNELS.rglob("*.py"))


@pytest.fixture
def copied(tmp_path, monkeypatch):
    """A copy of the kernels that the naming looks at in place of the real ones."""
    folder = tmp_path / "kernels"
    shutil.copytree(KERNELS, folder, ignore=shutil.ignore_patterns("__pycache__"))
    monkeypatch.setattr(jit, "__file__", str(folder / "jit.py"))
    return folder


@pytest.mark.parametrize("name", FILES)
def test_editing_any_kernel_file_changes_the_name_of_the_folder(copied, name):
    before = jit._digest_of_kernels()
    with (copied / name).open("a") as file:
        file.write("\n")
    assert jit._digest_of_kernels() != before


@pytest.mark.parametrize("change", ["new", "renamed"])
def test_a_new_or_renamed_kernel_file_changes_the_name_of_the_folder(copied, change):
    before = jit._digest_of_kernels()
    if change == "new":
        (copied / "motion" / "more.py").write_text("")
    else:
        (copied / "status.py").rename(copied / "states.py")
    assert jit._digest_of_kernels() != before


def test_the_name_of_the_folder_depends_on_the_sources_alone(copied):
    before = jit._digest_of_kernels()
    (copied / "notes.txt").write_text("not a source")
    assert jit._digest_of_kernels() == before
    os.utime(copied / "status.py", (0, 0))
    assert jit._digest_of_kernels() == before


def test_the_folder_is_named_by_the_sources():
    folder = jit.cache_folder()
    assert folder is None or Path(folder).name == f"kernels-{jit._digest_of_kernels()}"


SMALL = """
import numpy as np
from farhold.kernels import jit
from farhold.kernels.motion.three_body import derivative
rates = np.empty(6)
derivative(np.array([0.5, 0.8, 0.0, 0.0, 0.0, 0.0]), 0.1, 0.0, rates)
print(jit.cache_folder())
print(jit.kernels_are_cold())
print(*rates)
"""


def run_small(**environment):
    """Folder, coldness and numbers of a small kernel in a process of its own."""
    done = subprocess.run(
        [sys.executable, "-c", SMALL],
        env={**os.environ, **environment},
        capture_output=True,
        text=True,
        check=True,
        timeout=120,
    )
    folder, cold, numbers = done.stdout.splitlines()
    return folder, cold == "True", np.array([float(x) for x in numbers.split()])


@pytest.fixture
def a_file(tmp_path):
    """A plain file: nobody, not even the administrator, can make a folder below it."""
    path = tmp_path / "occupied"
    path.write_text("")
    return path


def test_folder_that_cannot_be_made_is_replaced_by_a_temporary_one(tmp_path, a_file):
    spare = tmp_path / "spare"
    spare.mkdir()
    folder, cold, numbers = run_small(FARHOLD_CACHE_DIR=str(a_file), TMPDIR=str(spare))
    assert Path(folder).is_relative_to(spare)
    assert cold
    assert np.isfinite(numbers).all()


def test_second_process_finds_the_compiled_code(tmp_path):
    first, second = (run_small(FARHOLD_CACHE_DIR=str(tmp_path)) for _ in range(2))
    assert first[1]
    assert not second[1]
    assert Path(first[0]).parent == tmp_path
    assert (first[2] == second[2]).all()


def test_no_folder_at_all_is_survived(monkeypatch):
    monkeypatch.setattr(jit, "_writable", lambda folder: False)
    assert jit._choose_folder() is None
    monkeypatch.setattr(jit, "_FOLDER", None)
    assert jit.kernels_are_cold()
    assert jit.cache_folder() is None

    @jit.kernel
    def double(x):
        return 2.0 * x

    assert double(21.0) == 42.0
