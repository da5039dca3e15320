"""What workers of a sweep do: sample one liquid, or find the optima of some of its points.

Module-level functions of plain arguments, so that any executor can carry them to any process. They write their files
themselves and give back a few words; no error leaves them, because an error may not survive the way back.
"""

from __future__ import annotations

import threading
import time
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from functools import lru_cache
from pathlib import Path
from typing import Any, NamedTuple

from mcgeo.errors import McgeoError, RunInterrupted, StorageError
from mcgeo.runs.catalogue import KIND, catalogue_liquid
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.executors import StopSign
from mcgeo.runs.lock import FileBusy
from mcgeo.runs.sample import LIQUID_FILE
from mcgeo.runs.scan import SharedAnswers, optimum, optimum_summary, problem_summary
from mcgeo.runs.scannable import Scannable
from mcgeo.runs.signals import StopFlag
from mcgeo.runs.storage import read_result
from mcgeo.runs.sweep_liquids import LIQUIDS
from mcgeo.runs.sweep_rows import RowFile
from mcgeo.runs.sweep_steps import Step, take_step
from mcgeo.runs.units import with_units

_SECONDS_BETWEEN_LOOKS = 0.2
_LIQUIDS_KEPT = 2
_OF_PROBLEM = ("interaction_name", "level", "mass_stretch", "mass_angle_degrees", "orbit_aspect_ratio")

Keys = Mapping[str, Any]


class Report(NamedTuple):
    """How a task went.

    Attributes
    ----------
    end : str
        ``done``; ``stopped`` before its end because it was told to; ``failed`` for good; ``hindered`` by something
        that may pass, such as a full disk; ``busy`` is its file, which another process writes.
    words : str
        Why, where it is not done.
    rows, failures : int
        Points that have got a row, and points that cannot have one.
    seconds : float
        Time it took.
    """

    end: str
    words: str = ""
    rows: int = 0
    failures: int = 0
    seconds: float = 0.0


class Question(NamedTuple):
    """A point as a worker sees it: its name, and ``problem`` and ``material`` of its resolved configuration."""

    point: str
    problem: Keys
    material: Keys | None


@contextmanager
def _watched(sign: StopSign) -> Iterator[StopFlag]:
    """A flag that is set once the sign is given."""
    flag, ended = StopFlag(), threading.Event()
    is_given = sign.test()

    def look() -> None:
        while not ended.wait(_SECONDS_BETWEEN_LOOKS):
            if is_given():
                flag.set()
                return

    if is_given():
        flag.set()
    watcher = threading.Thread(target=look, daemon=True)
    watcher.start()
    try:
        yield flag
    finally:
        ended.set()
        watcher.join()


def sample_liquid(folder: Path, liquid: str, step: Step, keys: Keys, threads: int, sign: StopSign) -> Report:
    """Sample a liquid, or do one step of that, into ``liquids/HASH`` of the sweep's folder, or go on with it.

    Parameters
    ----------
    keys : mapping
        Resolved configuration of any point of the liquid.
    sign : StopSign
        Asks for an early end.
    """
    try:
        config = config_from_resolved({**keys, "sampling": {**keys["sampling"], "threads": threads}})
        with _watched(sign) as stop:
            take_step(step, config, folder / LIQUIDS / liquid, stop)
    except RunInterrupted as fault:
        return Report("stopped", str(fault))
    except FileBusy as fault:
        return Report("busy", _words(fault))
    except (StorageError, OSError, MemoryError) as fault:
        return Report("hindered", _words(fault))
    except Exception as fault:
        return Report("failed", _words(fault))
    return Report("done")


def find_optima(
    folder: Path, liquid: str, state: Keys, questions: Sequence[Question], sign: StopSign
) -> Report:
    """The optima of some points of a sampled liquid, left as one file of rows.

    A point whose optimum cannot be found is kept with the reason.

    Parameters
    ----------
    state : mapping
        Resolved keys of ``state``.
    """
    started = time.monotonic()
    rows: dict[str, Keys] = {}
    failed: dict[str, str] = {}
    try:
        opened = _opened(folder, liquid, state)
        with _watched(sign) as stop:
            for question in questions:
                if stop.is_set():
                    break
                try:
                    rows[question.point] = opened.row(question)
                except Exception as fault:
                    failed[question.point] = _words(fault)
        if rows or failed:
            seconds = time.monotonic() - started
            RowFile.of(liquid, opened.shared_columns, rows, failed, seconds).write(folder)
    except (StorageError, OSError, MemoryError) as fault:
        return Report("hindered", _words(fault))
    except Exception as fault:
        return Report("failed", _words(fault))
    left = len(questions) - len(rows) - len(failed)
    return Report("stopped" if left else "done", "", len(rows), len(failed), time.monotonic() - started)


def _words(fault: BaseException) -> str:
    text = " ".join(str(fault).split())
    return text if isinstance(fault, McgeoError) else f"{type(fault).__name__}: {text}"


class _Opened:
    """A liquid that questions are put to."""

    def __init__(self, liquid: Scannable, seed: int) -> None:
        self._liquid, self._seed = liquid, seed
        self._state = liquid.state_summary()
        self._answers = SharedAnswers()
        # Worker threads of one process may put questions to the same liquid.
        self._one_at_a_time = threading.Lock()

    @property
    def shared_columns(self) -> dict[str, Any]:
        """What all rows of the liquid have in common."""
        health = self._liquid.diagnostics_summary()
        return {
            "label": self._state["label"],
            "filling": self._state["filling"],
            "electrons": self._state["liquid_electrons"],
            "seed": self._seed,
            "acceptance": health["acceptance"],
            "autocorrelation_time": health["autocorrelation_time"],
            "effective_samples": health["effective_samples"],
            "run_verdict": health["verdict"],
        }

    def row(self, question: Question) -> dict[str, Any]:
        """The numbers of one point."""
        with self._one_at_a_time:
            found = optimum(self._liquid, question.problem, self._answers)
        problem = problem_summary(found.problem, question.problem)
        summary = {"state": self._state, "optimum": optimum_summary(found)}
        summary = with_units(summary, {"material": question.material})
        best = {name: value for name, value in summary["optimum"].items() if not isinstance(value, list | Mapping)}
        return {**best, **{name: problem[name] for name in _OF_PROBLEM}, **summary.get("units", {})}


def _opened(folder: Path, liquid: str, state: Keys) -> _Opened:
    if state["kind"] == KIND:
        return _opened_of_catalogue(state["catalogue"], state["conjugate"])
    path = folder / LIQUIDS / liquid / LIQUID_FILE
    return _opened_as_of(path, path.stat().st_mtime_ns)


@lru_cache(maxsize=_LIQUIDS_KEPT)
def _opened_as_of(path: Path, changed: int) -> _Opened:
    """Kept from task to task of a process; ``changed`` tells a file from one that has taken its place."""
    result = read_result(path)
    return _Opened(result, result.resolved["sampling"]["seed"])


@lru_cache(maxsize=_LIQUIDS_KEPT)
def _opened_of_catalogue(name: str, conjugate: bool) -> _Opened:
    found = catalogue_liquid({"kind": KIND, "catalogue": name, "conjugate": conjugate})
    return _Opened(found, found.entry.large.resolved["sampling"]["seed"])
