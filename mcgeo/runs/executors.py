"""Who does the tasks of a sweep: this process, or several on this machine. The engine sees an `Executor` only."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from abc import ABC, abstractmethod
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, ProcessPoolExecutor, ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Protocol

# The kernels bring their own threads; libraries that read these would start one per core beside them in every process.
_ONE_THREAD = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS")


class StopSign(Protocol):
    """What tells a task to end early; it goes along with the task."""

    def test(self) -> Callable[[], bool]:
        """The test whether to end, which any thread may ask; to be made in the thread of the task."""


@dataclass(frozen=True)
class StopFile:
    """A file that asks for an early end by being there."""

    path: Path

    def test(self) -> Callable[[], bool]:
        """Whether it is there."""
        return self.path.exists


class Crew(ABC):
    """Workers, and how much they take on at once.

    Attributes
    ----------
    threads_per_sampling : int or None
        Of every sampling; None: shared out among those that can run at once.
    dies_as_one : bool
        Whether the death of one worker ends all tasks in flight, so that nobody can tell which of them was to blame.
    fatal : tuple of type
        Errors by which an executor says that workers have died over a task too often for another try.
    """

    threads_per_sampling: int | None = None
    dies_as_one = True
    fatal: tuple[type[Exception], ...] = ()

    @abstractmethod
    def start(self) -> Executor:
        """A new executor: at first, and after one has broken."""

    @property
    @abstractmethod
    def tasks(self) -> int:
        """Tasks in flight at once; may change."""

    @property
    @abstractmethod
    def threads(self) -> int:
        """Threads in flight at once, over all tasks; may change."""

    def stop_sign(self, stop_file: Path) -> StopSign:
        """What tasks look at to know that they shall end early, when the engine makes this file."""
        return StopFile(stop_file)


class LocalCrew(Crew):
    """This process, or several on this machine.

    Parameters
    ----------
    workers : int
        Processes; 1: this one.
    cores : int
        That they share.
    threads_per_sampling : int, optional
    """

    def __init__(self, workers: int, cores: int, threads_per_sampling: int | None = None) -> None:
        self._workers, self._cores = workers, cores
        self.threads_per_sampling = threads_per_sampling

    def start(self) -> Executor:
        """A new executor; this process's own thread is left to signals and progress."""
        return ThreadPoolExecutor(1) if self._workers == 1 else local_processes(self._workers)

    @property
    def tasks(self) -> int:
        """One per process."""
        return self._workers

    @property
    def threads(self) -> int:
        """One per core, but at least one per process."""
        return max(self._workers, self._cores)


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
