"""The one way this package compiles kernels, and where it keeps them compiled."""

from __future__ import annotations

import contextlib
import hashlib
import logging
import os
import pickle
import shutil
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
from numba.core import event
from numba.core.caching import FunctionCache, IndexDataCacheFile

_KERNEL_FOLDER = Path(__file__).parent
_LOG = logging.getLogger("mcgeo.kernels")
_DIGEST_SIZE = 32
_DAY = 86400.0
# Folders of other versions of the sources are removed when nobody has used them for this long.
_KEPT_FOR = 30 * _DAY
_FOLDER_NAME_LENGTH = 16


def _fingerprint() -> str:
    """Hash of every kernel source and of the compiler's version: numba itself does not notice an edited callee."""
    digest = hashlib.sha256(f"{numba.__version__} {sys.version_info[:2]}".encode())
    for source in sorted(_KERNEL_FOLDER.glob("*.py")):
        digest.update(source.name.encode())
        digest.update(source.read_bytes())
    return digest.hexdigest()[:_FOLDER_NAME_LENGTH]


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
        _LOG.info("kernels are compiled anew in every process: no cache folder (%s)", fault)
        return None
    if not os.access(folder, os.W_OK):
        return None
    with contextlib.suppress(OSError):
        _mark_used(folder, time.time())
    return str(folder)


def _mark_used(folder: Path, now: float) -> None:
    """Date the folder, once a day, and then remove its neighbours that nobody has dated for a month."""
    marker = folder / "last_used"
    if marker.exists() and now - marker.stat().st_mtime < _DAY:
        return
    marker.touch()
    for other in folder.parent.iterdir():
        # Only what a version of this program can have made.
        if other == folder or len(other.name) != _FOLDER_NAME_LENGTH or set(other.name) - set("0123456789abcdef"):
            continue
        dated = other / "last_used" if (other / "last_used").exists() else other
        if now - dated.stat().st_mtime > _KEPT_FOR:
            shutil.rmtree(other, ignore_errors=True)


_CACHE_FOLDER = _writable_cache_folder()


class _CheckedFile(IndexDataCacheFile):
    """Compiled code behind its own hash: a damaged file must not be run as machine code."""

    def _load_data(self, name: str) -> Any:
        data = Path(self._data_path(name)).read_bytes()
        if hashlib.sha256(data[_DIGEST_SIZE:]).digest() != data[:_DIGEST_SIZE]:
            raise pickle.UnpicklingError(f"{name} is damaged")
        return pickle.loads(data[_DIGEST_SIZE:])

    def _save_data(self, name: str, data: Any) -> None:
        dumped = self._dump(data)
        with self._open_for_write(self._data_path(name)) as file:
            file.write(hashlib.sha256(dumped).digest() + dumped)


class _HealingCache(FunctionCache):
    """numba's cache of one kernel, which may be damaged or vanish at any time: then the kernel is compiled anew."""

    def __init__(self, function: Callable[..., Any]) -> None:
        super().__init__(function)
        self._cache_file = _CheckedFile(
            self._cache_path, self._impl.filename_base, self._impl.locator.get_source_stamp()
        )

    def load_overload(self, signature: Any, target: Any) -> Any:
        try:
            found = super().load_overload(signature, target)
        except Exception as fault:  # whatever unpickling a damaged file may raise
            _LOG.info("compiled kernel %s is made anew (%r)", self._name, fault)
            found = None
            with contextlib.suppress(OSError):
                self.flush()
        if found is None:
            _announce()
        return found

    def save_overload(self, signature: Any, compiled: Any) -> None:
        # A full disk or a folder made read-only meanwhile: the kernel works, only the next process compiles again.
        with contextlib.suppress(OSError):
            super().save_overload(signature, compiled)


def _announce() -> None:
    """Say once per process that compiling takes its time."""
    if not _announced:
        _announced.append(True)
        _LOG.warning("compiling kernels, once for this version and machine: up to a minute ...")


_announced: list[bool] = []


class _Compilations(event.Listener):
    """Counts the compilations that are going on; one may contain others."""

    def __init__(self) -> None:
        self.running = 0

    def on_start(self, event: Any) -> None:
        self.running += 1

    def on_end(self, event: Any) -> None:
        self.running -= 1


_compilations = _Compilations()
event.register("numba:compile", _compilations)


def compiling() -> bool:
    """True while a kernel is being compiled, which nothing but the end of the process can cut short."""
    return _compilations.running > 0


def _compiled(function: Callable[..., Any], **options: Any) -> Any:
    """Compile ``function`` with the options that every kernel shares.

    - ``nogil``: groups of walkers run in threads.
    - ``error_model="numpy"``: a division by zero gives inf as in NumPy and costs no branch.
    - ``fastmath`` only "contract" (fused multiply-add): reordering would break the guards against overflow.
    - no ``parallel``: parallel work is walkers and sweep points, so results do not depend on the thread count.

    The cache folder is set for this decoration only and restored, since it is a setting of the whole process.
    """
    dispatcher = numba.njit(nogil=True, error_model="numpy", fastmath={"contract"}, **options)(function)
    if _CACHE_FOLDER is None or numba.config.DISABLE_JIT:
        return dispatcher
    previous = numba.config.CACHE_DIR
    numba.config.CACHE_DIR = _CACHE_FOLDER
    try:
        dispatcher._cache = _HealingCache(function)
    except RuntimeError as fault:
        _LOG.info("no cache for %s (%s)", function, fault)
    finally:
        numba.config.CACHE_DIR = previous
    return dispatcher


def kernel(function: Callable[..., Any]) -> Any:
    """A kernel that may allocate arrays."""
    return _compiled(function)


def lean_kernel(function: Callable[..., Any]) -> Any:
    """A kernel that allocates nothing, compiled without counting references to its arrays.

    Counting costs an atomic operation per array and call, more than the work itself where a call is short.
    """
    return _compiled(function, _nrt=False)


def inlined_kernel(function: Callable[..., Any]) -> Any:
    """A `lean_kernel` that is pasted into its callers: no array descriptors or lanes pass through memory."""
    return _compiled(function, _nrt=False, forceinline=True)
