"""What a study declares: what decides its result, how a chunk is computed, how chunks become findings."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any, Generic, TypeVar

import numpy as np
import pandas as pd

from farhold.errors import DomainError, Fault
from farhold.files import canonical_json, digest_of, sha256_hex
from farhold.study.campaign.chunks import Chunk, table_bytes

__all__ = ["Campaign", "Findings", "chunk_rng"]

State = TypeVar("State")


@dataclass(frozen=True, slots=True, eq=False)
class Findings:
    """What a study found.

    Attributes
    ----------
    summary : the JSON document; plain data, every number finite (None where nothing was computed)
    tables : name to table; kept as ``<name>.parquet``
    notes : remarks in plain words
    """

    summary: dict[str, Any]
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)

    @property
    def digest(self) -> str:
        """Digest of all but the seconds it took: equal for findings that are equal to the bit."""
        content = {key: value for key, value in self.summary.items() if key != "seconds"}
        tables = {name: sha256_hex(table_bytes(table)) for name, table in self.tables.items()}
        return digest_of({"summary": content, "tables": tables, "notes": self.notes})


@dataclass(frozen=True, slots=True, eq=False)
class Campaign(Generic[State]):
    """A study in chunks.

    Attributes
    ----------
    study : its name, which is the command's: ``"drift"``
    inputs : plain data that decides the result, nested as wished; ``--resume`` compares it key by key
    seed : of the study, 0 or above
    chunks : how many chunks there are, 1 or above
    payload : what `compute` is given; it can be pickled and follows from `inputs` alone
    compute : ``compute(payload, index)`` gives chunk `index` as name to array or Arrow table. A function of a
        module, without side effects; all its randomness comes from :func:`chunk_rng`
    start : gives the state before the first chunk
    reduce : ``reduce(state, chunk)`` gives the state after one more chunk; always called in the order of index
    finish : ``finish(state)`` gives the findings

    Raises
    ------
    DomainError
        The seed or the number of chunks is out of range, or the inputs are no plain data.
    """

    study: str
    inputs: Mapping[str, Any]
    seed: int
    chunks: int
    payload: Any
    compute: Callable[[Any, int], Chunk]
    start: Callable[[], State]
    reduce: Callable[[State, Chunk], State]
    finish: Callable[[State], Findings]

    def __post_init__(self) -> None:
        if not self.chunks >= 1:
            raise DomainError(Fault("chunks", f"got {self.chunks!r}", "1 or above"))
        if not self.seed >= 0:
            raise DomainError(Fault("seed", f"got {self.seed!r}", "0 or above"))
        canonical_json(dict(self.inputs))


def chunk_rng(seed: int, index: int, *more: int) -> np.random.Generator:
    """Make the generator of chunk `index`: independent of all others, the same wherever it is made.

    Parameters
    ----------
    seed : of the study, 0 or above
    index : of the chunk
    more : further branches within the chunk, such as the number of a sample

    Notes
    -----
    NumPy's SeedSequence with the spawn key (index, *more) (O'Neill's hash, 128 bits).
    """
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(index, *more)))
