"""A request to stop a sweep, for all its workers to see."""

from __future__ import annotations

from contextlib import suppress
from pathlib import Path

from mcgeo.runs.signals import StopFlag


class SharedStopFlag(StopFlag):
    """A flag whose raising all workers see, as a file in the folder they share; a context manager.

    One that a killed sweep has left is removed on entering.
    """

    def __init__(self, path: Path) -> None:
        super().__init__()
        self.path = path

    def set(self) -> None:
        """Raise the flag and make the file."""
        super().set()
        with suppress(OSError):
            self.path.touch()

    def __enter__(self) -> SharedStopFlag:
        self.path.unlink(missing_ok=True)
        return self

    def __exit__(self, *_: object) -> None:
        self.path.unlink(missing_ok=True)
