"""What a sweep has come to, as lines of text."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from mcgeo.runs.config_faults import show
from mcgeo.runs.sweep_progress import duration

_SHOWN, _SHOWN_LIQUIDS = 5, 12


def sweep_text(summary: Mapping[str, Any]) -> str:
    """Counts of points, verdicts, the first failures, and where the table is."""
    rows = [(", ".join(axis["keys"]), _values(axis)) for axis in summary["axes"]]
    if "shard" in summary:
        rows.append(("shard", summary["shard"]))
    rows += [
        ("points", f"{summary['points']} over {_plural(summary['liquids'], 'liquid')}"),
        ("done", str(summary["done"])),
    ]
    if summary["not_converged"]:
        rows.append(("of liquids not converged", f"{summary['not_converged']}; raise sampling.sweeps or walkers"))
    if summary["missing"]:
        rows.append(("missing", f"{summary['missing']}; the same command computes them"))
    if summary.get("unfinished_shards"):
        rows.append(("shards not finished", ", ".join(summary["unfinished_shards"])))
    if summary["failed"]:
        rows.append(("failed", f"{summary['failed']}; --retry tries them again"))
    if len(summary["versions"]) > 1:
        listed = ", ".join(summary["versions"])
        rows.append(("rows by versions", f"{listed}; remove points/ to have all computed by one"))
    if summary["shapes"]:
        rows.append(("shapes", ", ".join(f"{count} {word}" for word, count in summary["shapes"].items())))
    rows.append(("table", summary["table"] or "with --gather, when all shards are done"))
    return "\n".join([*_lines(rows), *_failures(summary["failures"])])


def sweep_plan_text(plan: Mapping[str, Any]) -> str:
    """What a sweep will do and cost: points, the liquids they share, time and disk."""
    liquids = plan["liquids"]
    rows = [
        *((", ".join(axis["keys"]), _axis_words(axis)) for axis in plan["axes"]),
        ("points", str(plan["points"])),
        ("liquids to sample", str(sum(liquid["to_sample"] for liquid in liquids))),
        *((liquid["liquid"], _liquid_words(liquid)) for liquid in liquids[:_SHOWN_LIQUIDS]),
    ]
    if len(liquids) > _SHOWN_LIQUIDS:
        rows.append(("...", f"{len(liquids) - _SHOWN_LIQUIDS} more, all with --json"))
    rows += [
        ("sampling", duration(plan["estimated_sampling_seconds"])),
        ("optima", duration(plan["estimated_scan_seconds"])),
        ("in all", f"{duration(plan['estimated_seconds'])} on {_plural(plan['threads'], 'core')}"),
        ("disk", f"{plan['estimated_megabytes']:.3g} MB"),
    ]
    return "\n".join(_lines(rows))


def status_text(status: Mapping[str, Any]) -> str:
    """How far a sweep is."""
    liquids = status["liquids"]
    begun = [liquid for liquid in liquids if liquid["blocks_done"] and not liquid["complete"]]
    whole = sum(liquid["complete"] for liquid in liquids)
    rows = [
        ("points done", f"{status['done']} of {status['points']}"),
        ("failed", str(status["failed"])),
        ("left", str(status["left"])),
        ("liquids sampled", f"{whole} of {len(liquids)}"),
        *(
            (liquid["liquid"], f"{liquid['state']}, block {liquid['blocks_done']} of {liquid['blocks']}")
            for liquid in begun
        ),
        ("time left", f"about {duration(status['estimated_seconds_left'])} on {_plural(status['threads'], 'thread')}"),
    ]
    return "\n".join(_lines(rows))


def _axis_words(axis: Mapping[str, Any]) -> str:
    spacing = f", {axis['spacing']}" if axis["spacing"] in ("linear", "logarithmic") else ""
    return f"{_plural(axis['values'], 'value')}{spacing}"


def _liquid_words(liquid: Mapping[str, Any]) -> str:
    time = duration(liquid["estimated_seconds"]) if liquid["to_sample"] else "of the catalogue"
    return (
        f"{liquid['state']}, {time}, serves {_plural(liquid['points'], 'point')}, "
        f"the first at {_point_words(liquid['first_point'])}"
    )


def _point_words(values: Mapping[str, Any]) -> str:
    return ", ".join(f"{name} {value if isinstance(value, str) else show(value)}" for name, value in values.items())


def _lines(rows: list[tuple[str, str]]) -> list[str]:
    width = max(len(name) for name, _ in rows)
    return [f"{name.ljust(width)}  {text}" for name, text in rows]


def _plural(n: int, noun: str) -> str:
    return f"{n} {noun}{'s' * (n != 1)}"


def _values(axis: Mapping[str, Any]) -> str:
    first, last, n = axis["values"][0][0], axis["values"][0][-1], len(axis["values"][0])
    if axis["spacing"] in ("linear", "logarithmic"):
        return f"{first:g} to {last:g}, {n} values, {axis['spacing']}"
    return _plural(n, "value")


def _failures(failures: list[Mapping[str, Any]]) -> list[str]:
    lines = [f"failed at {_point_words(failure['point'])}: {failure['error']}" for failure in failures[:_SHOWN]]
    more = len(failures) - _SHOWN
    return lines + [f"and {more} more, all in sweep.json"] * (more > 0)
