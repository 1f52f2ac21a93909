"""A small artificial study: sums, a histogram and a table of random numbers."""

import os
import signal
import time
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa

from farhold.errors import DomainError, Fault
from farhold.study.campaign import Campaign, Findings, chunk_rng
from farhold.study.campaign.histogram import Histogram


def compute(payload, index):
    """Draw numbers; `payload` may ask for a pause, for a mark of each call, or for the death of a worker."""
    if payload.get("marks"):
        Path(payload["marks"], f"{index}-{os.getpid()}-{time.monotonic_ns()}").touch()
    time.sleep(payload.get("pause_s", 0.0))
    fuse = payload.get("fuse")
    if fuse and index == payload["dies_at"] and Path(fuse).exists():
        Path(fuse).unlink()
        os.kill(os.getpid(), signal.SIGKILL)
    if payload.get("always") and index == 3:
        os.kill(os.getpid(), signal.SIGKILL)
    if payload.get("unlawful"):
        raise DomainError(Fault("slots", f"chunk {index} is not lawful"))
    values = chunk_rng(payload["seed"], index).rayleigh(1.0, payload["size"])
    seen = Histogram.log(1e-3, 10.0, 0.01)
    seen.add(values)
    rows = pa.table({"chunk": [index, index], "value": values[:2]})
    return {"sum": np.array(values.sum()), "first": values[:3], "rows": rows, **seen.to_arrays("seen")}


def start():
    return {"sum": 0.0, "order": [], "rows": [], "seen": Histogram.log(1e-3, 10.0, 0.01)}


def reduce(state, chunk):
    # neither associative nor commutative: another order gives other bits
    state["sum"] = state["sum"] * 1.1 + float(chunk["sum"])
    state["rows"].append(chunk["rows"].to_pandas())
    state["order"].append(int(chunk["rows"]["chunk"][0].as_py()))
    state["seen"].add_arrays(chunk, "seen")
    return state


def finish(state):
    summary = {
        "kind": "artificial",
        "schema": 1,
        "sum": state["sum"],
        "order": state["order"],
        "median": state["seen"].quantile(0.5).value,
        "count": state["seen"].count,
    }
    return Findings(summary, {"rows": pd.concat(state["rows"], ignore_index=True)}, ["made of random numbers"])


def artificial(chunks=6, seed=7, size=50, options=None, **payload):
    """Make the study; what is in `payload` only disturbs it."""
    inputs = {"size": size, "case_sha256": "ab" * 32, "options": {"policy": "box", **(options or {})}}
    full = {"seed": seed, "size": size, **payload}
    return Campaign("artificial", inputs, seed, chunks, full, compute, start, reduce, finish)
