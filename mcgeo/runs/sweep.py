"""The engine of sweeps: hand out samplings and optima to an executor until every point has its row.

It knows nothing of where the tasks run. What is done is read from the folder, so that any command that runs it again
does what is missing, be it after an interruption, with more workers, or for changed axes.
"""

from __future__ import annotations

from collections.abc import Mapping
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, CancelledError, Executor, Future, wait
from dataclasses import dataclass, replace
from pathlib import Path

from mcgeo.errors import McgeoError, RunInterrupted
from mcgeo.runs.executors import Crew
from mcgeo.runs.signals import StopFlag, stop_on_signals
from mcgeo.runs.sweep_liquids import LIQUIDS, file_progress, liquid_progress, needs_sampling
from mcgeo.runs.sweep_note import note_run
from mcgeo.runs.sweep_plan import Point, SweepPlan
from mcgeo.runs.sweep_progress import SweepProgress
from mcgeo.runs.sweep_queue import MOST_DEATHS, MOST_HINDRANCES, MOST_WAITS, Job, Queue
from mcgeo.runs.sweep_rows import RowFile, known_points, tidy
from mcgeo.runs.sweep_steps import WHOLE, Step, first_step
from mcgeo.runs.sweep_stop import SharedStopFlag
from mcgeo.runs.sweep_tasks import Question, Report, find_optima, sample_liquid

_SECONDS_BETWEEN_LOOKS = 0.5
_MOST_LOOKED_AT = 64
# Executors that break so often in a row, without one task done, will not do better the next time.
_MOST_BREAKS = 10


class WorkersLost(McgeoError):
    """Workers die one after the other before anything is done."""

    exit_code = 4


@dataclass(frozen=True)
class Costs:
    """Estimated seconds of one core, of every liquid to sample and of one optimum, and the blocks of every liquid."""

    liquids: Mapping[str, float]
    optimum: float
    blocks: Mapping[str, int]


def wanted_points(plan: SweepPlan, folder: Path, *, retry: bool) -> list[Point]:
    """Points without a row, each once; those that have failed before are among them only with ``retry``."""
    known = known_points(folder, plan.liquids)
    left = {
        point.name: point
        for point in plan.points
        if point.name not in known.done and (retry or point.name not in known.failed)
    }
    return list(left.values())


def run_sweep(
    plan: SweepPlan, folder: Path, crew: Crew, costs: Costs, *, retry: bool, quiet: bool, label: str = ""
) -> None:
    """Do what is missing of a sweep.

    Parameters
    ----------
    folder : Path
        Of the sweep: ``liquids/`` and ``points/`` are in it.
    retry : bool
        Whether points that have failed before are tried again.
    label : str
        Tells this run from others in the same folder.

    Raises
    ------
    RunInterrupted
        On Ctrl-C or a request to terminate, once all workers have stopped; what is done is in the folder.
    WorkersLost
        If workers keep dying.
    """
    wanted: dict[str, list[Point]] = {}
    for point in wanted_points(plan, folder, retry=retry):
        wanted.setdefault(point.liquid, []).append(point)
    tidy(folder)
    # Workers of a cluster may stand in other folders than this process.
    stop = SharedStopFlag(folder.absolute() / f".stop{label}")
    run = _Run(plan, folder, crew, costs, wanted, stop.path)
    with stop, stop_on_signals(stop), run.progress(quiet):
        run.until_done(stop)
    if stop.is_set():
        raise RunInterrupted(
            f"interrupted: what is done is in {folder}; the same command goes on from there", stop.signal_number
        )


