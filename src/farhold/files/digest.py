"""Digests of bytes and of plain data."""

from __future__ import annotations

import hashlib
import json
from typing import Any

import numpy as np

from farhold.errors import DomainError, Fault

__all__ = ["canonical_json", "digest_of", "sha256_hex"]


def sha256_hex(data: bytes) -> str:
    """SHA-256 of bytes, 64 hexadecimal digits."""
    return hashlib.sha256(data).hexdigest()


def _plain(value: object) -> object:
    if isinstance(value, np.generic):
        return value.item()
    if isinstance(value, np.ndarray):
        return value.tolist()
    raise TypeError(f"{type(value).__name__} has no canonical form")


def canonical_json(value: Any) -> bytes:
    """Write plain data as JSON in its only form: sorted keys, no spaces, shortest exact floats.

    Raises
    ------
    DomainError
        A number is NaN or infinite, or a value is no plain data (NumPy arrays and scalars are).
    """
    try:
        text = json.dumps(
            value, sort_keys=True, separators=(",", ":"), allow_nan=False, ensure_ascii=False, default=_plain
        )
    except (ValueError, TypeError) as error:
        raise DomainError(
            Fault("digest", f"the data has no canonical form: {error}", "finite numbers, text, lists, tables")
        ) from error
    return text.encode("utf-8", "surrogatepass")


def digest_of(value: Any) -> str:
    """SHA-256 of :func:`canonical_json`: equal for equal content, whatever the order of the keys."""
    return sha256_hex(canonical_json(value))
