"""What an engine is given to do, and what it gives back."""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Protocol, TypeAlias

from farhold.errors import CaseError
from farhold.files import write_bytes_durably
from farhold.study.campaign.chunks import Chunk, chunk_name, encode
from farhold.study.campaign.folder import CHUNKS, read_plan
from farhold.study.campaign.plan import machine, machine_faults

__all__ = ["Done", "Engine", "Job"]

Done: TypeAlias = tuple[int, Chunk | str]


@dataclass(frozen=True, slots=True, eq=False)
class Job:
    """The chunks of one study, to be computed here or by a worker elsewhere; it can be pickled.

    Attributes
    ----------
    compute, payload : of the campaign
    folder : of the study, absolute; None in memory
    digest : of the plan
    machine : on which the study was begun
    allow_mixed : whether another machine may compute
    """

    compute: Callable[[Any, int], Chunk]
    payload: Any
    folder: str | None
    digest: str
    machine: dict[str, str]
    allow_mixed: bool

    def perform(self, index: int) -> Chunk:
        """Compute chunk `index`."""
        return self.compute(self.payload, index)

    def perform_there(self, index: int, who: str) -> Chunk | str:
        """Compute chunk `index` as a worker: write it where the folder is shared, else hand it over.

        Returns
        -------
        Chunk or str
            The chunk, or the name of its file.

        Raises
        ------
        CaseError
            The worker `who` is another machine than the study was begun on.
        FarholdError
            The chunk cannot be written.
        """
        faults = [] if self.allow_mixed else machine_faults(self.machine, machine(), who)
        if faults:
            raise CaseError(faults)
        chunk = self.perform(index)
        if self.folder is None:
            return chunk
        plan = read_plan(Path(self.folder))
        if plan is None or plan.digest != self.digest:
            return chunk
        data = encode(self.digest, index, chunk)
        name = chunk_name(index, data)
        write_bytes_durably(Path(self.folder) / CHUNKS / name, data)
        return name


class Engine(Protocol):
    """Computes chunks in any order."""

    def run(self, job: Job, wanted: Sequence[int], note: Callable[[str], None], /) -> Generator[Done, None, None]:
        """Yield each wanted index once, with its chunk or the name of the file that holds it.

        Closing the iterator abandons what is not done and frees all that the engine holds.
        """
