"""Files that are there whole or not at all, digests, and the lock of a folder."""

from farhold.files.digest import canonical_json, digest_of, sha256_hex
from farhold.files.durable import (
    ASIDE_SUFFIX,
    durable_folder,
    explained,
    refuse_existing,
    sync_folder,
    write_bytes_durably,
)
from farhold.files.lock import FolderLock

__all__ = [
    "ASIDE_SUFFIX",
    "FolderLock",
    "canonical_json",
    "digest_of",
    "durable_folder",
    "explained",
    "refuse_existing",
    "sha256_hex",
    "sync_folder",
    "write_bytes_durably",
]
