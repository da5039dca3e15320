"""What happens on the workers of a cluster: which sweeps they are fit for, and when a task there shall end early."""

from __future__ import annotations

import hashlib
import platform
import threading
import time
from collections import Counter
from collections.abc import Callable, Mapping
from functools import cache
from importlib.metadata import version
from pathlib import Path
from typing import Any

from distributed import Reschedule, Status, get_worker

import mcgeo

# Runs of sweeps that this process has been found fit for, and how many tasks of each are at work in it.
_FIT_FOR: set[str] = set()
_AT_WORK: Counter[str] = Counter()
_COUNTING = threading.Lock()

_SECONDS_BEFORE_ANOTHER = 1.0
_WORKING = ("executing", "long-running")


@cache
def versions() -> dict[str, str]:
    """All that the last bit of a result depends on, short of the processor; of the program itself the sources too.

    Read once: a process goes on with the sources that it has loaded, whatever becomes of the files.
    """
    root = Path(mcgeo.__file__).parent
    digest = hashlib.sha256()
    for source in sorted(root.rglob("*.py")):
        digest.update(source.relative_to(root).as_posix().encode())
        digest.update(source.read_bytes())
    libraries = {name: version(name) for name in ("numpy", "numba", "scipy", "distributed")}
    python = ".".join(platform.python_version_tuple()[:2])
    return {"mcgeo": f"{mcgeo.__version__} ({digest.hexdigest()[:8]})", **libraries, "python": python}


def unfit(run: str, wanted: Mapping[str, str], mark: Path) -> str:
    """Why this worker cannot do tasks of a run of a sweep; nothing where it can, and from then on it does them.

    Parameters
    ----------
    run : str
        Name of the run.
    wanted : mapping
        `versions` where the sweep was started.
    mark : Path
        File that has been made in the sweep's folder.
    """
    found = versions()
    others = [f"{name} {found[name]} instead of {wanted[name]}" for name in wanted if found[name] != wanted[name]]
    if others:
        return f"has {', '.join(others)}"
    if not mark.exists():
        return f"does not see the folder {mark.parent}"
    _FIT_FOR.add(run)
    return ""


def at_work(run: str) -> int:
    """Tasks of a run that are at work here."""
    return _AT_WORK[run]


def work(run: str, task: Callable[..., Any], *arguments: Any) -> Any:
    """Do a task of a run.

    Raises
    ------
    Reschedule
        If this worker has joined so lately that nobody has looked whether it is fit for the run.
    """
    if run not in _FIT_FOR:
        time.sleep(_SECONDS_BEFORE_ANOTHER)
        raise Reschedule
    with _COUNTING:
        _AT_WORK[run] += 1
    try:
        return task(*arguments)
    finally:
        with _COUNTING:
            _AT_WORK[run] -= 1


class NoLongerWanted:
    """Asks for an early end when nobody waits for the task any more, or its worker closes.

    A task is given up when it is cancelled, and when the sweep that started it or the scheduler has gone.
    """

    def test(self) -> Callable[[], bool]:
        """The test for the task of this thread."""
        worker = get_worker()
        key = worker.get_current_task()

        def is_given_up() -> bool:
            task = worker.state.tasks.get(key)
            wanted = task is not None and task.state in _WORKING
            return not wanted or worker.status not in (Status.running, Status.paused)

        return is_given_up
