"""The engine on executors that fail in every way: who is blamed, what is tried again, how much runs at once."""

from __future__ import annotations

import os
import threading
from collections.abc import Callable
from concurrent.futures import Executor, Future, ThreadPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from pathlib import Path
from typing import Any

import pytest

from mcgeo.runs import sweep as engine
from mcgeo.runs import sweep_progress, sweep_queue
from mcgeo.runs.executors import Crew
from mcgeo.runs.sweep import Costs, WorkersLost, run_sweep
from mcgeo.runs.sweep_plan import Point, SweepPlan, load_sweep
from mcgeo.runs.sweep_progress import SweepProgress, duration
from mcgeo.runs.sweep_queue import MOST_HINDRANCES, Job, Queue
from mcgeo.runs.sweep_rows import RowFile, known_points
from mcgeo.runs.sweep_steps import WHOLE
from mcgeo.runs.sweep_tasks import Report

SWEEP = """\
state: {kind: laughlin, exponent: 3, electrons: 4}
sweep:
  axes:
    - {key: sampling.seed, values: [1, 2, 3]}
    - {key: problem.mass.ratio, from: 1, to: 12, points: 12}
"""


class Troubled(Crew):
    """Two workers of which some tasks are the death."""

    def __init__(self, start: Callable[[], Executor], tasks: int = 2) -> None:
        self.start = start  # type: ignore[method-assign]
        self._tasks = tasks

    def start(self) -> Executor:
        raise NotImplementedError

    @property
    def tasks(self) -> int:
        return self._tasks

    @property
    def threads(self) -> int:
        return self._tasks


def alone() -> Executor:
    return ThreadPoolExecutor(1)


class DyingExecutor(Executor):
    """Threads that break together, as processes of a pool do, when one of them meets a deadly task."""

    def __init__(self, deadly: Callable[..., bool]) -> None:
        self._deadly = deadly
        self._threads = ThreadPoolExecutor(2)
        self._futures: list[Future[Any]] = []
        self._lock = threading.Lock()
        self._broken = False

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        if self._broken:
            raise BrokenProcessPool("broken")
        future: Future[Any] = Future()
        self._futures.append(future)
        self._threads.submit(self._run, future, fn, args)
        return future

    def _run(self, future: Future[Any], fn: Callable[..., Any], args: tuple[Any, ...]) -> None:
        dies = self._deadly(*args)
        result = None if dies else fn(*args)
        with self._lock:
            if dies:
                self._broken = True
            for other in self._futures if dies else [future]:
                if not other.done():
                    if self._broken:
                        other.set_exception(BrokenProcessPool("broken"))
                    else:
                        other.set_result(result)

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:
        self._threads.shutdown(wait=wait)


def sampled(*_: Any) -> Report:
    return Report("done")


def answered(folder: Path, liquid: str, state: Any, questions: Any, sign: Any) -> Report:
    rows = {question.point: {"stretch": question.problem["mass"]["ratio"]} for question in questions}
    RowFile.of(liquid, {"run_verdict": "converged"}, rows, {}, 0.0).write(folder)
    return Report("done", "", len(rows), 0, 1e-3)


@pytest.fixture
def plan(write: Callable[[str], str], monkeypatch: pytest.MonkeyPatch) -> SweepPlan:
    """A sweep whose tasks take no time."""
    monkeypatch.setattr(engine, "sample_liquid", sampled)
    monkeypatch.setattr(engine, "find_optima", answered)
    return load_sweep(write(SWEEP))


def run(plan: SweepPlan, crew: Crew, folder: Path) -> None:
    costs = Costs(dict.fromkeys(plan.liquids, 1.0), 1e-3, dict.fromkeys(plan.liquids, 16))
    run_sweep(plan, folder, crew, costs, retry=False, quiet=True)


def check_only_failed(plan: SweepPlan, folder: Path, culprits: set[str], words: str) -> None:
    known = known_points(folder)
    assert set(known.failed) == culprits and all(words in why for why in known.failed.values())
    assert set(known.done) == {point.name for point in plan.points} - culprits


