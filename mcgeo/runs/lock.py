"""One writer per result file: an advisory lock that the system gives back however the process ends."""

from __future__ import annotations

import errno
import fcntl
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from mcgeo.errors import StorageError
from mcgeo.runs.progress import say

# What file systems answer that know no locks.
_NO_LOCKS = (errno.ENOLCK, errno.EOPNOTSUPP, errno.ENOSYS)
_LONGEST_HOLDER = 200


class FileBusy(StorageError):
    """Another process is writing the file."""


@contextmanager
def run_lock(path: Path) -> Iterator[None]:
    """Hold the right to write the result file ``path``; its folder is made, and removed again if it stays empty.

    The lock is a `flock` on ``.NAME.lock`` beside the file. It binds only those who ask for it: readers do not, and a
    result file is replaced as a whole under their eyes. A process that is killed leaves the lock file, but not the
    lock. On network file systems it reaches other hosts where the system carries `flock` over (NFS on Linux does);
    where there are no locks at all, a note says so and the run goes on.

    Raises
    ------
    FileBusy
        If another process holds the lock, naming it.
    StorageError
        If the folder cannot be written.
    """
    folder = path.parent
    made = not folder.exists()
    try:
        folder.mkdir(parents=True, exist_ok=True)
        handle = _locked(path)
    except OSError as fault:
        why = fault.strerror or fault
        raise StorageError(f"{folder}: cannot be written: {why}; choose another folder with --out") from fault
    try:
        yield
    finally:
        # First the name, then the lock: whoever opens the name from now on makes a new file.
        with suppress(OSError):
            _lock_file(path).unlink()
        os.close(handle)
        if made:
            with suppress(OSError):
                folder.rmdir()


def _lock_file(path: Path) -> Path:
    return path.with_name(f".{path.name}.lock")


def _locked(path: Path) -> int:
    """Handle of the lock file, locked, with this process's name in it."""
    lock_file = _lock_file(path)
    while True:
        handle = os.open(lock_file, os.O_RDWR | os.O_CREAT | os.O_NOFOLLOW, 0o644)
        try:
            _take(handle, path)
            if _is_named(handle, lock_file):
                _sign(handle, lock_file)
                return handle
        except BaseException:
            os.close(handle)
            raise
        # Another process has just given the lock back and removed the name.
        os.close(handle)


def _sign(handle: int, lock_file: Path) -> None:
    try:
        os.ftruncate(handle, 0)
        os.pwrite(handle, f"process {os.getpid()} on {socket.gethostname()}\n".encode(), 0)
    except OSError:
        with suppress(OSError):
            lock_file.unlink()
        raise


def _take(handle: int, path: Path) -> None:
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        holder = os.pread(handle, _LONGEST_HOLDER, 0).decode(errors="replace").strip()
        raise FileBusy(
            f"{path}: is being written by {holder or 'another process'}; wait for it, "
            "or choose another folder with --out"
        ) from None
    except OSError as fault:
        if fault.errno not in _NO_LOCKS:
            raise
        say(f"{path.parent}: this file system has no locks; start no second run in the folder")


def _is_named(handle: int, lock_file: Path) -> bool:
    with suppress(FileNotFoundError):
        return os.path.samestat(os.fstat(handle), os.stat(lock_file))
    return False
