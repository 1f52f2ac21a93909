"""The one decorator of all compiled code, and the folder its machine code is kept in.

A cached caller does not notice an edit in another file, so the folder is named by the hash of everything
below ``kernels/``: an edit anywhere in it begins a new, empty folder.
"""

import hashlib
import os
import tempfile

import numba
from numba import njit

__all__ = ["cache_folder", "kernel", "kernels_are_cold"]


def _digest_of_kernels():
    """Return a short hash of all source files below kernels/ and of numba's version, as text."""
    root = os.path.dirname(os.path.abspath(__file__))
    digest = hashlib.sha256(numba.__version__.encode())
    for folder, names, files in os.walk(root):
        names.sort()
        for name in sorted(files):
            if name.endswith(".py"):
                path = os.path.join(folder, name)
                digest.update(os.path.relpath(path, root).encode())
                with open(path, "rb") as source:
                    digest.update(source.read())
    return digest.hexdigest()[:16]


def _writable(folder):
    """Make `folder` if need be and return whether files can be made in it."""
    try:
        os.makedirs(folder, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            return True
    except OSError:
        return False


def _choose_folder():
    """Return the first writable folder: the user's cache, else a temporary one; None if neither."""
    base = os.environ.get("FARHOLD_CACHE_DIR") or os.path.join(
        os.environ.get("XDG_CACHE_HOME") or os.path.join(os.path.expanduser("~"), ".cache"), "farhold"
    )
    name = "kernels-" + _digest_of_kernels()
    uid = os.getuid() if hasattr(os, "getuid") else 0
    for folder in (os.path.join(base, name), os.path.join(tempfile.gettempdir(), f"farhold-{uid}", name)):
        if _writable(folder):
            return folder
    return None


_FOLDER = _choose_folder()
_COLD = _FOLDER is not None and not any(files for _, _, files in os.walk(_FOLDER))


def kernel(function):
    """Compile `function` without the interpreter lock, with IEEE division and contraction, cached on disk."""
    options = {"error_model": "numpy", "fastmath": {"contract", "nsz", "arcp"}, "nogil": True}
    if _FOLDER is None:
        return njit(**options)(function)
    before = numba.config.CACHE_DIR
    numba.config.CACHE_DIR = _FOLDER
    try:
        return njit(cache=True, **options)(function)
    finally:
        numba.config.CACHE_DIR = before


def kernels_are_cold() -> bool:
    """Return whether no compiled code was on disk when this process started: compilation lies ahead."""
    return _FOLDER is None or _COLD


def cache_folder() -> str | None:
    """Return the folder of the compiled code, or None where none can be written."""
    return _FOLDER