def deadly_point(plan: SweepPlan, number: int) -> tuple[set[str], Callable[..., bool]]:
    culprit = plan.points[number].name

    def deadly(folder: Path, liquid: str, *rest: Any) -> bool:
        return isinstance(rest[1], list) and any(question.point == culprit for question in rest[1])

    return {culprit}, deadly


@pytest.mark.parametrize("number", [0, 5, 35])
def test_the_point_that_kills_workers_is_the_only_one_blamed(plan: SweepPlan, tmp_path: Path, number: int) -> None:
    culprits, deadly = deadly_point(plan, number)
    run(plan, Troubled(lambda: DyingExecutor(deadly)), tmp_path)
    check_only_failed(plan, tmp_path, culprits, "died over it 3 times, the last time with nothing beside it")


def test_without_running_alone_the_innocent_would_be_blamed(
    plan: SweepPlan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(sweep_queue, "_ALONE_AFTER", 99)
    culprits, deadly = deadly_point(plan, 5)
    run(plan, Troubled(lambda: DyingExecutor(deadly)), tmp_path)
    with pytest.raises(AssertionError):
        check_only_failed(plan, tmp_path, culprits, "died")


def test_a_sampling_that_kills_workers_fails_with_all_its_points(plan: SweepPlan, tmp_path: Path) -> None:
    victim = plan.points[0].liquid

    def deadly(folder: Path, liquid: str, *rest: Any) -> bool:
        return liquid == victim and not isinstance(rest[1], list)

    run(plan, Troubled(lambda: DyingExecutor(deadly)), tmp_path)
    check_only_failed(plan, tmp_path, {point.name for point in plan.liquids[victim]}, "sampling: the worker died")


def test_workers_that_only_die_end_the_sweep(write: Callable[[str], str], tmp_path: Path) -> None:
    plan = load_sweep(write(SWEEP.replace("[1, 2, 3]", str(list(range(12))))))
    with pytest.raises(WorkersLost, match="workers died 10 times in a row"):
        run(plan, Troubled(lambda: DyingExecutor(lambda *_: True)), tmp_path)
    assert WorkersLost.exit_code == 4


@pytest.mark.parametrize("troubles", [MOST_HINDRANCES - 1, MOST_HINDRANCES])
def test_what_hinders_a_task_may_pass(
    plan: SweepPlan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, troubles: int
) -> None:
    left = dict.fromkeys(plan.liquids, troubles)

    def hindered(folder: Path, liquid: str, *_: Any) -> Report:
        left[liquid] -= 1
        return Report("hindered", "no space left") if left[liquid] >= 0 else Report("done")

    monkeypatch.setattr(engine, "sample_liquid", hindered)
    run(plan, Troubled(alone, 1), tmp_path)
    everybody = {point.name for point in plan.points}
    check_only_failed(plan, tmp_path, set() if troubles < MOST_HINDRANCES else everybody, "sampling: no space left")


def test_what_is_lost_on_the_way_is_sent_again(
    plan: SweepPlan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(sweep_queue, "_SECONDS_OF_A_WAIT", 0.0)
    sent: set[str] = set()

    def lost_at_first(folder: Path, liquid: str, *_: Any) -> Report:
        if liquid not in sent:
            sent.add(liquid)
            raise ConnectionError("gone")
        return Report("done")

    monkeypatch.setattr(engine, "sample_liquid", lost_at_first)
    run(plan, Troubled(alone, 1), tmp_path)
    check_only_failed(plan, tmp_path, set(), "")


class Fixed(Troubled):
    """So many cores and workers."""

    def __init__(self, tasks: int, threads: int, threads_per_sampling: int | None = None) -> None:
        super().__init__(alone, tasks)
        self._threads = threads
        self.threads_per_sampling = threads_per_sampling

    @property
    def threads(self) -> int:
        return self._threads


def filled_queue(crew: Crew, n_liquids: int) -> Queue:
    queue = Queue(crew)
    points = {f"liquid {n}": [Point(n, f"point {n}", f"liquid {n}", "")] for n in range(n_liquids)}
    costs = {liquid: float(len(points) - n) for n, liquid in enumerate(points)}
    queue.add_liquids(points, costs, dict.fromkeys(points, WHOLE))
    return queue


def start_all(queue: Queue) -> list[Job]:
    running: list[Job] = []
    while (job := queue.next_job(running)) is not None:
        running.append(job)
    return running


@pytest.mark.parametrize(
    ("n_liquids", "tasks", "threads", "expected"),
    [
        (1, 8, 8, [8]),
        (2, 8, 8, [4, 4]),
        (3, 8, 8, [2, 3, 3]),
        (20, 8, 8, [1] * 8),
        (20, 2, 8, [4, 4]),
        (5, 4, 4, [1, 1, 1, 1]),
    ],
)
def test_samplings_share_the_cores(n_liquids: int, tasks: int, threads: int, expected: list[int]) -> None:
    running = start_all(filled_queue(Fixed(tasks, threads), n_liquids))
    assert [job.threads for job in running] == expected
    # The longest first.
    assert [job.liquid for job in running] == [f"liquid {n}" for n in range(len(expected))]


def test_threads_asked_for_are_kept_to(plan: SweepPlan) -> None:
    running = start_all(filled_queue(Fixed(8, 8, threads_per_sampling=3), 5))
    assert [job.threads for job in running] == [3, 3]
    # More than there are cores: one sampling after the other.
    assert [job.threads for job in start_all(filled_queue(Fixed(8, 4, threads_per_sampling=6), 5))] == [6]


def test_optima_of_what_is_there_come_before_samplings() -> None:
    queue = filled_queue(Fixed(2, 2), 3)
    queue.add_points("there", [Point(n, f"p{n}", "there", str(n % 2)) for n in range(6)])
    first, second = start_all(queue)
    # Families stay together, for they share their answers.
    assert [point.family for point in first.points] == ["0", "0", "0", "1", "1", "1"]
    assert not second.points


def test_tasks_grow_to_what_optima_take() -> None:
    queue = Queue(Fixed(2, 2))
    queue.add_points("there", [Point(n, f"p{n}", "there", "") for n in range(1000)])
    sizes = [len(job.points) for job in start_all(queue)]
    queue.took("there", 1.0)
    slow = queue.next_job([])
    queue.took("there", 1e-3)
    quick = queue.next_job([])
    assert slow is not None and quick is not None
    assert sizes[0] < 10 and len(slow.points) == 5 and len(quick.points) == 256


def test_partial_files_of_killed_writers_do_not_pile_up(plan: SweepPlan, tmp_path: Path) -> None:
    old, young = (tmp_path / "points" / f".{name}.json.1f.part" for name in ("old", "young"))
    old.parent.mkdir()
    for path in (old, young):
        path.write_text("{")
    os.utime(old, (0.0, 0.0))
    run(plan, Troubled(alone, 1), tmp_path)
    assert not old.exists() and young.exists()
    check_only_failed(plan, tmp_path, set(), "")


def test_progress_tells_counts_and_the_time_left(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    now = 1000.0
    monkeypatch.setattr(sweep_progress.time, "monotonic", lambda: now)
    with SweepProgress(2, 10, 100.0, quiet=False) as progress:
        assert not progress.is_due
        now += 40.0
        assert progress.is_due
        progress.show(20.0)
        progress.step(liquids=1, seconds=50.0)
        assert not progress.is_due
        now += 40.0
        progress.step(points=4, failures=1, seconds=0.0)
        progress.show(10.0)
        progress.step(liquids=1, points=5, seconds=50.0)
    assert capsys.readouterr().err.splitlines() == [
        "liquid 0/2, point 0/10, 3 min left",
        "liquid 1/2, point 0/10, 40 s left",
        "liquid 1/2, point 4/10, 1 failed, 53 s left",
        "liquid 2/2, point 9/10, 1 failed, 0 s left",
    ]


@pytest.mark.parametrize(("seconds", "words"), [(42.4, "42 s"), (700.0, "12 min"), (12345.0, "3.4 h")])
def test_durations(seconds: float, words: str) -> None:
    assert duration(seconds) == words
