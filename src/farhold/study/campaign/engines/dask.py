"""Worker processes through Dask: of this machine, or of a cluster that somebody runs.

A worker writes a finished chunk itself where it shares the study's folder, and hands over its name; else it
hands over the chunk. A lost worker's chunks are given to another. The scheduler keeps the way to make the
payload, so a lost copy of it is made again.
"""

from __future__ import annotations

import contextlib
import logging
import pickle
import re
import warnings
from collections.abc import Callable, Generator, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import dask
import distributed

from farhold import pool
from farhold.errors import CaseError, FarholdError, Fault
from farhold.study.campaign.chunks import Chunk
from farhold.study.campaign.job import Done, Engine, Job

__all__ = ["engine"]

RETRIES, ALLOWED_FAILURES, AHEAD = 3, 10, 4
_CONNECT_S = 20
# Ctrl-C reaches all processes of a terminal; the workers leave it to this one to stop them
_DEAF = "import signal\n\nsignal.signal(signal.SIGINT, signal.SIG_IGN)\n"
_LOCAL = re.compile(r"local:(\d{1,4})")
_ADDRESS = re.compile(r"((tcp|tls|ws|wss|ucx)://)?[\w.\-\[\]:]+:\d{1,5}")


def _open(packed: bytes) -> Job:
    """Make the job on a worker."""
    job: Job = pickle.loads(packed)
    return job


@dataclass(frozen=True, slots=True)
class _Refusal:
    """An error of ours on its way from a worker: it needs no second try there and is raised here."""

    kind: type[FarholdError]
    faults: tuple[Fault, ...]


def _perform(job: Job, index: int) -> Chunk | str | _Refusal:
    """Compute one chunk on a worker; its other cores belong to other workers."""
    pool.set_threads(1)
    try:
        return job.perform_there(index, f"worker {distributed.get_worker().name}")
    except FarholdError as error:
        return _Refusal(type(error), error.faults)


class _Dask:
    def __init__(self, workers: int | None, address: str) -> None:
        self._workers = workers
        self._address = address

    @contextlib.contextmanager
    def _client(self) -> Iterator[distributed.Client]:
        if self._workers is None:
            with self._cluster_at(self._address) as client:
                yield client
            return
        with (
            # a lost worker is expected and mended: what Dask logs about it is no news
            _quiet("distributed"),
            dask.config.set({"distributed.scheduler.allowed-failures": ALLOWED_FAILURES}),
            distributed.LocalCluster(
                n_workers=self._workers,
                threads_per_worker=1,
                processes=True,
                host="127.0.0.1",
                dashboard_address=None,
                memory_limit=None,
                silence_logs=logging.CRITICAL,
                preload=[_DEAF],
            ) as cluster,
            distributed.Client(cluster, set_as_default=False) as client,
        ):
            yield client

    @staticmethod
    @contextlib.contextmanager
    def _cluster_at(address: str) -> Iterator[distributed.Client]:
        try:
            client = distributed.Client(address, timeout=_CONNECT_S, set_as_default=False)
        except (OSError, ValueError) as error:
            hint = "start one there, or use local:N"
            raise FarholdError(Fault("--cluster", f"no scheduler answers at {address}", hint=hint)) from error
        with _quiet("distributed"), client:
            yield client

    def run(self, job: Job, wanted: Sequence[int], note: Callable[[str], None]) -> Generator[Done, None, None]:
        """Yield the chunks as they come; see :class:`farhold.study.campaign.job.Engine`."""
        with self._client() as client:
            workers = len(client.scheduler_info(n_workers=-1)["workers"])
            note(f"{workers} worker{'' if workers == 1 else 's'} at {client.scheduler.address}")
            with warnings.catch_warnings():
                # the payload is meant to lie on the scheduler, which can so send it to a new worker
                warnings.filterwarnings("ignore", "Sending large graph", UserWarning)
                shared = client.submit(_open, pickle.dumps(job), pure=False, retries=RETRIES)
            rest = iter(wanted)
            indices: dict[distributed.Future, int] = {}

            def submit(count: int) -> list[distributed.Future]:
                fresh = []
                for _, index in zip(range(count), rest, strict=False):
                    future = client.submit(_perform, shared, index, pure=False, retries=RETRIES)
                    indices[future] = index
                    fresh.append(future)
                return fresh

            arriving = distributed.as_completed(submit(AHEAD * max(workers, 1)), loop=client.loop)
            for future in arriving:
                index = indices.pop(future)
                result = _result(future, index)
                future.release()
                for fresh in submit(1):
                    arriving.add(fresh)
                yield index, result


def _result(future: distributed.Future, index: int) -> Chunk | str:
    try:
        result: Chunk | str | _Refusal = future.result()
    except (distributed.scheduler.KilledWorker, distributed.client.FutureCancelledError) as error:
        raise FarholdError(
            Fault(
                "--cluster",
                f"chunk {index} was lost with its worker {ALLOWED_FAILURES} times",
                hint="workers may be short of memory: use fewer of them",
            )
        ) from error
    if isinstance(result, _Refusal):
        raise result.kind(result.faults)
    return result


@contextlib.contextmanager
def _quiet(name: str) -> Iterator[None]:
    logger = logging.getLogger(name)
    before = logger.level
    logger.setLevel(logging.CRITICAL)
    try:
        yield
    finally:
        logger.setLevel(before)


def engine(cluster: str | None) -> Engine:
    """Give the engine for ``local:N`` or the address of a scheduler.

    Raises
    ------
    CaseError
        The text is neither.
    """
    text: Any = cluster or ""
    local = _LOCAL.fullmatch(text)
    if local and int(local[1]) > 0:
        return _Dask(int(local[1]), "")
    if not local and not text.startswith("local") and _ADDRESS.fullmatch(text):
        return _Dask(None, text)
    raise CaseError(
        Fault("--cluster", f"got {text!r}", 'local:N with N workers of this machine, or an address "host:8786"')
    )
