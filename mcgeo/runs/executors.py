"""Who does the tasks of a sweep: this process, or several on this machine. The engine sees an `Executor` only."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any, ParamSpec, TypeVar

_P = ParamSpec("_P")
_R = TypeVar("_R")

# The kernels bring their own threads; libraries that read these would start one per core beside them in every process.
_ONE_THREAD = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS")


@dataclass(frozen=True)
class Crew:
    """Workers, and how much they take on at once.

    Attributes
    ----------
    start : callable
        Gives a new executor: at first, and after one has broken.
    tasks : int
        Tasks in flight at once.
    threads : int
        Threads in flight at once, over all tasks.
    threads_per_sampling : int or None
        Of every sampling; None: shared out among those that can run at once.
    """

    start: Callable[[], Executor]
    tasks: int
    threads: int
    threads_per_sampling: int | None = None


class SerialExecutor(Executor):
    """Does each task at once, in this process."""

    def submit(self, fn: Callable[_P, _R], /, *args: _P.args, **kwargs: _P.kwargs) -> Future[_R]:
        """The task's future, already done."""
        future: Future[_R] = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as fault:
            future.set_exception(fault)
        return future


def local_processes(n: int) -> Executor:
    """Processes on this machine, started afresh: a copy of a process with running kernels may hang."""
    context = multiprocessing.get_context("spawn")
    return ProcessPoolExecutor(n, mp_context=context, initializer=_begin)


@contextmanager
def single_threaded_libraries() -> Iterator[None]:
    """Processes started within have one thread per numerical library, unless the environment says otherwise."""
    added = [name for name in _ONE_THREAD if name not in os.environ]
    os.environ.update(dict.fromkeys(added, "1"))
    try:
        yield
    finally:
        for name in added:
            del os.environ[name]


def _begin() -> None:
    """Leave Ctrl-C and requests to terminate to the parent, which tells all workers; but do not outlive it."""
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, signal.SIG_IGN)
    threading.Thread(target=_end_with, args=(multiprocessing.parent_process(),), daemon=True).start()


def _end_with(parent: Any) -> None:
    parent.join()
    os._exit(1)
