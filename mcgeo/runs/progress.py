"""Progress on standard error: a bar on a terminal, a plain line now and then in a batch log."""

from __future__ import annotations

import sys
import time
from types import TracebackType
from typing import Any

_SECONDS_BETWEEN_LINES = 30.0


def say(message: str) -> None:
    """One line on standard error."""
    print(message, file=sys.stderr, flush=True)


def _bar(total: int, done: int) -> Any:
    # Here, since it takes as long to load as a small run takes.
    from tqdm import tqdm

    return tqdm(total=total, initial=done, unit="block", file=sys.stderr)


class Progress:
    """Counts the blocks of a run; a context manager."""

    def __init__(self, total: int, done: int = 0, quiet: bool = False) -> None:
        self._total, self._done = total, done
        self._started = self._last_line = time.monotonic()
        self._first = self._told = done
        self._note = ""
        self._quiet = quiet
        self._bar = _bar(total, done) if sys.stderr.isatty() and not quiet else None

    def __enter__(self) -> Progress:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._bar is not None:
            self._bar.close()
        elif kind is None and self._done > self._told:
            self.expect(self._done)
            self._line()

    def expect(self, total: int) -> None:
        """The run is now thought to take so many blocks."""
        self._total = total
        if self._bar is not None:
            self._bar.total = total
            self._bar.refresh()

    def step(self, note: str) -> None:
        """One block more; ``note`` tells how it went."""
        self._done += 1
        self._note = note
        if self._bar is not None:
            self._bar.set_postfix_str(note)
            self._bar.update(1)
        elif time.monotonic() - self._last_line > _SECONDS_BETWEEN_LINES:
            self._line()

    def _line(self) -> None:
        self._told, self._last_line = self._done, time.monotonic()
        if not self._quiet:
            left = (self._last_line - self._started) / (self._done - self._first) * (self._total - self._done)
            say(f"block {self._done}/{self._total}, {self._note}, {left:.0f} s left")
