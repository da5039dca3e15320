"""Workers on many machines, through the scheduler of a dask cluster that the user has started.

Importing this module needs *dask.distributed*.
"""

from __future__ import annotations

import time
import uuid
from collections.abc import Callable, Iterable
from concurrent.futures import BrokenExecutor, Executor, Future
from contextlib import suppress
from pathlib import Path
from typing import Any, ParamSpec, TypeVar

import dask
from dask.utils import parse_timedelta
from distributed import Client, KilledWorker

from mcgeo.errors import ConfigError, McgeoError
from mcgeo.runs.cluster_worker import NoLongerWanted, at_work, unfit, versions, work
from mcgeo.runs.executors import Crew, StopSign
from mcgeo.runs.progress import say

_P = ParamSpec("_P")
_R = TypeVar("_R")

_SECONDS_BETWEEN_LOOKS = 1.0
# A measurement of a large state, and the writing of its checkpoint.
_SECONDS_TO_STOP = 120.0
_RETRIES = 2
_SHOWN = 10


class SchedulerLostError(McgeoError):
    """The scheduler has gone in the middle of a sweep."""

    exit_code = 4


class ClusterCrew(Crew):
    """As many tasks at once as there are threads of workers, be they there from the start or join later.

    Parameters
    ----------
    scheduler : str
        Address, as ``tcp://node7:8786``, or path of a scheduler file.
    folder : Path
        Of the sweep; all workers must see it.
    threads : int
        Of every sampling.
    """

    dies_as_one = False
    fatal = (KilledWorker,)

    def __init__(self, scheduler: str, folder: Path, threads: int) -> None:
        self._scheduler, self._folder = scheduler, folder
        self.threads_per_sampling: int = threads
        self._workers: _Workers | None = None

    def start(self) -> Executor:
        """An executor on a new connection to the scheduler.

        Raises
        ------
        ConfigError
            If no scheduler answers at first, or a worker has other versions or does not see the folder.
        SchedulerLostError
            If it has answered before and does so no more.
        """
        again = self._workers is not None
        if again:
            say(f"the scheduler {self._scheduler} has gone; looking for it once more")
        try:
            client = _connected(self._scheduler)
        except (OSError, ValueError, TypeError, KeyError) as fault:
            if again:
                raise SchedulerLostError(
                    f"the scheduler {self._scheduler} has gone; what is done is in {self._folder}: start a scheduler "
                    "and workers, then the same command goes on from there"
                ) from fault
            raise ConfigError(
                [f"{self._scheduler}: no scheduler answers ({_first_line(fault)}); start one with: dask scheduler"]
            ) from fault
        try:
            self._workers = _Workers(client, self._folder)
            self._workers.greet()
        except BaseException:
            client.close()
            raise
        return _ClusterExecutor(client, self._workers)

    @property
    def tasks(self) -> int:
        """One per thread of the workers, but at least one, which waits for the first worker."""
        return max(self._workers.threads if self._workers else 0, 1)

    @property
    def threads(self) -> int:
        """Those of all tasks that can be in flight."""
        return self.tasks * self.threads_per_sampling

    def stop_sign(self, stop_file: Path) -> StopSign:
        """Being cancelled, which reaches all workers at once, be their file systems quick or not."""
        return NoLongerWanted()


def _connected(scheduler: str) -> Client:
    options = {"set_as_default": False, "name": "mcgeo-sweep"}
    if "://" in scheduler:
        return Client(scheduler, **options)
    path = Path(scheduler)
    # The scheduler may be started together with the sweep.
    limit = time.monotonic() + parse_timedelta(dask.config.get("distributed.comm.timeouts.connect"))
    while not path.is_file():
        if time.monotonic() > limit:
            raise FileNotFoundError("no such file")
        time.sleep(0.1)
    return Client(scheduler_file=str(path), **options)


def _first_line(fault: Exception) -> str:
    return (str(fault).splitlines() or [type(fault).__name__])[0]


