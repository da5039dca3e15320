"""What a sweep will cost, before anything runs."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from mcgeo.errors import ConfigError, GeometryError
from mcgeo.runs.config_faults import show
from mcgeo.runs.parts import require_divisible
from mcgeo.runs.plan import optimum_seconds, sampling_plan
from mcgeo.runs.sweep import Costs
from mcgeo.runs.sweep_plan import SweepPlan

_MEGABYTES_PER_ROW = 1e-3
# An optimum's cost is taken from so many points, spread over the sweep.
_POINTS_ASKED = 200
_SHOWN_FAULTS = 10


def liquid_plans(plan: SweepPlan) -> dict[str, dict[str, Any]]:
    """The plan of every sampling, with the first point of it.

    Raises
    ------
    ConfigError
        With one line per liquid whose cell does not suit its state, or whose walkers cannot be divided, the first ten.
    """
    found, faults = {}, []
    for liquid, points in plan.liquids.items():
        try:
            keys = plan.resolved(points[0])
            found[liquid] = sampling_plan(keys)
            if plan.settings.walker_parts > 1 and found[liquid]["blocks"]:
                require_divisible(keys, plan.settings.walker_parts)
        except (GeometryError, ConfigError) as fault:
            values = ", ".join(f"{name} {show(value)}" for name, value in plan.values(points[0]).items())
            faults.append(f"{plan.file}: at {values}: {fault}")
    if faults:
        more = [f"{plan.file}: and {len(faults) - _SHOWN_FAULTS} more faults"] * (len(faults) > _SHOWN_FAULTS)
        raise ConfigError([*faults[:_SHOWN_FAULTS], *more])
    return found


def costs_of(plan: SweepPlan, plans: Mapping[str, Mapping[str, Any]]) -> Costs:
    """Seconds of one core, and blocks."""
    asked = plan.points[:: -(-len(plan.points) // _POINTS_ASKED)]
    optimum = sum(optimum_seconds(plan.resolved(point)["problem"]) for point in asked) / len(asked)
    return Costs(
        {liquid: keys["core_seconds"] for liquid, keys in plans.items()},
        optimum,
        {liquid: keys["blocks"] for liquid, keys in plans.items()},
    )


def sweep_summary(plan: SweepPlan, cores: int) -> dict[str, Any]:
    """The JSON object of ``check`` for a sweep: points, liquids and which points share them, time and disk.

    Parameters
    ----------
    cores : int
        Over which the time is divided.

    Raises
    ------
    ConfigError
        As `liquid_plans`.
    """
    plans = liquid_plans(plan)
    costs = costs_of(plan, plans)
    sampling = sum(costs.liquids.values())
    scanning = costs.optimum * len(plan.points)
    return {
        "axes": [
            {"keys": [key.name for key in axis.keys], "values": len(axis), "spacing": axis.spacing}
            for axis in plan.axes
        ],
        "points": len(plan.points),
        "liquids": [
            {
                "liquid": liquid,
                "state": plans[liquid]["state"],
                "to_sample": plans[liquid]["blocks"] > 0,
                "points": len(points),
                "first_point": plan.values(points[0]),
                "estimated_seconds": round(costs.liquids[liquid] / cores, 1),
            }
            for liquid, points in plan.liquids.items()
        ],
        "threads": cores,
        "estimated_sampling_seconds": round(sampling / cores, 1),
        "estimated_scan_seconds": round(scanning / cores, 1),
        "estimated_seconds": round((sampling + scanning) / cores, 1),
        "estimated_megabytes": round(
            sum(keys["estimated_megabytes"] for keys in plans.values()) + _MEGABYTES_PER_ROW * len(plan.points), 2
        ),
    }
