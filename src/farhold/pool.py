"""The thread pool over blocks of nodes; compiled kernels release the interpreter lock."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

__all__ = ["run_blocks", "set_threads", "threads"]

_Item = TypeVar("_Item")
_count: int | None = None


def set_threads(count: int | None) -> None:
    """Use `count` threads from now on in this process; None means one per usable core."""
    global _count
    _count = None if count is None else max(1, int(count))


def threads() -> int:
    """Return the number of threads in use."""
    if _count is not None:
        return _count
    if hasattr(os, "sched_getaffinity"):
        return max(1, len(os.sched_getaffinity(0)))
    return os.cpu_count() or 1


def run_blocks(work: Callable[[_Item], None], blocks: Iterable[_Item]) -> None:
    """Call `work` on each block, on all threads; the first exception is raised here."""
    items = list(blocks)
    if threads() == 1 or len(items) < 2:
        for item in items:
            work(item)
        return
    with ThreadPoolExecutor(max_workers=min(threads(), len(items))) as executor:
        for _ in executor.map(work, items):
            pass