class _Run:
    """One run of the engine."""

    def __init__(
        self,
        plan: SweepPlan,
        folder: Path,
        crew: Crew,
        costs: Costs,
        wanted: Mapping[str, list[Point]],
        stop_file: Path,
    ) -> None:
        self._plan, self._folder, self._crew, self._costs = plan, folder, crew, costs
        self._queue = Queue(crew)
        self._place = folder.absolute()
        self._sign = crew.stop_sign(stop_file)
        self._in_flight: dict[Future[Report], Job] = {}
        self._breaks = 0
        self._any_point = {liquid: points[0] for liquid, points in wanted.items()}
        waiting = {}
        for liquid, points in wanted.items():
            if needs_sampling(folder, liquid, plan.resolved(points[0])["state"]):
                waiting[liquid] = points
            else:
                self._queue.add_points(liquid, points)
        self._queue.add_liquids(waiting, costs.liquids, {liquid: self._first_step(liquid) for liquid in waiting})
        self._n_liquids, self._n_points = len(waiting), sum(map(len, wanted.values()))
        self._seconds = sum(costs.liquids[liquid] for liquid in waiting) + costs.optimum * self._n_points

    def _first_step(self, liquid: str) -> Step:
        # A sampling that was begun whole is ended whole.
        begun = file_progress(WHOLE.file(self._folder / LIQUIDS / liquid)).blocks > 0
        return first_step(1 if begun else self._plan.settings.walker_parts)

    def progress(self, quiet: bool) -> SweepProgress:
        """Its progress, to be entered."""
        self._progress = SweepProgress(self._n_liquids, self._n_points, self._seconds, quiet)
        return self._progress

    def until_done(self, stop: StopFlag) -> None:
        """Hand out jobs and take reports until all is done or the flag is set, and no worker is at work."""
        if not self._queue:
            note_run(self._folder, self._plan, self._crew)
            return
        executor = self._crew.start()
        try:
            note_run(self._folder, self._plan, self._crew)
            while self._in_flight or (self._queue and not stop.is_set()):
                broken = not stop.is_set() and self._hand_out(executor, stop)
                if stop.is_set():
                    for future in self._in_flight:
                        future.cancel()
                if not self._in_flight:
                    stop.wait(_SECONDS_BETWEEN_LOOKS)
                done, _ = wait(self._in_flight, timeout=_SECONDS_BETWEEN_LOOKS, return_when=FIRST_COMPLETED)
                for future in done:
                    broken |= self._take(future, self._in_flight.pop(future), stop)
                if broken:
                    executor = self._renewed(executor)
                if self._progress.is_due:
                    self._progress.show(self._seconds_in_flight())
        except BaseException:
            # Nobody waits for a sampling of hours whose sweep has failed.
            stop.set()
            raise
        finally:
            executor.shutdown(wait=True, cancel_futures=True)

    def _hand_out(self, executor: Executor, stop: StopFlag) -> bool:
        """Start what may start; true if the executor has broken."""
        while (job := self._queue.next_job(self._in_flight.values())) is not None:
            try:
                future = self._submit(executor, job)
            except BrokenExecutor:
                self._queue.again(job)
                return True
            self._in_flight[future] = job
        return False

    def _seconds_in_flight(self) -> float:
        """Estimated seconds behind the blocks that running samplings have kept."""
        liquids = list(dict.fromkeys(job.liquid for job in self._in_flight.values() if not job.points))
        # Of thousands some stand for all: each is a file to be opened.
        seen = liquids[:: -(-len(liquids) // _MOST_LOOKED_AT) or 1]
        seconds = sum(self._share(liquid) * self._costs.liquids[liquid] for liquid in seen)
        return seconds * len(liquids) / max(len(seen), 1)

    def _share(self, liquid: str) -> float:
        return liquid_progress(self._folder, liquid).blocks / self._costs.blocks[liquid]

    def _submit(self, executor: Executor, job: Job) -> Future[Report]:
        if not job.points:
            keys = self._plan.resolved(self._any_point[job.liquid])
            return executor.submit(sample_liquid, self._place, job.liquid, job.step, keys, job.threads, self._sign)
        resolved = [self._plan.resolved(point) for point in job.points]
        questions = [
            Question(point.name, keys["problem"], keys["material"])
            for point, keys in zip(job.points, resolved, strict=True)
        ]
        return executor.submit(find_optima, self._place, job.liquid, resolved[0]["state"], questions, self._sign)

    def _take(self, future: Future[Report], job: Job, stop: StopFlag) -> bool:
        """What a task reports; true if the executor has broken."""
        try:
            report = future.result()
        except CancelledError:
            self._queue.again(job)
            return False
        except BrokenExecutor:
            self._died(job)
            return True
        except self._crew.fatal:
            self._failed(job, "workers died over it until the cluster gave it up; is there memory enough for it?")
            return False
        except Exception as fault:
            # Tasks catch all errors of their own: this one is of the way there or back.
            self._busy(job, f"{type(fault).__name__}: {fault}")
            return False
        self._breaks = 0
        if report.end == "done" and job.points:
            self._progress.step(
                points=report.rows,
                failures=report.failures,
                seconds=self._costs.optimum * (report.rows + report.failures),
            )
        if report.end == "done":
            self._done(job, report)
        elif report.end == "failed":
            self._failed(job, report.words)
        elif report.end == "hindered":
            self._hindered(job, report.words)
        elif report.end == "busy":
            self._busy(job, report.words)
        elif not stop.is_set():
            # Somebody has stopped the worker, but not the sweep.
            self._died(job)
        return False

    def _done(self, job: Job, report: Report) -> None:
        if job.points:
            self._queue.took(job.liquid, report.seconds / len(job.points))
            return
        if self._queue.sampled(job):
            self._progress.step(liquids=1, seconds=self._costs.liquids[job.liquid])

    def _failed(self, job: Job, words: str) -> None:
        points = job.points
        if not points:
            points = self._queue.give_up(job.liquid)
            if not points:
                return
            words = f"sampling: {words}"
            self._progress.step(liquids=1, seconds=self._costs.liquids[job.liquid])
        RowFile(job.liquid, failed={point.name: words for point in points}).write(self._folder)
        self._progress.step(failures=len(points), seconds=self._costs.optimum * len(points))

    def _hindered(self, job: Job, words: str) -> None:
        job = replace(job, hindrances=job.hindrances + 1)
        if job.hindrances >= MOST_HINDRANCES:
            self._failed(job, words)
        else:
            self._queue.again(job)

    def _busy(self, job: Job, words: str) -> None:
        job = replace(job, waits=job.waits + 1)
        if job.waits >= MOST_WAITS:
            self._failed(job, words)
        else:
            self._queue.later(job)

    def _died(self, job: Job) -> None:
        blocks = file_progress(job.step.file(self._folder / LIQUIDS / job.liquid)).blocks
        deaths = 1 if blocks > job.blocks else job.deaths + 1
        job = replace(job, deaths=deaths, blocks=blocks)
        if job.deaths >= MOST_DEATHS:
            alone = ", the last time with nothing beside it" * self._crew.dies_as_one
            self._failed(job, f"the worker died over it {job.deaths} times{alone}")
        else:
            self._queue.again(job)

    def _renewed(self, executor: Executor) -> Executor:
        """A new executor; all that was in flight in the old one has died with it."""
        executor.shutdown(wait=True, cancel_futures=True)
        for future, job in list(self._in_flight.items()):
            del self._in_flight[future]
            self._take(future, job, StopFlag())
        self._breaks += 1
        if self._breaks >= _MOST_BREAKS:
            raise WorkersLost(
                f"workers died {self._breaks} times in a row before one task was done; what is done is in "
                f"{self._folder}. Is there memory enough for {self._crew.tasks} workers?"
            )
        return self._crew.start()
