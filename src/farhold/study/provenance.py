"""Where a result came from: versions, machine and inputs, enough to make it again."""

from __future__ import annotations

import platform
from functools import lru_cache
from importlib.metadata import version
from typing import Any

__all__ = ["provenance"]


@lru_cache(maxsize=1)
def _machine() -> dict[str, str]:
    """Versions and processor, which decide the last bit of a result."""
    cpu = platform.processor() or platform.machine()
    try:
        with open("/proc/cpuinfo", encoding="utf-8") as lines:
            cpu = next((line.split(":", 1)[1].strip() for line in lines if line.startswith("model name")), cpu)
    except OSError:
        pass
    return {
        "farhold": version("farhold"),
        "numpy": version("numpy"),
        "numba": version("numba"),
        "cpu": cpu,
    }


def provenance(case_sha256: str, seed: int, ledger_head: str | None) -> dict[str, Any]:
    """Give the provenance block of a document."""
    machine = _machine()
    return {
        "farhold": machine["farhold"],
        "case_sha256": case_sha256,
        "ledger_head": ledger_head,
        "seed": seed,
        "numpy": machine["numpy"],
        "numba": machine["numba"],
        "cpu": machine["cpu"],
    }
