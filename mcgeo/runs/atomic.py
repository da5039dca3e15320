"""Files that are there whole or not at all."""

from __future__ import annotations

import os
import socket
import uuid
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path


@contextmanager
def whole_file(path: Path) -> Iterator[Path]:
    """A name beside ``path`` to write to; the file is on disk and called ``path`` when the context ends well.

    An earlier file of that name stays as it was until then, also when writing fails. Missing folders are made, and
    what killed writers of the same file have left is removed.

    Raises
    ------
    OSError
        If the file cannot be written.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    remove_parts(path)
    # Processes of several machines may write the same file on a shared disk.
    temporary = path.with_name(f"{_head(path)}{os.getpid()}.{uuid.uuid4().hex}.part")
    try:
        yield temporary
        with open(temporary, "rb+") as written:
            os.fsync(written.fileno())
        os.replace(temporary, path)
    except OSError as fault:
        # The name that was asked for, not that on the way to it.
        raise OSError(fault.errno, fault.strerror or str(fault), str(path)) from fault
    finally:
        # A full disk, or a folder that has gone: the fault that led here says more.
        with suppress(OSError):
            temporary.unlink(missing_ok=True)


def write_whole(path: Path, data: bytes | memoryview) -> None:
    """Write a file by `whole_file`.

    Raises
    ------
    OSError
        If it cannot be written.
    """
    with whole_file(path) as temporary:
        temporary.write_bytes(data)


def _head(path: Path) -> str:
    return f".{path.name}.{socket.gethostname()}."


def remove_parts(path: Path) -> None:
    """Remove unfinished files on the way to ``path`` whose writers, on this machine, have ended."""
    head = _head(path)
    for name in os.listdir(path.parent):
        if name.startswith(head) and name.endswith(".part"):
            number = name.removeprefix(head).partition(".")[0]
            if number.isdecimal() and not _runs(int(number)):
                path.with_name(name).unlink(missing_ok=True)


def _runs(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except (PermissionError, OverflowError):
        pass
    return True