class _Workers:
    """Workers of a scheduler, each looked at before its threads count."""

    def __init__(self, client: Client, folder: Path) -> None:
        self.run = uuid.uuid4().hex
        self._client, self._folder = client, folder.absolute()
        self._wanted = versions()
        self._fit: dict[str, int] = {}
        self._refused: set[str] = set()
        self._looked = -float("inf")

    def greet(self) -> None:
        """Look at all that are there.

        Raises
        ------
        ConfigError
            If one is unfit.
        """
        there = self._client.nthreads()
        faults = self._unfit(there)
        if faults:
            lines = [f"worker {address} {why}" for address, why in faults.items()]
            more = [f"and {len(lines) - _SHOWN} more workers"] * (len(lines) > _SHOWN)
            raise ConfigError([*lines[:_SHOWN], *more, "give all workers the program, the libraries and the folder"])
        if not there:
            say("the scheduler has no workers yet; the first tasks wait for them")
        self._fit = dict(there)
        self._looked = time.monotonic()

    @property
    def threads(self) -> int:
        """Threads of all fit workers."""
        if time.monotonic() - self._looked >= _SECONDS_BETWEEN_LOOKS:
            # Without a scheduler the number stays; who hands out the next task learns of it.
            with suppress(OSError, TimeoutError):
                self._look()
            self._looked = time.monotonic()
        return sum(self._fit.values())

    def _look(self) -> None:
        there = self._client.nthreads()
        new = there.keys() - self._fit.keys() - self._refused
        faults = self._unfit(new)
        for address, why in faults.items():
            say(f"worker {address} {why}: it is sent away")
        if faults:
            self._refused |= faults.keys()
            self._client.retire_workers(list(faults), close_workers=True)
        self._fit = {address: n for address, n in there.items() if address not in self._refused}

    def _unfit(self, addresses: Iterable[str]) -> dict[str, str]:
        asked = list(addresses)
        if not asked:
            return {}
        mark = self._folder / f".{self.run}"
        mark.touch()
        try:
            found = self._client.run(unfit, self.run, self._wanted, mark, workers=asked, on_error="return")
        finally:
            mark.unlink()
        return {address: _reason(answer) for address, answer in found.items() if answer}

    def wait_until_idle(self) -> None:
        """Wait for tasks that have been told to end."""
        limit = time.monotonic() + _SECONDS_TO_STOP
        with suppress(OSError, TimeoutError):
            while time.monotonic() < limit:
                counts = self._client.run(at_work, self.run, on_error="ignore")
                if not any(counts.values()):
                    return
                time.sleep(0.1)


def _reason(answer: Any) -> str:
    if isinstance(answer, Exception):
        return f"cannot do tasks of mcgeo: {type(answer).__name__}: {_first_line(answer)}"
    return str(answer)


class _ClusterExecutor(Executor):
    """The client's executor, which breaks when the scheduler goes."""

    def __init__(self, client: Client, workers: _Workers) -> None:
        self._client, self._workers = client, workers
        self._inner = client.get_executor(pure=False, retries=_RETRIES)
        self._in_flight: set[Future[Any]] = set()

    def submit(self, fn: Callable[_P, _R], /, *args: _P.args, **kwargs: _P.kwargs) -> Future[_R]:
        """A future of the task.

        Raises
        ------
        BrokenExecutor
            If the connection to the scheduler has been lost, and with it all tasks in flight.
        """
        if self._client.status != "running":
            raise BrokenExecutor("no connection to the scheduler")
        future: Future[_R] = self._inner.submit(work, self._workers.run, fn, *args, **kwargs)
        self._in_flight.add(future)
        future.add_done_callback(self._in_flight.discard)
        return future

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:
        """Close the connection; ``cancel_futures`` tells tasks to end, ``wait`` waits until they have."""
        if cancel_futures:
            for future in list(self._in_flight):
                future.cancel()
        if wait and self._client.status == "running":
            self._workers.wait_until_idle()
        with suppress(OSError, TimeoutError):
            self._client.close()
