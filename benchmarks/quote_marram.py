"""Seconds and memory of the demo quote: cold (empty kernel cache) and warm, whole process.

Run: python benchmarks/quote_marram.py [warm runs]. Bounds of the project: warm under 4 s, cold under 30 s,
under 1.5 GB, on 2 cores.
"""

from __future__ import annotations

import os
import platform
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

CASE = Path(__file__).parents[1] / "configs" / "marram.toml"


def seconds(cache: str) -> float:
    """Price the demo once in a process of its own."""
    begin = time.perf_counter()
    subprocess.run(
        [sys.executable, "-m", "farhold", "quote", str(CASE), "--to", "wide", "--over", "30 d", "--json"],
        check=True,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        env={**os.environ, "FARHOLD_CACHE_DIR": cache},
    )
    return time.perf_counter() - begin


def main() -> None:
    """Print one cold and the median of some warm runs."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 5
    with tempfile.TemporaryDirectory() as cache:
        cold = seconds(cache)
        warm = [seconds(cache) for _ in range(runs)]
    peak_mb = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
    print(f"machine: {os.cpu_count()} cores, {platform.machine()}, Python {platform.python_version()}")
    print(f"cold {cold:.1f} s; warm median {statistics.median(warm):.2f} s of {runs}; peak {peak_mb:.0f} MB")


if __name__ == "__main__":
    main()
