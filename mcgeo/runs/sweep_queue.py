"""What is still to be done in a sweep, and what of it may start now."""

from __future__ import annotations

import math
import time
from collections import deque
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

from mcgeo.runs.executors import Crew
from mcgeo.runs.sweep_plan import Point
from mcgeo.runs.sweep_steps import WHOLE, Step

# A task that ran when its worker died comes again, from its third start on alone, so that it can be told who is to
# blame; one that meets a passing hindrance, too.
MOST_DEATHS = 3
_ALONE_AFTER = 2
MOST_HINDRANCES = 3
# What another process is at, perhaps on a machine that has died and whose locks the file system has yet to give back.
MOST_WAITS = 60
_SECONDS_OF_A_WAIT = 5.0
# Optima of one task: enough that starting it costs nothing, few enough that all workers have some to do to the end.
_SECONDS_PER_TASK = 5.0
_MOST_POINTS = 256
_FIRST_POINTS = 8


@dataclass(frozen=True)
class Job:
    """One task: a step of a liquid's sampling (without points), or points of it.

    Attributes
    ----------
    liquid : str
    points : tuple of Point
    step : Step
    threads : int
    deaths, hindrances, waits : int
        How often a worker died over it, how often it was hindered, and how often another process was at it.
    blocks : int
        That its liquid had when a worker died over it for the last time.
    """

    liquid: str
    points: tuple[Point, ...] = ()
    step: Step = WHOLE
    threads: int = 1
    deaths: int = 0
    hindrances: int = 0
    waits: int = 0
    blocks: int = 0


class Queue:
    """Jobs by liquid: samplings, the longest first, and the points of liquids that are there."""

    def __init__(self, crew: Crew) -> None:
        self._crew = crew
        self._samplings: deque[Job] = deque()
        self._waiting: dict[str, tuple[Point, ...]] = {}
        self._steps_left: dict[str, int] = {}
        self._ready: dict[str, deque[Point]] = {}
        self._again: deque[Job] = deque()
        self._later: deque[tuple[float, Job]] = deque()
        self._suspects: deque[Job] = deque()
        self._seconds_per_point: dict[str, float] = {}

    def add_liquids(
        self, waiting: Mapping[str, Iterable[Point]], costs: Mapping[str, float], steps: Mapping[str, Step]
    ) -> None:
        """Liquids to sample, with their points, their cost and the first step of each."""
        self._waiting.update({liquid: _by_family(points) for liquid, points in waiting.items()})
        self._steps_left.update(dict.fromkeys(waiting, 1))
        ordered = sorted(waiting, key=lambda liquid: -costs[liquid])
        self._samplings.extend(Job(liquid, step=steps[liquid]) for liquid in ordered)

    def add_points(self, liquid: str, points: Iterable[Point]) -> None:
        """Points of a liquid that is there."""
        self._ready[liquid] = deque(_by_family(points))

    def sampled(self, job: Job) -> bool:
        """A step of a sampling is done; true if the liquid is there now."""
        liquid = job.liquid
        if self._is_given_up(job):
            return False
        self._steps_left[liquid] -= 1
        if self._steps_left[liquid]:
            return False
        steps = job.step.next()
        if not steps:
            self.add_points(liquid, self._waiting.pop(liquid))
            return True
        # What has been begun is ended before other liquids begin.
        self._steps_left[liquid] = len(steps)
        self._samplings.extendleft(Job(liquid, step=step) for step in reversed(steps))
        return False

    def give_up(self, liquid: str) -> tuple[Point, ...]:
        """The points of a liquid that cannot be sampled; none when another step of it has been given up before."""
        points = self._waiting.pop(liquid, ())
        self._samplings = deque(job for job in self._samplings if not self._is_given_up(job))
        return points

    def _is_given_up(self, job: Job) -> bool:
        return not job.points and job.liquid not in self._waiting

    def again(self, job: Job) -> None:
        """Put a job back."""
        if self._is_given_up(job):
            return
        if not self._alone(job):
            self._again.append(job)
        elif len(job.points) > 1:
            self._suspects.extend(replace(job, points=(point,)) for point in job.points)
        else:
            self._suspects.append(job)

    def later(self, job: Job) -> None:
        """Put a job back for a while."""
        if self._is_given_up(job):
            return
        self._later.append((time.monotonic() + _SECONDS_OF_A_WAIT, job))

    def took(self, liquid: str, seconds_per_point: float) -> None:
        """How long an optimum of this liquid took, from which the size of the next task follows."""
        self._seconds_per_point[liquid] = seconds_per_point

    def __bool__(self) -> bool:
        return bool(self._samplings or self._ready or self._again or self._later or self._suspects)

    def next_job(self, in_flight: Iterable[Job]) -> Job | None:
        """A job that may start beside those in flight; None if it is better to wait."""
        running = list(in_flight)
        free = self._crew.threads - sum(job.threads for job in running)
        if len(running) >= self._crew.tasks or any(map(self._alone, running)) or (running and free < 1):
            return None
        if self._again:
            return self._again.popleft()
        if self._later and self._later[0][0] <= time.monotonic():
            return self._later.popleft()[1]
        for liquid, points in self._ready.items():
            chunk = tuple(points.popleft() for _ in range(min(len(points), self._task_size(liquid, len(points)))))
            if not points:
                del self._ready[liquid]
            return Job(liquid, chunk)
        if self._samplings:
            threads = self._sampling_threads(free, self._crew.tasks - len(running))
            if running and threads > free:
                return None
            return replace(self._samplings.popleft(), threads=threads)
        return self._suspects.popleft() if self._suspects and not running else None

    def _alone(self, job: Job) -> bool:
        """Whether it must run by itself."""
        return self._crew.dies_as_one and job.deaths >= _ALONE_AFTER

    def _task_size(self, liquid: str, left: int) -> int:
        if liquid not in self._seconds_per_point:
            return _FIRST_POINTS
        wanted = int(_SECONDS_PER_TASK / max(self._seconds_per_point[liquid], 1e-6))
        return max(1, min(wanted, _MOST_POINTS, math.ceil(left / self._crew.tasks)))

    def _sampling_threads(self, free: int, slots: int) -> int:
        if self._crew.threads_per_sampling is not None:
            return self._crew.threads_per_sampling
        return max(1, free // min(slots, len(self._samplings)))


def _by_family(points: Iterable[Point]) -> tuple[Point, ...]:
    return tuple(sorted(points, key=lambda point: (point.family, point.position)))
