"""Cold compile of what a quote needs, and the start from the cache: whole processes, fresh kernel caches.

Run: python benchmarks/dynamics/start_up.py. The cold compile is a demo quote with an empty cache less one with a
full cache; the cached start is a process that imports farhold and flies ten nodes for a year.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import common

CASE = Path(__file__).parents[2] / "configs" / "marram.toml"
QUOTE = ["-m", "farhold", "quote", str(CASE), "--to", "wide", "--over", "30 d", "--json"]
FLIGHT = [
    "-c",
    "import numpy as np, farhold\n"
    "farhold.reference('L4', epoch='2035-03-20T00:00:00').fly(np.full((10, 6), 1e-2), [365.25])\n",
]
COLD_S, START_S = 12.0, 2.0
COLD_RUNS, WARM_RUNS = 2, 5


def seconds(words: list[str], cache: str) -> float:
    """Run one process with a kernel cache."""
    begin = time.perf_counter()
    done = subprocess.run(
        [sys.executable, *words], capture_output=True, text=True, env={**os.environ, "FARHOLD_CACHE_DIR": cache}
    )
    if done.returncode:
        raise SystemExit(done.stderr + done.stdout)
    return time.perf_counter() - begin


def main() -> None:
    """Print cold, warm and the difference."""
    print(common.machine())
    rows, found = [], {}
    for name, words in (("quote of the demo", QUOTE), ("flight of ten nodes", FLIGHT)):
        cold, warm = [], []
        for _ in range(COLD_RUNS):
            with tempfile.TemporaryDirectory() as cache:
                cold.append(seconds(words, cache))
                warm += [seconds(words, cache) for _ in range(WARM_RUNS)]
        found[name] = statistics.median(cold), statistics.median(warm)
        rows.append([name, *(f"{t:.2f}" for t in (*found[name], found[name][0] - found[name][1], min(warm)))])
    common.show(["whole process, s", "cold", "cached", "compile", "least cached"], rows)
    cold_s = found["quote of the demo"][0] - found["quote of the demo"][1]
    common.verdict(f"cold compile of a quote under {COLD_S:g} s", cold_s < COLD_S, f"{cold_s:.1f}")
    start_s = found["flight of ten nodes"][1]
    common.verdict(f"cached start under {START_S:g} s", start_s < START_S, f"{start_s:.2f}")


if __name__ == "__main__":
    main()
