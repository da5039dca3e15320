"""When a running sampling writes its next checkpoint."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager

# A checkpoint that takes long is written less often: at most this share of the time goes into writing.
_LARGEST_SHARE = 0.05


class SaveClock:
    """Counts from the last checkpoint, on a clock that nobody sets.

    Parameters
    ----------
    interval : float
        Least time between two checkpoints, s.
    """

    def __init__(self, interval: float) -> None:
        self._interval = self._wait = interval
        self._last = time.monotonic()

    @property
    def due(self) -> bool:
        """True when it is time to write."""
        return time.monotonic() - self._last >= self._wait

    @contextmanager
    def writing(self) -> Iterator[None]:
        """Around the writing: takes its time and counts anew from its end."""
        started = time.monotonic()
        yield
        self._last = time.monotonic()
        self._wait = max(self._interval, (self._last - started) / _LARGEST_SHARE)
