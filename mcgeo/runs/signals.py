"""Stop a run at the next measurement instead of in the middle of one."""

from __future__ import annotations

import os
import signal
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType

from mcgeo.kernels._jit import compiling

_PATIENCE = 1.0
_BETWEEN_LOOKS = 0.05


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
        if not flag.is_set():
            flag.set()
            threading.Thread(target=_end_compilation, args=(flag, left), daemon=True).start()

    if threading.current_thread() is not threading.main_thread():
        yield flag
        return
    left = threading.Event()
    earlier = {number: signal.signal(number, request) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield flag
    finally:
        left.set()
        for number, handler in earlier.items():
            signal.signal(number, handler)


def _end_compilation(flag: StopFlag, left: threading.Event) -> None:
    """End the process if, after some patience, kernels are still compiled, which takes up to a minute.

    Those of a run are needed for its first block, and all that came before is on disk.
    """
    if left.wait(_PATIENCE):
        return
    while not compiling():
        if left.wait(_BETWEEN_LOOKS):
            return
    print("interrupted while kernels were compiled: the same command goes on from there", file=sys.stderr, flush=True)
    sys.stdout.flush()
    os._exit(128 + flag.signal_number)
