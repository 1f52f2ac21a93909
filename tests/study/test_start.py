"""The ready case that a user starts from."""

from __future__ import annotations

from pathlib import Path

import pytest

from farhold.errors import FarholdError, OutputExistsError
from farhold.study import start as start_module
from farhold.study.case import load
from farhold.study.start import SAMPLES, start

CONFIGS = Path(__file__).parents[2] / "configs"
SHIPPED = Path(start_module.__file__).parent / "samples"


@pytest.mark.parametrize("name", SAMPLES)
def test_shipped_sample_equals_the_config(name: str) -> None:
    assert (SHIPPED / name).read_bytes() == (CONFIGS / name).read_bytes()


def test_start_ships_all_that_is_in_its_folder() -> None:
    assert {path.name for path in SHIPPED.iterdir()} == set(SAMPLES)


@pytest.mark.parametrize("made_before", [False, True])
def test_start_writes_a_case_that_loads(tmp_path: Path, made_before: bool) -> None:
    folder = tmp_path / "new"
    if made_before:
        folder.mkdir()
    written = start(folder)
    assert written == [folder / "marram.toml", folder / "wide.csv"]
    assert sorted(folder.iterdir()) == sorted(written)
    assert len(load(written[0]).nodes) == 976


def test_start_refuses_a_folder_that_holds_something_and_leaves_it(tmp_path: Path) -> None:
    (tmp_path / "mine.txt").write_text("keep")
    with pytest.raises(OutputExistsError) as caught:
        start(tmp_path)
    assert caught.value.exit_code == 2
    assert str(caught.value) == f"{tmp_path}: exists already (--force replaces it, or choose another name)"
    assert [path.name for path in tmp_path.iterdir()] == ["mine.txt"]


def test_start_with_force_replaces_its_own_files_only(tmp_path: Path) -> None:
    (tmp_path / "mine.txt").write_text("keep")
    (tmp_path / "wide.csv").write_text("old")
    start(tmp_path, force=True)
    assert (tmp_path / "mine.txt").read_text() == "keep"
    assert (tmp_path / "wide.csv").read_bytes() == (CONFIGS / "wide.csv").read_bytes()


@pytest.mark.parametrize("force", [False, True])
def test_start_refuses_a_file(tmp_path: Path, force: bool) -> None:
    path = tmp_path / "file"
    path.write_text("mine")
    with pytest.raises(OutputExistsError, match="is a file"):
        start(path, force)
    assert path.read_text() == "mine"


def test_start_without_a_parent_folder_writes_nothing(tmp_path: Path) -> None:
    with pytest.raises(FarholdError, match="does not exist"):
        start(tmp_path / "a" / "b")
    assert list(tmp_path.iterdir()) == []
