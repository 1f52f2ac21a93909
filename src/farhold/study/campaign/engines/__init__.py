"""Where the chunks of a study are computed: one file per engine, one line each in the literal table below."""

from __future__ import annotations

from collections.abc import Callable
from importlib import import_module

from farhold.errors import FarholdError, Fault
from farhold.study.campaign.job import Engine

__all__ = ["ENGINES", "engine_for"]

ENGINES: dict[str, tuple[str, str]] = {
    "local": ("local", "This machine: chunk after chunk, all threads inside a chunk."),
    "dask": ("dask", "Worker processes, of this machine or a cluster, through Dask."),
}


def engine_for(cluster: str | None) -> Engine:
    """Give the engine that ``--cluster`` asks for; None is this machine.

    Parameters
    ----------
    cluster : ``local:N`` for N workers on this machine, or the address of a scheduler

    Raises
    ------
    CaseError
        The text is neither.
    FarholdError
        The packages that the engine needs are not installed.
    """
    name = "local" if cluster is None else "dask"
    try:
        module = import_module(f"{__name__}.{ENGINES[name][0]}")
    except ModuleNotFoundError as error:
        if (error.name or "").startswith("farhold"):
            raise
        raise FarholdError(
            Fault(
                "--cluster",
                f"needs the package {error.name!r}, which is not installed",
                hint='python -m pip install "farhold[cluster]"',
            )
        ) from None
    make: Callable[[str | None], Engine] = module.engine
    return make(cluster)
