"""On this machine, chunk after chunk; the threads work inside a chunk."""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence

from farhold.study.campaign.job import Done, Engine, Job

__all__ = ["engine"]


class _Local:
    def run(self, job: Job, wanted: Sequence[int], _note: Callable[[str], None]) -> Generator[Done, None, None]:
        for index in wanted:
            yield index, job.perform(index)


def engine(_cluster: str | None) -> Engine:
    """Give the engine."""
    return _Local()
