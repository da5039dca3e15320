"""Progress over a whole sweep, with the time that is left."""

from __future__ import annotations

import sys
import time
from types import TracebackType

from tqdm import tqdm

from mcgeo.runs.progress import say

_SECONDS_BETWEEN_LINES = 30.0
_SECONDS_BETWEEN_BARS = 1.0
# Before this much of the work is done there is no telling how long the rest takes.
_LEAST_SHARE = 0.01


def duration(seconds: float) -> str:
    """``42 s``, ``12 min``, ``3.4 h``."""
    if seconds < 100.0:
        return f"{seconds:.0f} s"
    return f"{seconds / 60.0:.0f} min" if seconds < 6000.0 else f"{seconds / 3600.0:.1f} h"


class SweepProgress:
    """Counts liquids and points, and weighs the work in estimated seconds; a context manager.

    A bar on a terminal; elsewhere a plain line when the first task is done, now and then, and at the end.
    """

    def __init__(self, liquids: int, points: int, seconds: float, quiet: bool) -> None:
        self._liquids, self._points, self._seconds = liquids, points, max(seconds, 1e-9)
        self._liquids_done = self._points_done = self._failures = 0
        self._seconds_done = 0.0
        self._started = self._last = time.monotonic()
        self._is_first = True
        self._quiet = quiet
        terminal = sys.stderr.isatty() and not quiet
        form = "{percentage:3.0f}% |{bar}| {desc}"
        begun = self._words(self._started, 0.0)
        self._bar = tqdm(desc=begun, total=self._seconds, file=sys.stderr, bar_format=form) if terminal else None

    def __enter__(self) -> SweepProgress:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._bar is not None:
            self._bar.close()

    def step(self, *, liquids: int = 0, points: int = 0, failures: int = 0, seconds: float = 0.0) -> None:
        """More liquids, points with a row, points without, and the estimated seconds that this was."""
        self._liquids_done += liquids
        self._points_done += points
        self._failures += failures
        self._seconds_done += seconds
        if self._is_first or self._points_done + self._failures == self._points:
            self._is_first = False
            self.show(0.0)

    @property
    def is_due(self) -> bool:
        """Whether it is time to show something again."""
        between = _SECONDS_BETWEEN_LINES if self._bar is None else _SECONDS_BETWEEN_BARS
        return time.monotonic() - self._last > between

    def show(self, seconds_in_flight: float) -> None:
        """Show how far it is, with the estimated seconds that tasks not yet done have behind them."""
        now = self._last = time.monotonic()
        done = self._seconds_done + seconds_in_flight
        if self._bar is not None:
            self._bar.set_description_str(self._words(now, done), refresh=False)
            self._bar.update(done - self._bar.n)
            self._bar.refresh()
        elif not self._quiet:
            say(self._words(now, done))

    def _words(self, now: float, seconds_done: float) -> str:
        parts = [f"liquid {self._liquids_done}/{self._liquids}"] if self._liquids else []
        parts.append(f"point {self._points_done}/{self._points}")
        if self._failures:
            parts.append(f"{self._failures} failed")
        share = min(seconds_done / self._seconds, 1.0)
        if share > _LEAST_SHARE:
            parts.append(f"{duration((now - self._started) * (1.0 - share) / share)} left")
        return ", ".join(parts)
