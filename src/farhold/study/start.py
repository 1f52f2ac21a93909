"""A ready case to edit: the demo swarm Marram, written into a new folder."""

from __future__ import annotations

import os
from pathlib import Path

from farhold.errors import Fault, OutputExistsError
from farhold.files import durable_folder, refuse_existing, write_bytes_durably

__all__ = ["SAMPLES", "start"]

SAMPLES = ("marram.toml", "wide.csv")
"""Files of the ready case, kept as package data beside this module."""


def start(folder: str | os.PathLike[str], force: bool = False) -> list[Path]:
    """Write the ready case into `folder`.

    Parameters
    ----------
    folder : made if it is not there; its parent must exist
    force : write into a folder that holds something; files of the same names are replaced, others stay

    Returns
    -------
    list of Path, the files written, the case first.

    Raises
    ------
    OutputExistsError
        `folder` is a file, or holds something and `force` is false; nothing is written.
    FarholdError
        The folder cannot be written; nothing is left behind.
    """
    target = Path(folder)
    if target.exists() and not target.is_dir():
        raise OutputExistsError(Fault(str(target), "is a file", "a new or an empty folder"))
    refuse_existing(target, force)
    data = {name: _sample(name) for name in SAMPLES}
    if target.is_dir():
        for name, content in data.items():
            write_bytes_durably(target / name, content)
    else:
        with durable_folder(target) as aside:
            for name, content in data.items():
                (aside / name).write_bytes(content)
    return [target / name for name in SAMPLES]


def _sample(name: str) -> bytes:
    return (Path(__file__).parent / "samples" / name).read_bytes()
