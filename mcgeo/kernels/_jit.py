"""The one way this package compiles a kernel."""

from __future__ import annotations

import hashlib
import logging
import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
from numba.core.errors import NumbaError

_KERNEL_FOLDER = Path(__file__).parent


def _fingerprint() -> str:
    """Hash of every kernel source and of the compiler's version: numba itself does not notice an edited callee."""
    digest = hashlib.sha256(f"{numba.__version__} {sys.version_info[:2]}".encode())
    for source in sorted(_KERNEL_FOLDER.glob("*.py")):
        digest.update(source.name.encode())
        digest.update(source.read_bytes())
    return digest.hexdigest()[:16]


def cache_folder() -> Path:
    """Folder of the compiled kernels: one per version of the kernel sources, so that a stale one is never met."""
    root = os.environ.get("NUMBA_CACHE_DIR") or os.environ.get("XDG_CACHE_HOME")
    base = Path(root) if root else Path.home() / ".cache"
    return base / "mcgeo" / _fingerprint()


def _writable_cache_folder() -> str | None:
    try:
        folder = cache_folder()
        folder.mkdir(parents=True, exist_ok=True)
    except (OSError, RuntimeError) as fault:
        logging.getLogger("mcgeo").info("kernels are compiled anew in every process: no cache folder (%s)", fault)
        return None
    return str(folder) if os.access(folder, os.W_OK) else None


_CACHE_FOLDER = _writable_cache_folder()


def kernel(function: Callable[..., Any]) -> Any:
    """Compile ``function`` with the options that every kernel shares.

    - ``nogil``: groups of walkers run in threads.
    - ``error_model="numpy"``: a division by zero gives inf as in NumPy and costs no branch.
    - ``fastmath`` only "contract" (fused multiply-add): reordering would break the guards against overflow.
    - no ``parallel``: parallel work is walkers and sweep points, so results do not depend on the thread count.

    The cache folder is set for this decoration only and restored, since it is a setting of the whole process.
    """
    previous = numba.config.CACHE_DIR
    numba.config.CACHE_DIR = _CACHE_FOLDER or previous
    try:
        return numba.njit(
            cache=_CACHE_FOLDER is not None, nogil=True, error_model="numpy", fastmath={"contract"}
        )(function)
    except (NumbaError, RuntimeError):
        return numba.njit(nogil=True, error_model="numpy", fastmath={"contract"})(function)
    finally:
        numba.config.CACHE_DIR = previous
