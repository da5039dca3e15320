"""A sweep divided among jobs that know nothing of each other, and put together again."""

from __future__ import annotations

import os
import re
import shutil
from collections.abc import Collection, Iterable, Sequence
from dataclasses import replace
from itertools import pairwise
from pathlib import Path
from typing import NamedTuple

from mcgeo.errors import ConfigError, StorageError
from mcgeo.runs.atomic import whole_file
from mcgeo.runs.sample import LIQUID_FILE
from mcgeo.runs.sweep import Costs
from mcgeo.runs.sweep_liquids import LIQUIDS, liquid_progress
from mcgeo.runs.sweep_plan import Point, SweepPlan
from mcgeo.runs.sweep_rows import POINTS, row_files

SHARDS = "shards"
_NAME = re.compile(r"([1-9]\d*)/([1-9]\d*)")
_TICKS_PER_SECOND = 1000


class Shard(NamedTuple):
    """One of ``of`` parts of a sweep, counted from 1."""

    number: int
    of: int

    def __str__(self) -> str:
        return f"{self.number}/{self.of}"

    @property
    def label(self) -> str:
        """Name of its files."""
        return f"{self.number}-of-{self.of}"


def shard_from(text: str) -> Shard:
    """The shard written as ``3/40``.

    Raises
    ------
    ConfigError
        If it is written otherwise, or is none of so many.
    """
    match = _NAME.fullmatch(text)
    shard = Shard(*map(int, match.groups())) if match else None
    if shard is None or shard.number > shard.of:
        raise ConfigError([f"--shard {text}: must be I/N with I from 1 to N, as 3/40"])
    return shard


def shard_plans(plan: SweepPlan, costs: Costs, of: int) -> list[SweepPlan]:
    """The sweep in as many plans, about equally costly by the estimate, the same on every machine.

    The points of a liquid that is to be sampled stay with it: optima cost little beside it, and a shard does not wait
    for another. Points of liquids of the catalogue are divided among all. Longest first, each to the plan that has
    least so far.
    """
    pieces = sorted(_pieces(plan, costs, of), key=lambda piece: (-piece[0], piece[1][0].name, piece[1][0].position))
    loads = [0] * of
    dealt: list[list[Point]] = [[] for _ in range(of)]
    for weight, points in pieces:
        least = loads.index(min(loads))
        loads[least] += weight
        dealt[least] += points
    return [replace(plan, points=sorted(points, key=lambda point: point.position)) for points in dealt]


def _pieces(plan: SweepPlan, costs: Costs, of: int) -> Iterable[tuple[int, list[Point]]]:
    """What stays together, with its cost in whole ticks, which no machine rounds otherwise when it adds them."""
    for liquid, points in plan.liquids.items():
        if costs.liquids[liquid]:
            seconds = costs.liquids[liquid] + costs.optimum * len(points)
            yield 1 + round(seconds * _TICKS_PER_SECOND), points
            continue
        ends = [number * len(points) // of for number in range(of + 1)]
        for piece in (points[first:last] for first, last in pairwise(ends) if first < last):
            yield 1 + round(costs.optimum * len(piece) * _TICKS_PER_SECOND), piece


def note_shard(folder: Path, shard: Shard) -> None:
    """Leave in the folder that this shard was started."""
    place = folder / SHARDS
    place.mkdir(parents=True, exist_ok=True)
    (place / shard.label).touch()


def gather(folders: Sequence[Path], out: Path) -> None:
    """Bring together in one folder the rows and finished liquids of others.

    Result files are never changed in place, so that those on the same disk can be the same file under two names.

    Raises
    ------
    StorageError
        If one of them is not the folder of a sweep, or a file of rows is damaged.
    OSError
        If a file cannot be written.
    """
    for folder in folders:
        if not any((folder / name).is_dir() for name in (POINTS, SHARDS)):
            raise StorageError(f"{folder}: not the folder of a sweep: it has neither {POINTS}/ nor {SHARDS}/")
    for folder in folders:
        if out.exists() and folder.samefile(out):
            continue
        for file in row_files(folder):
            file.write(out)
        for path in (folder / SHARDS).glob("*-of-*"):
            (out / SHARDS).mkdir(parents=True, exist_ok=True)
            (out / SHARDS / path.name).touch()
        for path in (folder / LIQUIDS).glob("*"):
            if liquid_progress(folder, path.name).complete and not liquid_progress(out, path.name).complete:
                _bring(path / LIQUID_FILE, out / LIQUIDS / path.name / LIQUID_FILE)


def _bring(path: Path, target: Path) -> None:
    with whole_file(target) as temporary:
        try:
            os.link(path, temporary)
        except OSError:
            shutil.copyfile(path, temporary)


def unfinished_shards(plan: SweepPlan, costs: Costs, folder: Path, known: Collection[str]) -> list[Shard]:
    """Shards with points that the folder does not know; none where it cannot be told how many shards there are.

    Parameters
    ----------
    known : collection of str
        Points that have a row, and those that failed.
    """
    counts = {int(path.name.rpartition("-")[2]) for path in (folder / SHARDS).glob("*-of-*")}
    if len(counts) != 1:
        return []
    of = counts.pop()
    plans = shard_plans(plan, costs, of)
    return [
        Shard(number, of)
        for number, part in enumerate(plans, start=1)
        if any(point.name not in known for point in part.points)
    ]
