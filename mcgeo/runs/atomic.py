"""Files that are there whole or not at all."""

from __future__ import annotations

import os
import uuid
from pathlib import Path


def write_whole(path: Path, data: bytes) -> None:
    """Write under a temporary name beside ``path``, then rename; missing folders are made.

    An earlier file of that name stays as it was until the new one is complete, also when writing fails.

    Raises
    ------
    OSError
        If the folder cannot be written.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    # Processes of several machines may write the same file on a shared disk: a process number would not do.
    temporary = path.with_name(f".{path.name}.{uuid.uuid4().hex}.part")
    try:
        temporary.write_bytes(data)
        os.replace(temporary, path)
    finally:
        temporary.unlink(missing_ok=True)
