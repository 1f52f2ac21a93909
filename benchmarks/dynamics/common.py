"""What the benchmarks of the dynamics share: one core, fair timing, the truth tables, small tables of text.

Imported before NumPy and numba by each script, so that the libraries see one thread.
"""

from __future__ import annotations

import importlib.metadata
import json
import os
import platform
import resource
import statistics
import subprocess
import sys
import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ[_name] = "1"

# the libraries read these when they are first imported
import numpy as np  # noqa: E402

TRUTH = Path(__file__).parents[2] / "tests" / "reference" / "truth"
ROUNDS = 9


def pin() -> None:
    """Keep this process on one core, the last it may use; no-op where the system offers no such call."""
    if hasattr(os, "sched_setaffinity"):
        os.sched_setaffinity(0, {max(os.sched_getaffinity(0))})


def machine(*packages: str) -> str:
    """Return machine, versions and load, for the head of a table."""
    model = platform.processor() or platform.machine()
    info = Path("/proc/cpuinfo")
    if info.exists():
        names = [line.split(":", 1)[1].strip() for line in info.read_text().splitlines() if "model name" in line]
        model = names[0] if names else model
    versions = [f"Python {platform.python_version()}"]
    for package in ("numpy", "numba", *packages):
        try:
            versions.append(f"{package} {importlib.metadata.version(package)}")
        except importlib.metadata.PackageNotFoundError:
            versions.append(f"{package} absent")
    load = f"; load {os.getloadavg()[0]:.2f}" if hasattr(os, "getloadavg") else ""
    return f"{model}, {os.cpu_count()} cores; {', '.join(versions)}{load}"


def seconds(work: Callable[[], Any]) -> float:
    """Return how long one call takes."""
    begin = time.perf_counter()
    work()
    return time.perf_counter() - begin


def in_turn(works: dict[str, Callable[[], Any]], rounds: int = ROUNDS) -> dict[str, float]:
    """Median seconds of each piece of work; all take turns, so that other load on the machine meets all."""
    taken: dict[str, list[float]] = {name: [] for name in works}
    for _ in range(rounds):
        for name, work in works.items():
            taken[name].append(seconds(work))
    return {name: statistics.median(values) for name, values in taken.items()}


def show(head: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """Print a table, the first column to the left and the others to the right."""
    widths = [max(len(row[k]) for row in (head, *rows)) for k in range(len(head))]
    for row in (head, *rows):
        cells = [
            cell.ljust(w) if k == 0 else cell.rjust(w) for k, (cell, w) in enumerate(zip(row, widths, strict=True))
        ]
        print("  ".join(cells).rstrip())


def verdict(claim: str, holds: bool, found: str) -> None:
    """Print whether a claim of the project holds here."""
    print(f"{'holds' if holds else 'FAILS'}: {claim} (found {found})")


def apart(script: str, *words: str) -> dict[str, Any]:
    """Run a script with some words in a process of its own; returns the JSON of its last line."""
    done = subprocess.run([sys.executable, script, *words], capture_output=True, text=True)
    if done.returncode:
        raise SystemExit(done.stderr + done.stdout)
    result: dict[str, Any] = json.loads(done.stdout.splitlines()[-1])
    return result


class Above:
    """Memory of this process above what it held when this was made [MB]; Linux keeps the peak since then."""

    def __init__(self) -> None:
        self.peak_is_own = False
        try:
            Path("/proc/self/clear_refs").write_text("5")
            self.peak_is_own = True
        except OSError:
            pass
        self.base_mb = self._status_mb("VmRSS")

    def peak_mb(self) -> float:
        """Return the peak so far above the start."""
        return self._status_mb("VmHWM") - self.base_mb

    @staticmethod
    def _status_mb(key: str) -> float:
        status = Path("/proc/self/status")
        if status.exists():
            for line in status.read_text().splitlines():
                if line.startswith(key):
                    return float(line.split()[1]) / 1024.0
        return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def truth_table(name: str) -> dict[str, np.ndarray]:
    """Read one truth table; see benchmarks/make_truth.py."""
    with np.load(TRUTH / f"{name}.npz") as stored:
        return dict(stored)


def swarm(table: dict[str, np.ndarray], n: int) -> np.ndarray:
    """Deviations (n, 6): those of the table first, the rest like them in size."""
    rng = np.random.default_rng(11)
    known = table["states"]
    size = np.linalg.norm(known[1:].reshape(-1, 2, 3), axis=2)
    rest = rng.normal(size=(n - len(known), 2, 3))
    rest *= (size[rng.integers(len(size), size=len(rest))] / np.linalg.norm(rest, axis=2))[:, :, None]
    return np.concatenate([known, rest.reshape(-1, 6)])
