"""How far a sweep is, read from its folder while it runs or afterwards."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from mcgeo.runs.sweep import Costs
from mcgeo.runs.sweep_estimate import costs_of, liquid_plans
from mcgeo.runs.sweep_liquids import LiquidProgress, liquid_progress
from mcgeo.runs.sweep_note import noted_run
from mcgeo.runs.sweep_plan import SweepPlan
from mcgeo.runs.sweep_rows import known_points, row_files


def sweep_status(plan: SweepPlan, folder: Path) -> dict[str, Any]:
    """Points and liquids done, failed, in progress and left, and about how long the rest takes.

    The time is that estimated, corrected by what samplings and optima took so far.

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
    status = {
        point.name: "done" if point.name in known.done else "failed" if point.name in known.failed else "left"
        for point in plan.points
    }
    progress = {liquid: liquid_progress(folder, liquid) for liquid in plan.liquids}
    left = {
        liquid: sum(status[point.name] == "left" for point in points) for liquid, points in plan.liquids.items()
    }
    waiting = [liquid for liquid in left if left[liquid] and plans[liquid]["blocks"] and not progress[liquid].complete]
    seconds = _slowness(progress, costs) * sum(
        costs.liquids[liquid] * max(1.0 - progress[liquid].blocks / costs.blocks[liquid], 0.0) for liquid in waiting
    )
    seconds += list(status.values()).count("left") * (_seconds_per_optimum(folder) or costs.optimum)
    return {
        "points": len(plan.points),
        **{name: sum(status[point.name] == name for point in plan.points) for name in ("done", "failed", "left")},
        "liquids": [
            {
                "liquid": liquid,
                "state": plans[liquid]["state"],
                "blocks_done": progress[liquid].blocks,
                "blocks": plans[liquid]["blocks"],
                "complete": progress[liquid].complete or not plans[liquid]["blocks"],
                "points": len(points),
                "points_left": left[liquid],
            }
            for liquid, points in plan.liquids.items()
        ],
        "estimated_seconds_left": round(seconds / threads, 1),
        "threads": threads,
        "folder": str(folder),
    }


def _slowness(progress: Mapping[str, LiquidProgress], costs: Costs) -> float:
    """What the blocks so far took over what they were estimated to take; 1 without any."""
    begun = [liquid for liquid in progress if progress[liquid].blocks and costs.blocks[liquid]]
    took = sum(progress[liquid].core_seconds for liquid in begun)
    wanted = sum(costs.liquids[liquid] * progress[liquid].blocks / costs.blocks[liquid] for liquid in begun)
    return took / wanted if took > 0.0 and wanted > 0.0 else 1.0


def _seconds_per_optimum(folder: Path) -> float:
    """Of the optima found so far; zero without any."""
    files = list(row_files(folder))
    n = sum(len(file.rows) for file in files)
    return sum(file.seconds for file in files) / n if n else 0.0
