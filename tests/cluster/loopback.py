"""A scheduler and workers as processes of this machine, on addresses that nobody else can reach, ended in any case."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

from tests.cli.conftest import ROOT

# Waits are for conditions; the limit is for a machine that has many other things to do.
LIMIT = 180.0

# A worker that halts in its fourth block, after one at least has been saved, until told to end: mid-run without a race.
HALT = """
import time
from pathlib import Path
from mcgeo.runs import production
# Workers load this more than once.
undisturbed = getattr(production.next_block, "undisturbed", production.next_block)
blocks = []
def next_block(*arguments):
    blocks.append(None)
    if len(blocks) == 4:
        Path("halted").touch()
        while not arguments[-1].is_set():
            time.sleep(0.01)
    return undisturbed(*arguments)
next_block.undisturbed = undisturbed
production.next_block = next_block
"""


def wait_for(condition: Callable[[], object], what: str) -> None:
    """Wait until the condition holds.

    Raises
    ------
    TimeoutError
        If it never does.
    """
    limit = time.monotonic() + LIMIT
    while not condition():
        if time.monotonic() > limit:
            raise TimeoutError(f"waited in vain for {what}")
        time.sleep(0.02)


class Loopback:
    """One scheduler and its workers."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.file = folder / "scheduler.json"
        self.scheduler = self._started("scheduler", "scheduler", "--port", "0", "--no-show")
        wait_for(self._has_address, "the scheduler's file")
        self.workers: list[subprocess.Popen[bytes]] = []

    def _has_address(self) -> bool:
        try:
            return bool(json.loads(self.file.read_text())["address"])
        except (OSError, ValueError, KeyError):
            return False

    @property
    def address(self) -> str:
        return str(json.loads(self.file.read_text())["address"])

    def worker(self, *, threads: int = 1, halts: bool = False, first: str = "") -> subprocess.Popen[bytes]:
        """One more worker process; ``first`` is Python that it runs before anything else."""
        name = f"worker{len(self.workers)}"
        preload = []
        if halts or first:
            (self.folder / f"{name}_first.py").write_text(HALT if halts else first)
            preload = ["--preload", f"{name}_first.py"]
        started = self._started(
            name, "worker", "--no-nanny", "--nthreads", str(threads), "--memory-limit", "0", "--local-directory", name,
            *preload,
        )  # fmt: skip
        self.workers.append(started)
        return started

    def _started(self, name: str, kind: str, *options: str) -> subprocess.Popen[bytes]:
        environment = {**os.environ, "PYTHONPATH": os.fspath(ROOT), "OMP_NUM_THREADS": "1"}
        command = [sys.executable, "-m", "dask", kind, "--scheduler-file", str(self.file), "--host", "127.0.0.1"]
        with open(self.folder / f"{name}.log", "wb") as log:
            return subprocess.Popen(
                [*command, "--no-dashboard", *options], cwd=self.folder, env=environment, stdout=log, stderr=log
            )

    @property
    def halted(self) -> bool:
        """Whether a worker that halts has come to its halt."""
        return (self.folder / "halted").exists()

    def logs(self) -> str:
        """All that was said."""
        return "\n".join(path.read_text(errors="replace") for path in sorted(self.folder.glob("*.log")))

    def close(self) -> None:
        """End all processes."""
        for process in (*self.workers, self.scheduler):
            process.kill()
        for process in (*self.workers, self.scheduler):
            process.wait()


@contextmanager
def loopback(folder: Path, workers: int = 0) -> Iterator[Loopback]:
    """A cluster with its files in ``folder``."""
    folder.mkdir(parents=True)
    cluster = Loopback(folder)
    try:
        for _ in range(workers):
            cluster.worker()
        yield cluster
    finally:
        cluster.close()


@contextmanager
def meanwhile(act: Callable[[], None]) -> Iterator[None]:
    """Do something in a thread of its own beside a sweep; its error ends the sweep and becomes that of the test."""
    faults: list[BaseException] = []
    over = threading.Event()

    def guarded() -> None:
        try:
            act()
        except BaseException as fault:
            faults.append(fault)
            if not over.is_set():
                os.kill(os.getpid(), signal.SIGINT)

    thread = threading.Thread(target=guarded, daemon=True)
    thread.start()
    try:
        yield
        thread.join(LIMIT)
    finally:
        over.set()
        if faults:
            raise faults[0]
