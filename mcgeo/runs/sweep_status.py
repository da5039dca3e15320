"""How far a sweep is, read from its folder while it runs or afterwards."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from mcgeo.runs.sweep_estimate import costs_of, liquid_plans
from mcgeo.runs.sweep_note import noted_run
from mcgeo.runs.sweep_plan import SweepPlan
from mcgeo.runs.sweep_rows import known_points, row_files
from mcgeo.runs.sweep_tasks import liquid_progress


def sweep_status(plan: SweepPlan, folder: Path) -> dict[str, Any]:
    """Points and liquids done, failed, in progress and left, and about how long the rest takes.

    The time is that estimated, corrected by what the optima done so far took.

    Raises
    ------
    StorageError
        If no sweep has begun in the folder, or a file of rows is damaged.
    ConfigError
        If a liquid of the configuration cannot be.
    """
    threads = noted_run(folder)["threads"]
    known, plans = known_points(folder, plan.liquids), liquid_plans(plan)
    costs = costs_of(plan, plans)
    names = {point.name for point in plan.points}
    done, failed = names & known.done.keys(), names & known.failed.keys()
    liquids = []
    seconds = 0.0
    for liquid, points in plan.liquids.items():
        progress = liquid_progress(folder, liquid)
        missing = {point.name for point in points} - done - failed
        blocks = plans[liquid]["blocks"]
        if missing and not progress.complete and blocks:
            seconds += costs.liquids[liquid] * max(1.0 - progress.blocks / blocks, 0.0)
        liquids.append(
            {
                "liquid": liquid,
                "state": plans[liquid]["state"],
                "blocks_done": progress.blocks,
                "blocks": blocks,
                "complete": progress.complete or not blocks,
                "points": len(points),
                "points_left": sum(point.name in missing for point in points),
            }
        )
    left = len(names) - len(done) - len(failed)
    seconds += left * (_seconds_per_optimum(folder) or costs.optimum)
    return {
        "points": len(plan.points),
        "done": sum(point.name in done for point in plan.points),
        "failed": sum(point.name in failed for point in plan.points),
        "left": sum(point.name not in done and point.name not in failed for point in plan.points),
        "liquids": liquids,
        "estimated_seconds_left": round(seconds / threads, 1),
        "threads": threads,
        "folder": str(folder),
    }


def _seconds_per_optimum(folder: Path) -> float:
    """Of the optima found so far; zero without any."""
    files = list(row_files(folder))
    n = sum(len(file.rows) for file in files)
    return sum(file.seconds for file in files) / n if n else 0.0
