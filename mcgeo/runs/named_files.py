"""Files: those that a configuration names, and how they and the configuration itself are read."""

from __future__ import annotations

import os
import stat
from collections.abc import Mapping
from pathlib import Path
from typing import Any, NamedTuple

from mcgeo.runs.config_types import rule

# What the validation is told of files, under this key of its context: `NamedFiles`, or None where none may be read.
FILES = "files"


class NamedFiles(NamedTuple):
    """Where the files that a configuration names may lie.

    Attributes
    ----------
    folder : Path
        That of the configuration.
    anywhere : bool
        True if they may lie outside of it, as the user, and not the configuration, says.
    """

    folder: Path = Path()
    anywhere: bool = False

    def path(self, name: str) -> Path:
        """The file of this name; raises the error of a validator if it may not be read."""
        path = self.folder / name
        if not name or not name.isprintable():
            raise rule(f"must be the name of a file, not {name!r}")
        if self.anywhere:
            return path
        if "\\" in name or os.path.isabs(name) or ".." in Path(name).parts:
            raise rule(f"must be a path inside the folder of the configuration, not {name!r}{_ALLOW}")
        if not path.resolve().is_relative_to(self.folder.resolve()):
            raise rule(f"must stay inside the folder of the configuration, but {name!r} links out of it{_ALLOW}")
        return path


_ALLOW = "; the option --allow-outside allows others"


def files_of(context: Mapping[str, Any] | None) -> NamedFiles:
    """Of the context of a validation; raises the error of a validator where no file may be read."""
    files = (context or {}).get(FILES, NamedFiles())
    if files is None:
        raise rule("a result file holds all it needs and names no other file")
    assert isinstance(files, NamedFiles)
    return files


class NotPlainError(Exception):
    """Why the bytes of a file cannot be had, in words that follow its name."""


def read_plain(path: str | os.PathLike[str], largest: int, what: str) -> bytes:
    """Bytes of a regular file of at most ``largest`` bytes; a pipe or device, which may have no end, is not opened.

    Parameters
    ----------
    what : str
        What is in the file, for the message that it is too large: ``configuration``.

    Raises
    ------
    NotPlainError
        If it is missing, no regular file, unreadable or larger.
    """
    try:
        # Without waiting: a pipe that nobody writes to would never open.
        handle = os.open(path, os.O_RDONLY | os.O_NONBLOCK)
        with open(handle, "rb") as stream:
            mode = os.fstat(handle).st_mode
            if not stat.S_ISREG(mode):
                kind = "a folder" if stat.S_ISDIR(mode) else "a pipe or device"
                raise NotPlainError(f"{kind} and not a file")
            raw = stream.read(largest + 1)
    except FileNotFoundError:
        raise NotPlainError("there is no such file") from None
    except (OSError, ValueError) as error:
        reason = (error.strerror if isinstance(error, OSError) else None) or str(error)
        raise NotPlainError(f"the file cannot be read: {reason}") from None
    if len(raw) > largest:
        raise NotPlainError(f"the file is larger than {largest // 1_000_000} MB, which no {what} is")
    return raw
