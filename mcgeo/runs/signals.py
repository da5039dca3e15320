"""Stop a run at the next measurement instead of in the middle of one."""

from __future__ import annotations

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType


class StopFlag(threading.Event):
    """Set by Ctrl-C (SIGINT) or a request to terminate (SIGTERM)."""

    signal_number: int = signal.SIGINT


@contextmanager
def stop_on_signals(given: StopFlag | None = None) -> Iterator[StopFlag]:
    """A flag, the one given if any, that the two signals set, within the context; in another thread than the main
    one it stays unset.
    """
    flag = StopFlag() if given is None else given

    def request(number: int, frame: FrameType | None) -> None:
        flag.signal_number = number
        flag.set()

    if threading.current_thread() is not threading.main_thread():
        yield flag
        return
    earlier = {number: signal.signal(number, request) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield flag
    finally:
        for number, handler in earlier.items():
            signal.signal(number, handler)
